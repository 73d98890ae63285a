"""Solution of the equations of motion by collocation on many cells at once, with the variational equations.

All cells of a stretch are solved together by Newton's method (multiple shooting): the forces are evaluated once an
iteration at all nodes of all cells; a dense linear system per cell gives the accelerations at its nodes as a linear
function of its start state and of the force parameters; a chain of 6 x 6 products joins the cells. The linear functions
of the last iteration are the solution of the variational equations.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shiftfix.physics.constants import EARTH_RADIUS_M
from shiftfix.physics.motion.collocation import Collocation
from shiftfix.physics.motion.forces import ForceModel, Surroundings

_MAX_ITERATIONS = 14
_CONVERGED_1 = 1e-7
"""Change of position, relative to the lowest radius, below which Newton's method stops; being quadratic it has then
converged to 1e-13, and the gradients, taken one step earlier, are good to 1e-7."""

LOWEST_RADIUS_M = 0.5 * EARTH_RADIUS_M
"""An orbit that comes closer to the Earth's centre is refused: half the Earth's radius."""


class Cells(NamedTuple):
    """Cells of one or more chains; within a chain each cell starts where the previous ends."""

    start_s: np.ndarray
    """(m,) start times."""
    half_s: np.ndarray
    """(m,) signed half lengths."""
    previous: np.ndarray
    """(m,) number of the cell before, or -1 - c for the first cell of chain c."""

    def node_times(self, grid: Collocation) -> np.ndarray:
        """Return the times of all nodes, (m (N+1),)."""
        return (self.start_s[:, None] + self.half_s[:, None] * (1.0 + grid.nodes)).ravel()


class Stretch(NamedTuple):
    """Solved cells: Chebyshev coefficients and end states."""

    states: np.ndarray
    """(m, N+3, 9) coefficients of position, velocity, acceleration."""
    position_partials: np.ndarray
    """(m, N+3, 3 p) coefficients of d position / d parameters."""
    velocity_partials: np.ndarray
    """(m, N+3, 3 p) coefficients of d velocity / d parameters."""
    end_states: np.ndarray
    """(m, 6) position and velocity at the end of each cell."""
    end_partials: np.ndarray
    """(m, 6, p) their derivatives."""
    truncation_1: np.ndarray
    """(m,) size of the last position coefficients relative to the radius."""


def solve(
    model: ForceModel,
    around: Surroundings,
    grid: Collocation,
    cells: Cells,
    guess: tuple[np.ndarray, np.ndarray],
    chain_states: np.ndarray,
    chain_partials: np.ndarray,
    scales: tuple[float, float],
    estimated: tuple[bool, bool],
) -> Stretch:
    """Solve the equations of motion and the variational equations on cells.

    Parameters
    ----------
    model, around : ForceModel, Surroundings
        Forces, and what surrounds the nodes of `cells`.
    guess : (ndarray, ndarray)
        Position and velocity at all nodes, (m (N+1), 3): a two-body orbit.
    chain_states : ndarray (c, 6)
        State at the start of every chain [m], [m/s].
    chain_partials : ndarray (c, 6, p)
        Its derivatives with the parameters: six of the state, then the estimated force scales.
    scales : (float, float)
        Scales of radiation pressure and drag.
    estimated : (bool, bool)
        Which of the two scales are among the parameters.

    Raises
    ------
    ValueError
        If the orbit comes closer to the centre than `LOWEST_RADIUS_M`, or the iteration does not converge.
    """
    position, velocity = guess
    m, n = cells.start_s.size, grid.nodes.size
    half = cells.half_s
    tau = half[:, None] * (1.0 + grid.nodes)
    eye = np.arange(3 * n)
    twice = (half**2)[:, None, None] * grid.twice
    once = half[:, None, None] * grid.once
    use = [6 + k for k, flag in enumerate(f for f in estimated if f)]
    for _ in range(_MAX_ITERATIONS):
        _check_radius(position, cells, grid)
        forces = model.at_nodes(around, position, velocity, *scales, grid)
        gradient = forces.position_gradient
        constant = forces.acceleration - np.matmul(gradient, position[:, :, None])[:, :, 0]
        right = np.zeros((m, n, 3, 7 + len(use)))
        per_position = gradient.reshape(m, n, 3, 3)
        matrix = per_position[:, :, :, None, :] * (-twice)[:, :, None, :, None]
        right[..., 1:4] = per_position
        right[..., 4:7] = per_position * tau[:, :, None, None]
        if forces.velocity_gradient is not None:
            per_velocity = forces.velocity_gradient.reshape(m, n, 3, 3)
            matrix -= per_velocity[:, :, :, None, :] * once[:, :, None, :, None]
            right[..., 4:7] += per_velocity
            constant = constant - np.matmul(forces.velocity_gradient, velocity[:, :, None])[:, :, 0]
        right[..., 0] = constant.reshape(m, n, 3)
        column = 7
        for flag, partial in zip(estimated, (forces.per_radiation, forces.per_drag), strict=True):
            if flag:
                right[..., column] = partial.reshape(m, n, 3)
                column += 1
        matrix = matrix.reshape(m, 3 * n, 3 * n)
        matrix[:, eye, eye] += 1.0
        linear = np.linalg.solve(matrix, right.reshape(m, 3 * n, -1)).reshape(m, n, -1)
        ends = _end_maps(linear, half, twice, once)
        starts = _chain_states(ends, cells.previous, chain_states)
        columns = linear.reshape(m, 3 * n, -1)
        node_acceleration = columns[:, :, 0] + np.matmul(columns[:, :, 1:7], starts[:, :, None])[:, :, 0]
        node_acceleration = node_acceleration.reshape(m, n, 3)
        shift = starts[:, None, :3] + tau[:, :, None] * starts[:, None, 3:]
        new_position = (shift + twice @ node_acceleration).reshape(m * n, 3)
        velocity = (starts[:, None, 3:] + once @ node_acceleration).reshape(m * n, 3)
        change = np.abs(new_position - position).max() if np.isfinite(new_position).all() else np.inf
        position = new_position
        if change < _CONVERGED_1 * LOWEST_RADIUS_M:
            break
        if not change < 1e3 * np.abs(starts[:, :3]).max():
            raise ValueError("orbit: the integration diverges: the orbit comes too close to the Earth's centre")
    else:
        raise ValueError(f"orbit: the integration has not converged in {_MAX_ITERATIONS} iterations")
    _check_radius(position, cells, grid)
    return _stretch(grid, cells, linear, ends, starts, node_acceleration, chain_partials, use)


def _check_radius(position: np.ndarray, cells: Cells, grid: Collocation) -> None:
    """Raise ValueError if a node is too close to the Earth's centre."""
    square = np.einsum("ki,ki->k", position, position)
    lowest = int(np.argmin(square))
    if not square[lowest] > LOWEST_RADIUS_M**2:
        raise ValueError(
            f"orbit: {np.sqrt(square[lowest]) / 1e3:.0f} km from the Earth's centre at "
            f"{cells.node_times(grid)[lowest]:.1f} s past the epoch; allowed: above {LOWEST_RADIUS_M / 1e3:.0f} km"
        )


