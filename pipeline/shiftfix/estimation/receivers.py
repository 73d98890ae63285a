"""Receivers as the observation equation sees them: a path in space, a local vertical for media, and time-tag errors.

A receiver is anything with a `Path`: a station on the rotating Earth, a ship, an aircraft or a satellite.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from shiftfix.physics import geodesy
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.motion.bodies import SunMoon
from shiftfix.physics.motion.states import Path, States
from shiftfix.physics.tides import solid_earth_tide


@dataclass(frozen=True)
class GroundPath:
    """Path of a point fixed to the ground (with plate motion), in GCRS.

    Parameters
    ----------
    frame : EarthFrame
    position_itrs_m, velocity_itrs_m_s : ndarray, shape (3,)
        ITRS position at the arc epoch and its slow motion.
    bodies : SunMoon or None
        For the solid-Earth tide; None leaves it out (up to 0.4 m, and 0.1 mm/s, which is not in the velocity).
    """

    frame: EarthFrame
    position_itrs_m: np.ndarray
    velocity_itrs_m_s: np.ndarray
    bodies: SunMoon | None = None

    def states(self, times_s: np.ndarray) -> States:
        """Return GCRS states at `times_s` [s past the arc epoch], shape (n, 3) each."""
        times = np.atleast_1d(np.asarray(times_s, float))
        position = self.position_itrs_m + times[:, None] * self.velocity_itrs_m_s
        states = self.frame.to_gcrs(times, position, np.broadcast_to(self.velocity_itrs_m_s, position.shape))
        if self.bodies is None:
            return states
        tide = solid_earth_tide(states.position, *self.bodies.positions(times))
        return States(states.position + tide, states.velocity, states.acceleration)

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return empty partials: a station has no motion parameters here."""
        shape = (np.atleast_1d(times_s).size, 3, 0)
        return np.zeros(shape), np.zeros(shape)


@dataclass(frozen=True)
class ShiftedPath:
    """Path displaced by a constant vector [m], GCRS axes: the error of a moving receiver's ephemeris."""

    path: Path
    delta_m: np.ndarray

    def states(self, times_s: np.ndarray) -> States:
        """Return the displaced states."""
        position, velocity, acceleration = self.path.states(times_s)
        return States(position + self.delta_m, velocity, acceleration)


@dataclass(frozen=True, eq=False)
class Receiver:
    """One receiving station of an arc.

    Parameters
    ----------
    station_id : str
    path : Path
        Motion in GCRS.
    moving : bool
        Whether the station moves relative to the Earth.
    height_m : float
        Ellipsoidal height for the troposphere; NaN switches media off (receiver in space).
    latitude_rad : float
        Geodetic latitude for the mapping function.
    shifted : callable, optional
        `shifted(delta_m) -> Path`: the same station at displaced coordinates, for the coordinate error (ITRS axes on the
        ground, GCRS axes for a mover).
    offset, offset_sigma, drift_per_s, drift_sigma_per_s : float
        Prior of the fractional frequency offset of its reference; sigma inf means unknown.
    time_bias_s, time_sigma_s : float
        Prior of the time-tag bias (tag minus true time).
    position_sigma_m : float
        1-sigma of each coordinate.
    """

    station_id: str
    path: Path
    moving: bool = False
    height_m: float = float("nan")
    latitude_rad: float = 0.0
    shifted: Callable[[np.ndarray], Path] | None = None
    offset: float = 0.0
    offset_sigma: float = float("inf")
    drift_per_s: float = 0.0
    drift_sigma_per_s: float = 0.0
    time_bias_s: float = 0.0
    time_sigma_s: float = 0.0
    position_sigma_m: float = 0.0


def ground_receiver(
    station_id: str,
    frame: EarthFrame,
    position_itrs_m: np.ndarray,
    velocity_itrs_m_s: np.ndarray | None = None,
    bodies: SunMoon | None = None,
    **priors: float,
) -> Receiver:
    """Return a receiver fixed to the ground at an ITRS position [m], with the priors of `Receiver`.

    With `bodies` the solid-Earth tide moves it.
    """
    position = np.asarray(position_itrs_m, float)
    velocity = np.zeros(3) if velocity_itrs_m_s is None else np.asarray(velocity_itrs_m_s, float)
    latitude, _, height = geodesy.geodetic_from_itrs(position)
    return Receiver(
        station_id,
        GroundPath(frame, position, velocity, bodies),
        moving=False,
        height_m=float(height),
        latitude_rad=float(latitude),
        shifted=lambda delta: GroundPath(frame, position + delta, velocity, bodies),
        **priors,
    )
