"""Motion with constant velocity or constant acceleration in earth-fixed axes."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.motion.states import States
from shiftfix.physics.motion.turning import TurningEarth


class PolynomialMotion:
    """ITRS position as a polynomial of time past the epoch of the arc.

    Parameters
    ----------
    frame : EarthFrame
        Earth rotation over the arc.
    degree : int
        1: constant velocity; 2: constant acceleration. Both are relative to the turning Earth: a body in free fall
        follows such a polynomial for seconds only (gravity 9.8 m/s2), one that flies level curves down by 0.8 mm/s2 at
        70 m/s (see the surface motion for that).
    """

    def __init__(self, frame, degree: int = 1):
        if degree not in (1, 2):
            raise ValueError(f"polynomial: degree: found {degree}; allowed: 1 or 2")
        self._earth = TurningEarth(frame)
        self.degree = degree
        names = ["x_m", "y_m", "z_m", "vx_m_s", "vy_m_s", "vz_m_s", "ax_m_s2", "ay_m_s2", "az_m_s2"]
        self.parameter_names = tuple(names[: 3 * (degree + 1)])
        self.scales = np.repeat([1e4, 10.0, 0.1], 3)[: 3 * (degree + 1)]

    def at(self, parameters: np.ndarray) -> PolynomialPath:
        """Return the path for `parameters` (p,), in the order of `parameter_names`."""
        parameters = np.asarray(parameters, dtype=float)
        if parameters.shape != (len(self.parameter_names),) or not np.isfinite(parameters).all():
            raise ValueError(
                f"polynomial: parameters: found {parameters}\n"
                f"allowed: finite values of {', '.join(self.parameter_names)}"
            )
        return PolynomialPath(self._earth, parameters.reshape(-1, 3))

    def states_batch(self, parameters: np.ndarray, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return GCRS positions and velocities (b, n, 3) for parameter vectors (b, p) at times (n,)."""
        times_s = np.asarray(times_s, dtype=float)
        terms = np.asarray(parameters, dtype=float).reshape(len(parameters), -1, 3)
        values, slopes, _ = _powers(times_s, self.degree)
        states = self._earth.states(times_s, values @ terms, slopes @ terms)
        return states.position, states.velocity


class PolynomialPath:
    """Polynomial path with fixed parameters; made by `PolynomialMotion.at`."""

    def __init__(self, earth: TurningEarth, terms: np.ndarray):
        self._earth = earth
        self._terms = terms

    def states(self, times_s: np.ndarray) -> States:
        """Return the GCRS states at `times_s` (n,)."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        kinds = _powers(times_s, len(self._terms) - 1)
        return self._earth.states(times_s, *(kind @ self._terms for kind in kinds))

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return d position / d parameters and d velocity / d parameters, (n, 3, p)."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        kinds = _powers(times_s, len(self._terms) - 1)[:2]
        blocks = (np.einsum("nk,ij->nikj", kind, np.eye(3)).reshape(times_s.size, 3, -1) for kind in kinds)
        return self._earth.partials(times_s, *blocks)


def _powers(times_s: np.ndarray, degree: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return 1, t, t^2/2 and their first and second derivatives, each (n, degree + 1)."""
    zero, one = np.zeros_like(times_s), np.ones_like(times_s)
    values = np.stack([one, times_s, 0.5 * times_s**2], axis=1)
    slopes = np.stack([zero, one, times_s], axis=1)
    bends = np.stack([zero, zero, one], axis=1)
    return values[:, : degree + 1], slopes[:, : degree + 1], bends[:, : degree + 1]
