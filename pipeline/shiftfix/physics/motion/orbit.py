"""Orbit about the Earth: numerical integration with variational equations, held as piecewise Chebyshev polynomials."""

from __future__ import annotations

from math import isfinite, pi, sqrt

import numpy as np

from shiftfix.physics import kepler
from shiftfix.physics.constants import GM_EARTH_M3_S2
from shiftfix.physics.motion.collocation import PiecewiseChebyshev, chebyshev_values, collocation, evaluate
from shiftfix.physics.motion.encke import propagate_batch
from shiftfix.physics.motion.forces import ForceModel, Forces
from shiftfix.physics.motion.shooting import Cells, Stretch, solve
from shiftfix.physics.motion.states import States

_DEGREE = 16
_CELL_ANGLE_RAD = 2.0 * pi / 5.0
"""Largest angle that the satellite may run through in one cell."""
_STRETCH_ANGLE_RAD = 2.0 * pi * 0.6
"""Mean anomaly solved at once; longer stretches start too far from the two-body orbit."""
_TRUNCATION_1 = 1e-12
_MAX_REFINEMENTS = 2
_MAX_HALVINGS = 10
_MARGIN_S = 1.0
"""Times up to this far outside the span are accepted: light times, clock corrections."""
_CACHED_STRETCHES = 512


def _step_count(ratio: float) -> int:
    """Return the smallest of 1, 2, 3, 4, 6, 8, 12 .. that is at least `ratio`.

    So few different cell lengths are used that slightly different orbits share their node times.
    """
    count = 1
    while count < ratio:
        if count >= 2 and 3 * count // 2 >= ratio:
            return 3 * count // 2
        count *= 2
    return count


