"""Motion with constant east and north velocity at a constant height above the ellipsoid, in one leg or several."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.motion.states import States
from shiftfix.physics.motion.track import Track, displaced, kinematics
from shiftfix.physics.motion.turning import TurningEarth


class SurfaceMotion:
    """Constant east and north velocity on the ellipsoid, leg by leg.

    The height above the ellipsoid is constant; east and north are those of the place where the mover is, so a leg is a
    rhumb line. Parameters: latitude, longitude and height at the epoch of the arc, east and north velocity of each leg,
    and the times at which the later legs start, when they are estimated.

    Parameters
    ----------
    frame : EarthFrame
        Earth rotation; legs are followed over its `span_s`.
    legs : int
        Number of legs.
    turn_times_s : sequence of float, optional
        Start times of the legs 2, 3 .. [s past the epoch]. None: they are parameters.

    Notes
    -----
    Each leg is held in pieces of at most 400 km, polynomials of degree 14 in time; against an integration of the same
    motion 1e-6 m (see the tests).
    """

    def __init__(self, frame, legs: int = 1, turn_times_s=None):
        if legs < 1:
            raise ValueError(f"surface: legs: found {legs}; allowed: 1 or more")
        self._fixed_turns = None
        if turn_times_s is not None:
            turns = np.asarray(turn_times_s, dtype=float)
            if turns.shape != (legs - 1,) or np.any(np.diff(turns) <= 0.0) or not np.isfinite(turns).all():
                raise ValueError(f"surface: turn times: found {turns}; allowed: {legs - 1} ascending times [s]")
            self._fixed_turns = turns
        self._legs = legs
        self._earth = TurningEarth(frame)
        self._span = (min(frame.span_s[0], -1.0), max(frame.span_s[1], 1.0))
        names = ["latitude_rad", "longitude_rad", "height_m"]
        scales = [1e-3, 1e-3, 1e3]
        for leg in range(1, legs + 1):
            names += [f"east_{leg}_m_s", f"north_{leg}_m_s"]
            scales += [10.0, 10.0]
        self._turns_at = len(names)
        if self._fixed_turns is None:
            names += [f"turn_{leg}_s" for leg in range(2, legs + 1)]
            scales += [60.0] * (legs - 1)
        self.parameter_names = tuple(names)
        self.scales = np.array(scales)

    def at(self, parameters: np.ndarray) -> SurfacePath:
        """Return the path for `parameters` (p,), in the order of `parameter_names`."""
        parameters = np.asarray(parameters, dtype=float)
        if parameters.shape != (len(self.parameter_names),) or not np.isfinite(parameters).all():
            raise ValueError(
                f"surface: parameters: found {parameters}\nallowed: finite values of {', '.join(self.parameter_names)}"
            )
        return SurfacePath(self._earth, self._track(parameters))

    def states_batch(self, parameters: np.ndarray, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return GCRS positions and velocities (b, n, 3) for parameter vectors (b, p) at times (n,)."""
        times_s = np.asarray(times_s, dtype=float)
        parameters = np.asarray(parameters, dtype=float)
        latitude, longitude, height = (np.repeat(p[:, None], times_s.size, axis=1) for p in parameters[:, :3].T)
        if self._fixed_turns is None:
            turns = parameters[:, self._turns_at :]
        else:
            turns = np.broadcast_to(self._fixed_turns, (len(parameters), self._legs - 1))
        edge = np.full((len(parameters), 1), np.inf)
        edges = np.concatenate([-edge, turns, edge], axis=1)[:, :, None]
        velocities = parameters[:, 3 : 3 + 2 * self._legs].reshape(-1, self._legs, 2, 1)
        for leg in range(self._legs):
            elapsed = np.maximum(np.minimum(edges[:, leg + 1], times_s) - np.maximum(edges[:, leg], 0.0), 0.0)
            latitude, longitude = displaced(
                latitude, longitude, height, velocities[:, leg, 0], velocities[:, leg, 1], elapsed
            )
        for leg in reversed(range(self._legs)):
            elapsed = np.minimum(np.maximum(edges[:, leg], times_s) - np.minimum(edges[:, leg + 1], 0.0), 0.0)
            latitude, longitude = displaced(
                latitude, longitude, height, velocities[:, leg, 0], velocities[:, leg, 1], elapsed
            )
        number = np.sum(turns[:, :, None] <= times_s, axis=1)
        east = np.take_along_axis(velocities[:, :, 0, 0], number, axis=1)
        north = np.take_along_axis(velocities[:, :, 1, 0], number, axis=1)
        position, velocity, _ = kinematics(latitude, longitude, height, east, north)
        states = self._earth.states(times_s, position, velocity)
        return states.position, states.velocity

    def _track(self, parameters: np.ndarray) -> Track:
        """Return the track over the ellipsoid."""
        turns = self._fixed_turns if self._fixed_turns is not None else parameters[self._turns_at :]
        if np.any(np.diff(turns) <= 0.0):
            raise ValueError(f"surface: turn times: found {turns}; allowed: ascending")
        return Track(parameters, turns, self._turns_at if self._fixed_turns is None else None, self._span)


class SurfacePath:
    """Path of a mover on the ellipsoid with fixed parameters; made by `SurfaceMotion.at`."""

    def __init__(self, earth: TurningEarth, track: Track):
        self._earth = earth
        self.track = track

    def states(self, times_s: np.ndarray) -> States:
        """Return the GCRS states at `times_s` (n,)."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        return self._earth.states(times_s, *self.track.kinematics(times_s))

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return d position / d parameters and d velocity / d parameters, (n, 3, p)."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        return self._earth.partials(times_s, *self.track.partials(times_s))
