"""A point fixed to the ground."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.motion.states import States
from shiftfix.physics.motion.track import axes, curvature, kinematics
from shiftfix.physics.motion.turning import TurningEarth


class FixedMotion:
    """Geodetic latitude, longitude and height on WGS84; plate motion (centimetres a year) is left out.

    Parameters
    ----------
    frame : EarthFrame
        Earth rotation over the arc.
    """

    parameter_names = ("latitude_rad", "longitude_rad", "height_m")

    def __init__(self, frame):
        self._earth = TurningEarth(frame)
        self.scales = np.array([1e-3, 1e-3, 1e3])

    def at(self, parameters: np.ndarray) -> FixedPath:
        """Return the path for latitude [rad], longitude [rad] and height above the ellipsoid [m]."""
        parameters = np.asarray(parameters, dtype=float)
        if parameters.shape != (3,) or not np.isfinite(parameters).all():
            raise ValueError(f"fixed: parameters: found {parameters}\nallowed: latitude_rad, longitude_rad, height_m")
        return FixedPath(self._earth, parameters)

    def states_batch(self, parameters: np.ndarray, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return GCRS positions and velocities (b, n, 3) for parameter vectors (b, 3) at times (n,)."""
        latitude, longitude, height = np.asarray(parameters, dtype=float).T
        times_s = np.asarray(times_s, dtype=float)
        position, _, _ = kinematics(latitude, longitude, height, 0.0, 0.0)
        states = self._earth.states(times_s, np.repeat(position[:, None, :], times_s.size, axis=1))
        return states.position, states.velocity


class FixedPath:
    """Path of a point fixed to the ground; made by `FixedMotion.at`."""

    def __init__(self, earth: TurningEarth, parameters: np.ndarray):
        self._earth = earth
        latitude, longitude, height = parameters
        self.position_itrs_m = kinematics(latitude, longitude, height, 0.0, 0.0)[0]
        e, n, u = axes(latitude, longitude)
        meridian, vertical, _ = curvature(latitude)
        self._partials = np.stack([(meridian + height) * n, (vertical + height) * np.cos(latitude) * e, u], axis=1)

    def states(self, times_s: np.ndarray) -> States:
        """Return the GCRS states at `times_s` (n,)."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        return self._earth.states(times_s, np.broadcast_to(self.position_itrs_m, (times_s.size, 3)))

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return d position / d parameters and d velocity / d parameters, (n, 3, 3)."""
        return self._earth.partials(np.atleast_1d(np.asarray(times_s, dtype=float)), self._partials, None)