class OrbitPath:
    """Integrated orbit with fixed parameters; made by `OrbitMotion.at`."""

    def __init__(self, pieces: PiecewiseChebyshev, stretches: list[Stretch], parameters: int):
        self._pieces = pieces
        self._states = np.concatenate([s.states for s in stretches])
        self._position = np.concatenate([s.position_partials for s in stretches])
        self._velocity = np.concatenate([s.velocity_partials for s in stretches])
        self._parameters = parameters
        self._located = None
        self.truncation_1 = float(max(s.truncation_1.max() for s in stretches))
        """Largest of the last Chebyshev coefficients of position, relative to the radius."""

    def _locate(self, times_s):
        """Return blocks, sorting permutation and Chebyshev values for `times_s`; the last answer is kept."""
        times_s = np.atleast_1d(np.asarray(times_s, dtype=float))
        kept = self._located
        if kept is not None and np.array_equal(kept[0], times_s):
            return kept[1]
        if times_s.size and not (
            times_s.min() >= self._pieces.first_s - _MARGIN_S and times_s.max() <= self._pieces.last_s + _MARGIN_S
        ):
            raise ValueError(
                f"orbit: times {times_s.min():.3f} .. {times_s.max():.3f} s past the epoch asked for\n"
                f"allowed: {self._pieces.first_s:.3f} .. {self._pieces.last_s:.3f} s, the span that was integrated"
            )
        blocks, tau, order = self._pieces.locate(times_s)
        located = blocks, order, chebyshev_values(tau, self._states.shape[1])
        self._located = (times_s.copy(), located)
        return located

    def states(self, times_s: np.ndarray) -> States:
        """Return position [m], velocity [m/s] and acceleration [m/s2], each (n, 3), GCRS, at `times_s` (n,)."""
        blocks, order, basis = self._locate(times_s)
        values = evaluate(blocks, basis, self._states, order)
        return States(values[:, :3], values[:, 3:6], values[:, 6:])

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return d position / d parameters and d velocity / d parameters, each (n, 3, p), at fixed times."""
        blocks, order, basis = self._locate(times_s)
        shape = (-1, 3, self._parameters)
        return (
            evaluate(blocks, basis, self._position, order).reshape(shape),
            evaluate(blocks, basis, self._velocity, order).reshape(shape),
        )

    def state_transition(self, times_s: np.ndarray) -> np.ndarray:
        """Return d state(t) / d state(epoch), (n, 6, 6)."""
        position, velocity = self.partials(times_s)
        return np.concatenate([position[:, :, :6], velocity[:, :, :6]], axis=1)


class OrbitMotion:
    """Orbit about the Earth, bound to one arc.

    Parameters are the GCRS position and velocity at the epoch of the arc, then the scales of radiation pressure and
    drag that are estimated. `at` integrates the orbit and the variational equations over the span.

    Parameters
    ----------
    epoch_tai_ns : int
        Epoch of the arc.
    span_s : (float, float)
        First and last time past the epoch [s] that will be asked for, light time included. The epoch may lie inside
        or outside.
    frame : EarthFrame or None
        Earth rotation over the span and the epoch; None only with `Forces(degree=0)`.
    forces : Forces
        Forces that act.
    estimate_radiation, estimate_drag : bool
        Whether the scale is a parameter; one that is not estimated is 1.

    Notes
    -----
    Collocation of degree 16 on cells of at most 72 degrees of the orbit; cells are halved, twice at most, while the
    last coefficients of position are above 1e-12 of the radius (`OrbitPath.truncation_1` tells what is left: up to
    1e-7 for orbits that dive into the lower atmosphere, whose tabled density has kinks). A day of LEO agrees with a
    high-order integration of the same forces to 1 mm (see the tests). Body positions and Earth rotation at the nodes
    are kept between calls of `at`.
    """

    def __init__(
        self,
        epoch_tai_ns: int,
        span_s: tuple[float, float],
        frame,
        forces: Forces | None = None,
        estimate_radiation: bool = False,
        estimate_drag: bool = False,
    ):
        first, last = float(span_s[0]), float(span_s[1])
        if not (isfinite(first) and isfinite(last) and first <= last):
            raise ValueError(f"orbit: span: found {first} .. {last} s; allowed: two finite times in order")
        self.forces = forces or Forces()
        self.span_s = (first, last)
        self._reach = (min(first, 0.0), max(last, 0.0))
        if self._reach[1] - self._reach[0] < _MARGIN_S:
            self._reach = (self._reach[0], self._reach[0] + _MARGIN_S)
        self._estimated = (bool(estimate_radiation), bool(estimate_drag))
        names = ["x_m", "y_m", "z_m", "vx_m_s", "vy_m_s", "vz_m_s"]
        scales = [1e4, 1e4, 1e4, 10.0, 10.0, 10.0]
        for flag, force, name in zip(
            self._estimated,
            (self.forces.radiation, self.forces.drag),
            ("radiation_scale_1", "drag_scale_1"),
            strict=True,
        ):
            if flag and not force:
                raise ValueError(f"orbit: {name} is to be estimated, but the force is switched off")
            if flag:
                names.append(name)
                scales.append(0.5)
        self.parameter_names = tuple(names)
        self.scales = np.array(scales)
        self._grid = collocation(_DEGREE)
        self._model = ForceModel(self.forces, frame, int(epoch_tai_ns), self._reach)
        self._surroundings = {}

    # A wild start may diverge to infinity on the way to its ValueError.
    @np.errstate(over="ignore", invalid="ignore")
    def at(self, parameters: np.ndarray) -> OrbitPath:
        """Return the integrated orbit.

        Parameters
        ----------
        parameters : ndarray (6 .. p,)
            In the order of `parameter_names`; force scales left away are 1.

        Raises
        ------
        ValueError
            If a parameter is not finite, their number is wrong, or the orbit cannot be integrated (it comes closer to
            the Earth's centre than half its radius).
        """
        parameters = np.asarray(parameters, dtype=float)
        count = len(self.parameter_names)
        if parameters.ndim != 1 or not 6 <= parameters.size <= count or not np.isfinite(parameters).all():
            raise ValueError(
                f"orbit: parameters: found {parameters}\nallowed: 6 to {count} finite numbers: "
                + ", ".join(self.parameter_names)
            )
        given = iter(parameters[6:])
        scales = tuple(float(next(given, 1.0)) if flag else 1.0 for flag in self._estimated)
        radius = sqrt(parameters[:3] @ parameters[:3])
        if radius < 1.0:
            raise ValueError("orbit: the position is the Earth's centre")
        mean_motion = _mean_motion(radius, parameters[3:6] @ parameters[3:6])
        plans = [
            [(sign * k * reach / steps, sign * (k + 1) * reach / steps) for k in range(steps)]
            for sign, reach in ((1.0, self._reach[1]), (-1.0, -self._reach[0]))
            if reach > 0.0
            for steps in (_step_count(reach * mean_motion / _STRETCH_ANGLE_RAD),)
        ]
        states = [parameters[:6]] * len(plans)
        partials = [np.eye(6, count)] * len(plans)
        solved, starts, halves = [], [], []
        for step in range(max(len(plan) for plan in plans)):
            active = [chain for chain, plan in enumerate(plans) if step < len(plan)]
            stretch, cells = self._solve(
                [plans[chain][step] for chain in active],
                np.array([states[chain] for chain in active]),
                np.array([partials[chain] for chain in active]),
                mean_motion,
                scales,
            )
            for position, chain in enumerate(active):
                last = _last_of_chain(cells.previous, position)
                states[chain], partials[chain] = stretch.end_states[last], stretch.end_partials[last]
            solved.append(stretch)
            starts.append(cells.start_s)
            halves.append(cells.half_s)
        pieces = PiecewiseChebyshev(np.concatenate(starts), np.concatenate(halves))
        return OrbitPath(pieces, solved, count)

    def _solve(self, stretches, chain_states, chain_partials, mean_motion, scales) -> tuple[Stretch, Cells]:
        """Solve one stretch of every chain, halving cells until the polynomials are good."""
        edges = [
            np.linspace(start, stop, 1 + _step_count(abs(stop - start) * mean_motion / _CELL_ANGLE_RAD))
            for start, stop in stretches
        ]
        for refinement in range(_MAX_REFINEMENTS + 1):
            for _ in range(_MAX_HALVINGS + 1):
                cells = _cells(edges)
                guess = self._guess(edges, chain_states)
                split = np.abs(2.0 * cells.half_s) * self._fastest(guess) > 1.3 * _CELL_ANGLE_RAD
                if not split.any():
                    break
                edges = _halve(edges, split)
            stretch = solve(
                self._model,
                self._surroundings_of(cells),
                self._grid,
                cells,
                guess,
                chain_states,
                chain_partials,
                scales,
                self._estimated,
            )
            split = stretch.truncation_1 > _TRUNCATION_1
            if not split.any() or refinement == _MAX_REFINEMENTS:
                return stretch, cells
            edges = _halve(edges, split)
        raise AssertionError("unreachable")

    def _guess(self, edges, chain_states) -> tuple[np.ndarray, np.ndarray]:
        """Return the two-body orbit at all nodes."""
        times = np.concatenate(
            [
                (edge[:-1, None] - edge[0] + 0.5 * np.diff(edge)[:, None] * (1.0 + self._grid.nodes)).ravel()
                for edge in edges
            ]
        )
        if len(edges) == 1 or np.array_equal(chain_states[0], chain_states[1]):
            return kepler.propagate(chain_states[0, :3], chain_states[0, 3:], times, GM_EARTH_M3_S2)
        counts = [(edge.size - 1) * self._grid.nodes.size for edge in edges]
        states = np.repeat(chain_states, counts, axis=0)
        return kepler.propagate(states[:, :3], states[:, 3:], times, GM_EARTH_M3_S2)

    def _fastest(self, guess) -> np.ndarray:
        """Return the largest angular rate [rad/s] in every cell."""
        position, velocity = guess
        square = np.einsum("ki,ki->k", position, position)
        rate = np.maximum(GM_EARTH_M3_S2 / np.sqrt(square), np.einsum("ki,ki->k", velocity, velocity)) / square
        return np.sqrt(rate.reshape(-1, self._grid.nodes.size).max(axis=1))

    def _surroundings_of(self, cells: Cells):
        """Return the surroundings of the nodes, from the store when the same cells were used before."""
        key = cells.start_s.tobytes() + cells.half_s.tobytes()
        found = self._surroundings.get(key)
        if found is None:
            if len(self._surroundings) >= _CACHED_STRETCHES:
                self._surroundings.clear()
            found = self._surroundings[key] = self._model.surroundings(cells.node_times(self._grid))
        return found

    def propagate_batch(self, states: np.ndarray, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return approximate orbits of many candidates for a search: see `encke.propagate_batch`.

        Parameters
        ----------
        states : ndarray (b, 6)
            Position [m] and velocity [m/s] at the epoch, GCRS.
        times_s : ndarray (n,)
            Times past the epoch [s].

        Returns
        -------
        position, velocity : ndarray (b, n, 3)
        """
        return propagate_batch(states, times_s)


def _mean_motion(radius: float, speed_square: float) -> float:
    """Return the mean motion [rad/s]; of an orbit that is not bound, at most that of a circle at this radius."""
    inverse_axis = 2.0 / radius - speed_square / GM_EARTH_M3_S2
    if inverse_axis < 0.0:
        inverse_axis = min(-inverse_axis, 1.0 / radius)
    return sqrt(GM_EARTH_M3_S2 * inverse_axis**3)


def _cells(edges: list[np.ndarray]) -> Cells:
    """Return the cells between the edges of every chain."""
    previous, total = [], 0
    for chain, edge in enumerate(edges):
        count = edge.size - 1
        previous.append(np.arange(total - 1, total + count - 1))
        previous[-1][0] = -1 - chain
        total += count
    return Cells(
        np.concatenate([edge[:-1] for edge in edges]),
        0.5 * np.concatenate([np.diff(edge) for edge in edges]),
        np.concatenate(previous),
    )


def _halve(edges: list[np.ndarray], split: np.ndarray) -> list[np.ndarray]:
    """Return edges with the marked cells cut in two."""
    finer, first = [], 0
    for edge in edges:
        marked = split[first : first + edge.size - 1]
        first += edge.size - 1
        middles = 0.5 * (edge[:-1] + edge[1:])[marked]
        merged = np.concatenate([edge, middles])
        finer.append(merged[np.argsort(np.sign(edge[-1] - edge[0]) * merged)])
    return finer


def _last_of_chain(previous: np.ndarray, position: int) -> int:
    """Return the last cell of the chain with the given number."""
    first = np.flatnonzero(previous == -1 - position)[0]
    later = np.flatnonzero((previous < 0) & (np.arange(previous.size) > first))
    return int(later[0]) - 1 if later.size else previous.size - 1