def _end_maps(linear: np.ndarray, half: np.ndarray, twice: np.ndarray, once: np.ndarray) -> np.ndarray:
    """Return (m, 6, 7 + q): end state of each cell as constant, matrix on its start state, matrix on the scales."""
    m, n, _ = linear.shape
    width = linear.shape[2] // 3
    last = np.stack([twice[:, -1], once[:, -1]], axis=1)
    ends = np.matmul(last, linear.reshape(m, n, -1)).reshape(m, 6, width)
    ends[:, [0, 1, 2, 3, 4, 5], [1, 2, 3, 4, 5, 6]] += 1.0
    ends[:, [0, 1, 2], [4, 5, 6]] += 2.0 * half[:, None]
    return ends


def _chain_states(ends: np.ndarray, previous: np.ndarray, chain_states: np.ndarray) -> np.ndarray:
    """Return the start state (m, 6) of every cell."""
    starts = np.empty((previous.size, 6))
    for cell, before in enumerate(previous.tolist()):
        if before < 0:
            starts[cell] = chain_states[-1 - before]
        else:
            starts[cell] = ends[before, :, 0] + ends[before, :, 1:7] @ starts[before]
    return starts


def _stretch(grid, cells, linear, ends, starts, node_acceleration, chain_partials, use) -> Stretch:
    """Return the coefficients of the converged solution."""
    m, n, _ = node_acceleration.shape
    p = chain_partials.shape[2]
    start_partials = np.empty((m, 6, p))
    end_partials = np.empty((m, 6, p))
    for cell, before in enumerate(cells.previous.tolist()):
        start_partials[cell] = chain_partials[-1 - before] if before < 0 else end_partials[before]
        end_partials[cell] = ends[cell, :, 1:7] @ start_partials[cell]
        if use:
            end_partials[cell][:, use] += ends[cell, :, 7:]
    columns = linear.reshape(m, 3 * n, -1)
    node_partials = np.matmul(columns[:, :, 1:7], start_partials)
    if use:
        node_partials[:, :, use] += columns[:, :, 7:]
    node_partials = node_partials.reshape(m, n, 3 * p)
    half = cells.half_s[:, None, None]
    states = np.zeros((m, n + 2, 9))
    _fill(states[..., :3], states[..., 3:6], grid, half, node_acceleration, starts[:, None, :3], starts[:, None, 3:])
    states[:, :n, 6:] = grid.coefficients @ node_acceleration
    position_partials = np.empty((m, n + 2, 3 * p))
    velocity_partials = np.empty((m, n + 2, 3 * p))
    initial = start_partials.reshape(m, 1, 6 * p)
    _fill(
        position_partials, velocity_partials, grid, half, node_partials, initial[..., : 3 * p], initial[..., 3 * p :]
    )
    tail = np.abs(states[:, -3:, :3]).max(axis=(1, 2))
    end_states = states[:, :, :6].sum(axis=1)
    truncation = tail / np.sqrt(np.einsum("mi,mi->m", starts[:, :3], starts[:, :3]))
    return Stretch(states, position_partials, velocity_partials, end_states, end_partials, truncation)


def _fill(position, velocity, grid, half, acceleration, start_position, start_velocity) -> None:
    """Write the coefficients of position and velocity for node accelerations and start values."""
    position[...] = half**2 * (grid.twice_coefficients @ acceleration)
    velocity[...] = half * (grid.once_coefficients @ acceleration)
    position[:, :1] += start_position + half * start_velocity
    position[:, 1:2] += half * start_velocity
    velocity[:, :1] += start_velocity
