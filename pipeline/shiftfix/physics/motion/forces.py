"""Forces on an Earth satellite at the nodes of a collocation: acceleration, its gradients, its force parameters.

Left out, with their sizes: tides of Earth and ocean (3e-7 m/s2 in LEO, 1e-9 at navigation satellites), other planets
(2e-10), albedo and thermal radiation (1e-8, 1e-9), frame dragging and geodesic precession (1e-10, 2e-11).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shiftfix.physics.constants import (
    EARTH_RADIUS_M,
    GM_EARTH_M3_S2,
    GM_MOON_M3_S2,
    GM_SUN_M3_S2,
    OMEGA_EARTH_RAD_S,
    SPEED_OF_LIGHT_M_S,
    WGS84_F,
)
from shiftfix.physics.motion.atmosphere import TOP_M, bulge_direction, density
from shiftfix.physics.motion.bodies import SunMoon, tidal_acceleration
from shiftfix.physics.motion.collocation import Collocation
from shiftfix.physics.motion.harmonics import earth_field
from shiftfix.physics.motion.radiation import limb_angle, lit_fraction, radiation_acceleration

_CLEAR_RAD = 0.3
"""A cell whose nodes all see the Sun this far above the limb, or below it, has no edge of the shadow: between two nodes
a satellite runs through 0.2 rad at most."""


@dataclass(frozen=True)
class Forces:
    """Which forces act, and the nominal sizes that the estimated scales multiply."""

    degree: int = 4
    """Degree and order of the Earth's field, 0 to 4."""
    zonal_degree: int = 6
    """Degree of the zonal terms, 0 to 6."""
    sun: bool = True
    moon: bool = True
    relativity: bool = True
    radiation: bool = True
    radiation_reference_m_s2: float = 1e-7
    """Acceleration by sunlight at 1 au for a scale of 1: usual for a navigation satellite."""
    drag: bool = True
    drag_area_m2_kg: float = 0.022
    """Drag coefficient times area over mass for a scale of 1: 2.2 times 0.01 m2/kg."""
    bulge_exponent_1: float = 4.0
    """Exponent of the day bulge, 2 (low inclination) to 6 (polar)."""


class Surroundings(NamedTuple):
    """What the forces need to know at the nodes of some cells; independent of the orbit."""

    rotation: np.ndarray | None
    """(k, 3, 3) ITRS to GCRS; None: earth-fixed axes are taken as those of GCRS."""
    sun: np.ndarray | None
    """(k, 3) geocentric Sun [m]."""
    moon: np.ndarray | None
    """(k, 3) geocentric Moon [m]."""
    bulge: np.ndarray | None
    """(k, 3) unit vectors to the day bulge of the atmosphere; None without drag."""
    spin: np.ndarray | None
    """(k, 3, 3) matrices that turn a position into the velocity of the air there [1/s]; None without drag."""

    @property
    def pole(self) -> np.ndarray:
        """Return unit vectors along the Earth's axis, (k, 3)."""
        return np.array([[0.0, 0.0, 1.0]]) if self.rotation is None else self.rotation[:, :, 2]


class NodeForces(NamedTuple):
    """Forces at k nodes."""

    acceleration: np.ndarray
    """(k, 3) [m/s2], GCRS."""
    position_gradient: np.ndarray
    """(k, 3, 3) [1/s2]. Without the gradients of the relativistic term (1e-9 of the rest) and of the shadow: after
    a day of LEO 1e-7 of the state transition, 2e-5 of the column of the radiation scale."""
    velocity_gradient: np.ndarray | None
    """(k, 3, 3) [1/s]; None where nothing but relativity (2e-12 1/s) depends on velocity."""
    per_radiation: np.ndarray
    """(k, 3) d acceleration / d radiation_scale_1."""
    per_drag: np.ndarray
    """(k, 3) d acceleration / d drag_scale_1."""


