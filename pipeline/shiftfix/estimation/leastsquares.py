"""Nonlinear least squares: damped Gauss-Newton steps on scaled columns by QR, with linear parameters projected out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.linalg import qr, solve_triangular

Evaluate = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True, eq=False)
class Minimum:
    """Where a minimisation ended.

    Parameters
    ----------
    parameters : ndarray, shape (p,)
    residuals : ndarray, shape (m,)
        Whitened residuals there.
    jacobian : ndarray, shape (m, p)
        d residuals / d parameters there.
    cost : float
        Sum of the squared residuals.
    converged : bool
        Whether the last step was expected to lower the cost by less than the tolerance.
    iterations : int
        Number of accepted and refused steps.
    """

    parameters: np.ndarray
    residuals: np.ndarray
    jacobian: np.ndarray
    cost: float
    converged: bool
    iterations: int


def minimise(
    residuals: Evaluate,
    jacobian: Evaluate,
    start: np.ndarray,
    *,
    scales: np.ndarray | None = None,
    max_iterations: int = 50,
    tolerance: float = 1e-7,
    check_cancelled: Callable[[], None] = lambda: None,
) -> Minimum:
    """Return the minimum of sum(residuals**2) that is reached from `start`.

    Parameters
    ----------
    residuals, jacobian : callable
        Of the parameters, shape (p,); residuals (m,) in units of one sigma, jacobian (m, p). A residual function may
        raise ValueError or return non-finite numbers outside its domain: the step is then shortened.
    start : ndarray, shape (p,)
    scales : ndarray, shape (p,), optional
        Natural size of a change of each parameter, for the damping; 1-norm of the columns when absent.
    max_iterations : int
    tolerance : float
        Converged when the next full step is expected to lower the cost by less than this, or by less than 1e-14 of
        the cost (rounding).
    check_cancelled : callable
        Called before each step.

    Notes
    -----
    Levenberg-Marquardt damping in columns scaled to unit norm (Marquardt 1963); the QR factorisation avoids the
    squared condition number of normal equations.
    """
    x = np.array(start, float)
    r = residuals(x)
    cost = float(r @ r)
    if not np.isfinite(cost):
        raise ValueError("the residuals are not finite at the start")
    damping, iterations, converged = 1e-3, 0, False
    j = jacobian(x)
    while iterations < max_iterations:
        check_cancelled()
        norms = np.linalg.norm(j, axis=0)
        column = np.where(norms > 0, norms, 1.0)
        if scales is not None:
            # A column that the data hardly see must not be stretched beyond its natural size.
            column = np.maximum(column, 1e-12 * column.max(initial=1.0))
        q, upper = qr(j / column, mode="economic", check_finite=False)
        right = q.T @ r
        expected = float(right @ right)
        # Where the residuals exceed one sigma, a step is small against them, not against the stated noise.
        if expected <= max(tolerance * max(1.0, cost / max(r.size, 1)), 1e-14 * cost):
            converged = True
            break
        improved = False
        while iterations < max_iterations:
            iterations += 1
            step = _damped(upper, right, damping) / column
            trial = x - step
            trial_cost, trial_r = _cost(residuals, trial)
            if trial_cost < cost:
                gain = cost - trial_cost
                x, r, cost, improved = trial, trial_r, trial_cost, True
                damping = max(damping * (0.1 if gain > 0.5 * expected else 0.5), 1e-14)
                break
            damping *= 8.0
            if damping > 1e12 or np.all(np.abs(step) <= 4e-16 * np.abs(x)):
                break
        if not improved:
            # No direction lowers the cost: at the rounding level of the residuals this is the minimum.
            converged = expected <= max(1e-3 * max(1.0, cost / max(r.size, 1)), 1e-9 * cost)
            break
        j = jacobian(x)
    return Minimum(x, r, j, cost, converged, iterations)


def _cost(residuals: Evaluate, x: np.ndarray) -> tuple[float, np.ndarray | None]:
    try:
        r = residuals(x)
    except (ValueError, FloatingPointError):
        return float("inf"), None
    cost = float(r @ r)
    return (cost, r) if np.isfinite(cost) else (float("inf"), None)


def _damped(upper: np.ndarray, right: np.ndarray, damping: float) -> np.ndarray:
    p = upper.shape[1]
    stacked = np.vstack([upper, np.sqrt(damping) * np.eye(p)])
    q, r = qr(stacked, mode="economic", check_finite=False)
    diagonal = np.abs(np.diag(r))
    if diagonal.min(initial=1.0) < 1e-300:
        return np.zeros(p)
    return solve_triangular(r, q.T @ np.concatenate([right, np.zeros(p)]), check_finite=False)


@dataclass(frozen=True, eq=False)
class Projection:
    """Elimination of linear parameters with priors from whitened rows (variable projection, Golub & Pereyra 1973).

    Parameters
    ----------
    columns : ndarray, shape (n, q)
        Whitened columns of the linear parameters.
    prior_rows, prior_values : ndarray, shapes (k, q) and (k,)
        Whitened prior statements.
    """

    columns: np.ndarray
    prior_rows: np.ndarray
    prior_values: np.ndarray
    basis: np.ndarray
    upper: np.ndarray
    pivot: np.ndarray
    rank: int

    def residuals(self, observed_less_model: np.ndarray) -> np.ndarray:
        """Return the residuals after the best linear parameters, shape (n + k,)."""
        stacked = np.concatenate([observed_less_model, self.prior_values])
        return stacked - self.basis @ (self.basis.T @ stacked)

    def jacobian(self, partials: np.ndarray) -> np.ndarray:
        """Return minus the projected partial derivatives (d residuals / d parameters), shape (n + k, p)."""
        n = len(partials)
        reduced = self.basis[:n].T @ partials
        out = -(self.basis @ -reduced)
        out[:n] -= partials
        return out

    def linear(self, observed_less_model: np.ndarray) -> np.ndarray:
        """Return the linear parameters, shape (q,); those that nothing determines are 0."""
        stacked = np.concatenate([observed_less_model, self.prior_values])
        out = np.zeros(self.upper.shape[1])
        k = self.rank
        out[self.pivot[:k]] = solve_triangular(self.upper[:k, :k], self.basis.T[:k] @ stacked)
        return out / self._scale

    @property
    def _scale(self) -> np.ndarray:
        norm = np.sqrt((self.columns**2).sum(0) + (self.prior_rows**2).sum(0))
        return np.where(norm > 0, norm, 1.0)


def projection(columns: np.ndarray, prior_rows: np.ndarray, prior_values: np.ndarray) -> Projection:
    """Return the projection that eliminates the linear parameters; columns are scaled and pivoted."""
    stacked = np.vstack([columns, prior_rows])
    norm = np.sqrt((stacked**2).sum(0))
    scaled = stacked / np.where(norm > 0, norm, 1.0)
    q, upper, pivot = qr(scaled, mode="economic", pivoting=True, check_finite=False)
    diagonal = np.abs(np.diag(upper))
    rank = int((diagonal > 1e-11 * diagonal.max(initial=1.0)).sum()) if diagonal.size else 0
    return Projection(columns, prior_rows, prior_values, np.ascontiguousarray(q[:, :rank]), upper, pivot, rank)
