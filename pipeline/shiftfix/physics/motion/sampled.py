"""Path through the samples of an ephemeris: interpolated position, velocity and acceleration."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.motion.states import States
from shiftfix.physics.motion.turning import TurningEarth

_SLOW_M_S = 1000.0
_NEAR_GROUND_M = 6.63e6
_DEGREE_FAST = 10
_NODES_WITH_VELOCITY = 6
_DEGREE_SLOW = 3


class SampledPath:
    """Interpolated ephemeris.

    Between two samples a polynomial through the nearest samples is used, as far centred as the ends of the segment
    allow; it is made once, when the path is built. Satellites are interpolated in the GCRS. Ships, aircraft and
    balloons (within 250 km of the ground and slower than 1 km/s relative to it) are interpolated in the ITRS, where
    their tracks are simple.

    Parameters
    ----------
    times_s : ndarray (n,)
        Sample times past the epoch of the arc [s], ascending within each segment.
    position : ndarray (n, 3)
        [m]; ITRS when `frame` is given, else GCRS.
    velocity : ndarray (n, 3) or None
        Time derivative of `position` in its own frame [m/s]; used as further data (Hermite interpolation).
    frame : EarthFrame or None
        Earth rotation over the arc; None for samples in GCRS. Samples further outside its span than eight of their
        steps are left away.
    segment : ndarray (n,) of int, optional
        Number of the unbroken stretch each sample belongs to; nothing is interpolated across stretches.
    degree : int, optional
        Degree of the polynomials. Default: fast movers 10, slow movers 3; with velocities 11 and 3.
    earth_fixed : bool, optional
        Interpolate in ITRS; default: as the samples' speed tells.
    name : str
        What the path belongs to, for messages.

    Raises
    ------
    ValueError
        If samples are not finite, not ascending, or fewer than two.

    Notes
    -----
    Measured: 60 s samples of a LEO 2e-5 m and 1.5e-6 m/s (at the ends); 15 min samples of a navigation satellite in
    ITRS 1e-5 m and 5e-8 m/s, 1e-3 m and 1e-5 m/s in the first and last hour (see the tests). Rounding of the samples
    to 1 mm, as in SP3, costs 1 mm.
    """

    def __init__(
        self,
        times_s: np.ndarray,
        position: np.ndarray,
        velocity: np.ndarray | None = None,
        frame=None,
        segment: np.ndarray | None = None,
        degree: int | None = None,
        earth_fixed: bool | None = None,
        name: str = "ephemeris",
    ):
        times_s = np.asarray(times_s, dtype=float)
        position = np.asarray(position, dtype=float)
        velocity = None if velocity is None else np.asarray(velocity, dtype=float)
        segment = np.zeros(times_s.size, dtype=int) if segment is None else np.asarray(segment)
        self.name = name
        if times_s.size < 2:
            raise ValueError(f"{name}: found {times_s.size} samples; allowed: at least two")
        if not (np.isfinite(times_s).all() and np.isfinite(position).all()):
            raise ValueError(f"{name}: samples that are not finite")
        if frame is not None:
            near = _near_span(times_s, frame.span_s)
            times_s, position, segment = times_s[near], position[near], segment[near]
            velocity = None if velocity is None else velocity[near]
            if times_s.size < 2:
                raise ValueError(
                    f"{name}: found {times_s.size} samples near the arc; allowed: at least two around "
                    f"{frame.span_s[0]:.3f} .. {frame.span_s[1]:.3f} s past its epoch"
                )
        same = segment[1:] == segment[:-1]
        if np.any(same & (np.diff(times_s) <= 0.0)):
            raise ValueError(f"{name}: sample times are not ascending within a segment")
        slow = False
        if frame is not None:
            speed = np.linalg.norm(np.diff(position, axis=0)[same], axis=1) / np.diff(times_s)[same]
            near = np.median(np.linalg.norm(position, axis=1)) < _NEAR_GROUND_M
            slow = bool(near and speed.size and np.median(speed) < _SLOW_M_S)
            slow = slow if earth_fixed is None else bool(earth_fixed)
        self._earth = TurningEarth(frame) if slow else None
        if frame is not None and not slow:
            turned = TurningEarth(frame).states(times_s, position, velocity)
            position = turned.position
            velocity = None if velocity is None else turned.velocity
        width = _window(degree, slow, velocity is not None)
        self._build(times_s, position, velocity, segment, width)
        self.span_s = (float(self._starts.min()), float(self._stops.max()))

    def _build(self, times, position, velocity, segment, width) -> None:
        """Make the polynomials of all intervals between adjoining samples."""
        starts, stops, centres, scales, coefficients = [], [], [], [], []
        edges = np.concatenate([[0], np.flatnonzero(segment[1:] != segment[:-1]) + 1, [segment.size]])
        largest = width if velocity is None else 2 * width
        for a, b in zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True):
            count = b - a
            if count < 2:
                continue
            nodes = min(width, count)
            left = np.arange(a, b - 1)
            first = np.clip(left - (nodes // 2 - 1), a, b - nodes)
            index = first[:, None] + np.arange(nodes)
            centre = 0.5 * (times[left] + times[left + 1])
            scale = 0.5 * (times[index[:, -1]] - times[index[:, 0]])
            u = (times[index] - centre[:, None]) / scale[:, None]
            terms = nodes if velocity is None else 2 * nodes
            powers = u[:, :, None] ** np.arange(terms)
            values = position[index] - position[left][:, None, :]
            if velocity is not None:
                slopes = np.zeros_like(powers)
                slopes[:, :, 1:] = np.arange(1, terms) * powers[:, :, :-1]
                powers = np.concatenate([powers, slopes], axis=1)
                values = np.concatenate([values, velocity[index] * scale[:, None, None]], axis=1)
            solved = np.zeros((left.size, largest, 3))
            solved[:, :terms] = np.linalg.solve(powers, values)
            solved[:, 0] += position[left]
            starts.append(times[left])
            stops.append(times[left + 1])
            centres.append(centre)
            scales.append(scale)
            coefficients.append(solved)
        if not starts:
            raise ValueError(f"{self.name}: no segment has two samples")
        order = np.argsort(np.concatenate(starts), kind="stable")
        self._starts, self._stops = np.concatenate(starts)[order], np.concatenate(stops)[order]
        self._centres, self._scales = np.concatenate(centres)[order], np.concatenate(scales)[order]
        self._coefficients = np.concatenate(coefficients)[order]

    def states(self, times_s: np.ndarray) -> States:
        """Return the GCRS states at `times_s`, shape (n,).

        Raises
        ------
        ValueError
            If a time lies outside the samples or in a gap between segments.
        """
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        row = np.clip(np.searchsorted(self._starts, times_s, side="right") - 1, 0, None)
        bad = ~((times_s >= self._starts[row]) & (times_s <= self._stops[row]))
        if bad.any():
            raise ValueError(
                f"{self.name}: {np.count_nonzero(bad)} times without samples around them, "
                f"the first at {times_s[bad][0]:.3f} s past the epoch\n"
                f"allowed: {self.span_s[0]:.3f} .. {self.span_s[1]:.3f} s, gaps between segments excepted"
            )
        u = ((times_s - self._centres[row]) / self._scales[row])[:, None]
        coefficients = self._coefficients[row]
        value = coefficients[:, -1].copy()
        slope = np.zeros_like(value)
        bend = np.zeros_like(value)
        for k in range(coefficients.shape[1] - 2, -1, -1):
            bend *= u
            bend += slope
            slope *= u
            slope += value
            value *= u
            value += coefficients[:, k]
        scale = self._scales[row][:, None]
        states = States(value, slope / scale, 2.0 * bend / scale**2)
        return states if self._earth is None else self._earth.states(times_s, *states)

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return empty arrays (n, 3, 0): the path has no parameters."""
        empty = np.zeros((np.size(times_s), 3, 0))
        return empty, empty


def _near_span(times_s: np.ndarray, span_s: tuple[float, float]) -> np.ndarray:
    """Return which samples lie in the span or within eight usual steps of it."""
    steps = np.diff(times_s)
    margin = 8.0 * float(np.median(steps[steps > 0.0])) if np.any(steps > 0.0) else 0.0
    return (times_s >= span_s[0] - margin) & (times_s <= span_s[1] + margin)


def _window(degree: int | None, slow: bool, with_velocity: bool) -> int:
    """Return how many samples a polynomial passes through."""
    if degree is None:
        if with_velocity:
            return 2 if slow else _NODES_WITH_VELOCITY
        return 1 + (_DEGREE_SLOW if slow else _DEGREE_FAST)
    if not 1 <= degree <= 15:
        raise ValueError(f"interpolation: degree: found {degree}; allowed: 1 .. 15")
    return max(2, (degree + 1) // 2) if with_velocity else degree + 1