class ForceModel:
    """The forces of one arc.

    Parameters
    ----------
    forces : Forces
    frame : EarthFrame or None
        Earth rotation; None is allowed for a field of zonals only, whose axis then is that of the GCRS.
    epoch_tai_ns, span_s
        Epoch of the arc, and the times past it that will be asked for.
    """

    def __init__(self, forces: Forces, frame, epoch_tai_ns: int, span_s: tuple[float, float]):
        self.forces = forces
        self._field = earth_field(forces.degree, forces.zonal_degree)
        if frame is None and self._field.needs_rotation:
            raise ValueError("forces: a field with tesseral terms needs the Earth's rotation: give a frame")
        self._frame = frame if (forces.degree or forces.zonal_degree or forces.drag) else None
        needs_bodies = forces.sun or forces.moon or forces.radiation or forces.drag
        self._bodies = SunMoon(epoch_tai_ns, span_s) if needs_bodies else None

    def surroundings(self, times_s: np.ndarray) -> Surroundings:
        """Return rotation, Sun and Moon at node times (k,)."""
        rotation = None if self._frame is None else self._frame.rotation(times_s)
        sun, moon = (None, None) if self._bodies is None else self._bodies.positions(times_s)
        around = Surroundings(rotation, sun, moon, None, None)
        if not self.forces.drag:
            return around
        x, y, z = np.broadcast_to(OMEGA_EARTH_RAD_S * around.pole, (times_s.size, 3)).T
        zero = np.zeros(times_s.size)
        spin = np.array([[zero, -z, y], [z, zero, -x], [-y, x, zero]]).transpose(2, 0, 1)
        return around._replace(bulge=bulge_direction(sun), spin=np.ascontiguousarray(spin))

    def at_nodes(
        self,
        around: Surroundings,
        position: np.ndarray,
        velocity: np.ndarray,
        radiation_scale_1: float,
        drag_scale_1: float,
        grid: Collocation,
    ) -> NodeForces:
        """Return the forces at the nodes of m cells.

        Parameters
        ----------
        around : Surroundings
            At the m (N+1) nodes.
        position, velocity : ndarray (m (N+1), 3)
            GCRS [m], [m/s]; cell by cell, each with the N+1 nodes of `grid`.
        radiation_scale_1, drag_scale_1 : float
            Factors on the nominal radiation pressure and drag.
        """
        acceleration, gradient = self._earth(around, position)
        if self.forces.sun:
            pull, pull_gradient = tidal_acceleration(position, around.sun, GM_SUN_M3_S2)
            acceleration = acceleration + pull
            gradient = gradient + pull_gradient
        if self.forces.moon:
            pull, pull_gradient = tidal_acceleration(position, around.moon, GM_MOON_M3_S2)
            acceleration = acceleration + pull
            gradient = gradient + pull_gradient
        if self.forces.relativity:
            acceleration = acceleration + schwarzschild_acceleration(position, velocity)
        per_radiation = per_drag = np.zeros_like(position)
        if self.forces.radiation:
            per_radiation = self._radiation(around, position, grid)
            acceleration = acceleration + radiation_scale_1 * per_radiation
        velocity_gradient = None
        radius_square = np.einsum("ki,ki->k", position, position)
        if self.forces.drag and radius_square.min() < (EARTH_RADIUS_M + TOP_M) ** 2:
            per_drag, drag_gradient, velocity_gradient = self._drag(around, position, velocity)
            acceleration = acceleration + drag_scale_1 * per_drag
            gradient = gradient + drag_scale_1 * drag_gradient
            velocity_gradient = drag_scale_1 * velocity_gradient
        return NodeForces(acceleration, gradient, velocity_gradient, per_radiation, per_drag)

    def _earth(self, around: Surroundings, position: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return the Earth's attraction and its gradient in GCRS axes."""
        if around.rotation is None:
            return self._field.attraction(position)
        rotation = around.rotation
        turned = np.matmul(position[:, None, :], rotation)[:, 0, :]
        acceleration, gradient = self._field.attraction(turned)
        back = np.matmul(rotation, np.concatenate([gradient, acceleration[:, :, None]], axis=2))
        return back[:, :, 3], np.matmul(back[:, :, :3], rotation.transpose(0, 2, 1))

    def _radiation(self, around: Surroundings, position: np.ndarray, grid: Collocation) -> np.ndarray:
        """Return the radiation pressure for a scale of 1.

        The lit fraction has steps of 10 s that the nodes do not resolve. It is taken on the fine grid and replaced by
        the polynomial of equal moments, so that the velocity and the position it leaves at a cell's end are right.
        """
        full = radiation_acceleration(position, around.sun, self.forces.radiation_reference_m_s2)
        shape = (-1, grid.nodes.size)
        angle = limb_angle(position, around.sun)[0].reshape(shape)
        lit = np.where(angle > 0.0, 1.0, 0.0)
        crossing = np.flatnonzero((angle.min(axis=1) < _CLEAR_RAD) & (angle.max(axis=1) > -_CLEAR_RAD))
        if crossing.size:
            fine_position = grid.to_fine @ position.reshape(*shape, 3)[crossing]
            fine_sun = grid.to_fine @ around.sun.reshape(*shape, 3)[crossing]
            lit[crossing] = lit_fraction(fine_position, fine_sun) @ grid.from_fine.T
        return full * lit.reshape(-1, 1)

    def _drag(
        self, around: Surroundings, position: np.ndarray, velocity: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return drag for a scale of 1, and its gradients with position and velocity.

        The air turns with the Earth (winds: 5 % of drag). Height is above the ellipsoid to first order in the
        flattening, within 50 m, 0.1 % of the density.
        """
        pole, bulge = around.pole, around.bulge
        radius = np.sqrt(np.einsum("ki,ki->k", position, position))[:, None]
        unit = position / radius
        sine = np.sum(unit * pole, axis=1, keepdims=True)
        height = radius - EARTH_RADIUS_M * (1.0 - WGS84_F * sine**2)
        cosine = np.einsum("ki,ki->k", unit, bulge)[:, None]
        rho, per_height, per_cosine = (
            x[:, None] for x in density(height[:, 0], cosine[:, 0], self.forces.bulge_exponent_1)
        )
        vertical = unit + (2.0 * EARTH_RADIUS_M * WGS84_F) * sine / radius * (pole - sine * unit)
        rho_gradient = per_height * vertical + per_cosine * (bulge - cosine * unit) / radius
        relative = velocity - np.matmul(around.spin, position[:, :, None])[:, :, 0]
        speed = np.sqrt(np.einsum("ki,ki->k", relative, relative))[:, None]
        shape = (-0.5 * self.forces.drag_area_m2_kg) * speed * relative
        outer = relative[:, :, None] * relative[:, None, :] / speed[:, :, None]
        outer[:, [0, 1, 2], [0, 1, 2]] += speed
        per_velocity = (-0.5 * self.forces.drag_area_m2_kg) * rho[:, :, None] * outer
        per_position = shape[:, :, None] * rho_gradient[:, None, :] - np.matmul(per_velocity, around.spin)
        return rho * shape, per_position, per_velocity


def schwarzschild_acceleration(position: np.ndarray, velocity: np.ndarray) -> np.ndarray:
    """Return the post-Newtonian acceleration by the Earth's mass, (k, 3) [m/s2].

    IERS Conventions (2010), TN 36, eq. 10.12, first term (coefficients from memory); 1.5e-8 m/s2 in LEO.
    """
    square = np.einsum("ki,ki->k", position, position)
    radius = np.sqrt(square)
    along = 4.0 * GM_EARTH_M3_S2 / radius - np.einsum("ki,ki->k", velocity, velocity)
    mixed = 4.0 * np.einsum("ki,ki->k", position, velocity)
    factor = GM_EARTH_M3_S2 / (SPEED_OF_LIGHT_M_S**2 * square * radius)
    return (factor * along)[:, None] * position + (factor * mixed)[:, None] * velocity
