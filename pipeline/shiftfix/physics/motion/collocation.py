"""Chebyshev collocation of second-order differential equations: the matrices, and piecewise polynomial evaluation.

A cell [start, start + 2 half] is mapped on tau in [-1, 1] with t = start + half (tau + 1); `half` is negative for a
cell that runs backward in time. A function of time is held by its values at the Gauss-Lobatto points
tau_j = -cos(pi j / N), so that the first node is the start of the cell and the last node its end.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.polynomial import chebyshev, legendre


class Collocation(NamedTuple):
    """Matrices for the degree N; all act on the N + 1 values at the nodes unless said otherwise."""

    nodes: np.ndarray
    """(N+1,) Gauss-Lobatto points, ascending from -1 to 1."""
    coefficients: np.ndarray
    """(N+1, N+1) node values -> Chebyshev coefficients of the interpolating polynomial."""
    once: np.ndarray
    """(N+1, N+1) node values -> values at the nodes of the integral from -1."""
    twice: np.ndarray
    """(N+1, N+1) node values -> values at the nodes of the double integral from -1."""
    once_coefficients: np.ndarray
    """(N+3, N+1) node values -> Chebyshev coefficients of the integral, padded with a zero row."""
    twice_coefficients: np.ndarray
    """(N+3, N+1) node values -> Chebyshev coefficients of the double integral."""
    fine: np.ndarray
    """(M,) quadrature points, many more than nodes."""
    to_fine: np.ndarray
    """(M, N+1) node values -> values at the fine points."""
    from_fine: np.ndarray
    """(N+1, M) values at the fine points -> node values of the best polynomial in the mean square.

    That polynomial has the moments 0..N of the function it stands for, so the integral and the double integral over a
    cell are right (to the quadrature of the fine points) even for a function with steps, as a shadow has.
    """


@lru_cache(maxsize=8)
def collocation(degree: int, panels: int = 32) -> Collocation:
    """Return the matrices of Chebyshev collocation for one degree (computed once in a process).

    Parameters
    ----------
    degree : int
        Degree N of the polynomial of the acceleration; position has degree N + 2.
    panels : int
        Number of equal parts of the fine grid, with 16 Gauss-Legendre points each: with 32 the edges of the shadow cost
        0.5 mm in a day of a low or of a very eccentric orbit, with 12 10 mm in the latter.

    Notes
    -----
    Gauss-Lobatto interpolation and integration: C. W. Clenshaw and A. R. Curtis, Numer. Math. 2 (1960) 197.
    """
    number = np.arange(degree + 1)
    nodes = -np.cos(np.pi * number / degree)
    coefficients = np.linalg.inv(chebyshev.chebvander(nodes, degree))
    once = chebyshev.chebint(coefficients, lbnd=-1)
    twice = chebyshev.chebint(once, lbnd=-1)
    points, weights = legendre.leggauss(16)
    fine = ((2.0 * np.arange(panels)[:, None] + 1.0 + points) / panels - 1.0).ravel()
    weights = np.tile(weights / panels, panels)
    projection = (number + 0.5)[:, None] * legendre.legvander(fine, degree).T * weights
    matrices = Collocation(
        nodes=nodes,
        coefficients=coefficients,
        once=chebyshev.chebvander(nodes, degree + 1) @ once,
        twice=chebyshev.chebvander(nodes, degree + 2) @ twice,
        once_coefficients=np.vstack([once, np.zeros((1, degree + 1))]),
        twice_coefficients=twice,
        fine=fine,
        to_fine=chebyshev.chebvander(fine, degree) @ coefficients,
        from_fine=legendre.legvander(nodes, degree) @ projection,
    )
    for matrix in matrices:
        matrix.setflags(write=False)
    return matrices


def chebyshev_values(tau: np.ndarray, count: int) -> np.ndarray:
    """Return T_0 .. T_(count-1) at `tau` (n,) as (count, n), by the three-term recurrence."""
    values = np.empty((count, tau.size))
    values[0] = 1.0
    values[1] = tau
    double = 2.0 * tau
    for k in range(2, count):
        np.multiply(double, values[k - 1], out=values[k])
        values[k] -= values[k - 2]
    return values


class PiecewiseChebyshev:
    """Vector functions given by Chebyshev coefficients on adjoining cells.

    Parameters
    ----------
    start_s, half_s : ndarray (m,)
        Start and signed half length of every cell [s]; the cells must cover an interval without gap, in any order.
    """

    def __init__(self, start_s: np.ndarray, half_s: np.ndarray):
        lower = np.minimum(start_s, start_s + 2.0 * half_s)
        order = np.argsort(lower, kind="stable")
        self._order = order
        self._start = start_s[order]
        self._half = half_s[order]
        self._inner_edges = lower[order][1:]
        self.first_s = float(lower[order[0]])
        self.last_s = float(np.max(np.maximum(start_s, start_s + 2.0 * half_s)))

    def locate(self, times_s: np.ndarray) -> tuple[list[tuple[int, slice]], np.ndarray, np.ndarray | None]:
        """Return which rows lie in which cell.

        Returns
        -------
        blocks : list of (cell, slice)
            Cell number (in the order given at construction) and its rows among the sorted rows.
        tau : ndarray (n,)
            Position of the sorted rows in their cells, -1 .. 1.
        order : ndarray (n,) or None
            Sorting permutation; None when the rows are sorted by cell already.
        """
        if self._order.size == 1:
            return [(0, slice(0, times_s.size))], (times_s - self._start[0]) / self._half[0] - 1.0, None
        cell = np.searchsorted(self._inner_edges, times_s, side="right")
        order = None
        if np.any(cell[1:] < cell[:-1]):
            order = np.argsort(cell, kind="stable")
            cell = cell[order]
            times_s = times_s[order]
        tau = (times_s - self._start[cell]) / self._half[cell] - 1.0
        edges = np.concatenate([[0], np.flatnonzero(np.diff(cell)) + 1, [cell.size]])
        pairs = zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True)
        blocks = [(int(self._order[cell[a]]), slice(a, b)) for a, b in pairs if b > a]
        return blocks, tau, order


def evaluate(blocks, basis: np.ndarray, coefficients: np.ndarray, order: np.ndarray | None) -> np.ndarray:
    """Return piecewise polynomials at located rows.

    Parameters
    ----------
    blocks, order
        As `PiecewiseChebyshev.locate` gives them.
    basis : ndarray (count, n)
        Chebyshev polynomials at the sorted rows.
    coefficients : ndarray (m, count, c)
        Coefficients of c functions on m cells.

    Returns
    -------
    ndarray (n, c)
    """
    count = coefficients.shape[1]
    if len(blocks) == 1:
        values = basis[:count].T @ coefficients[blocks[0][0]]
    else:
        values = np.empty((basis.shape[1], coefficients.shape[2]))
        for cell, rows in blocks:
            np.matmul(basis[:count, rows].T, coefficients[cell], out=values[rows])
    if order is not None:
        unsorted = np.empty_like(values)
        unsorted[order] = values
        return unsorted
    return values
