"""Noise of consecutive counts: covariance that is tridiagonal in rows ordered by phase record, and its whitening.

Counts cut from one unbroken phase record share their end phases, so the errors of neighbours correlate by -1/2. Rows
that were counted separately are independent. A robust weight below 1 adds independent variance to its own row only.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cholesky_banded, solve_banded


@dataclass(frozen=True, eq=False)
class Whitener:
    """Inverse Cholesky factor of the covariance of the rows.

    Parameters
    ----------
    variance : ndarray, shape (n,)
        Diagonal of the covariance.
    covariance : ndarray, shape (n,)
        Covariance of row i with row i - 1 (0 where no phase is shared).
    """

    variance: np.ndarray
    covariance: np.ndarray
    factor: np.ndarray | None
    """Lower Cholesky factor in banded form, None when the covariance is diagonal."""

    def __call__(self, rows: np.ndarray) -> np.ndarray:
        """Return whitened rows: a vector (n,) or a matrix (n, k)."""
        if self.factor is None:
            scale = 1.0 / np.sqrt(self.variance)
            return rows * (scale if rows.ndim == 1 else scale[:, None])
        return solve_banded((1, 0), self.factor, rows, check_finite=False)


def whitener(
    sigma: np.ndarray,
    chained: np.ndarray,
    weights: np.ndarray | None = None,
    independent_variance: np.ndarray | float = 0.0,
) -> Whitener:
    """Return the whitening of rows with 1-sigma `sigma`.

    Parameters
    ----------
    sigma : ndarray, shape (n,)
        1-sigma of each row from the phases at its ends (or simply its 1-sigma when it is not chained).
    chained : ndarray of bool, shape (n,)
        Whether row i shares its start phase with the end phase of row i - 1.
    weights : ndarray, shape (n,), optional
        Robust weights in (0, 1]; the variance of a row becomes sigma**2 / weight.
    independent_variance : ndarray or float
        Variance that neighbouring counts do not share, such as white frequency noise of a clock.
    """
    variance = sigma**2 + independent_variance
    if weights is not None:
        variance = variance + sigma**2 * (1.0 / weights - 1.0)
    covariance = np.zeros_like(sigma)
    covariance[1:] = np.where(chained[1:], -0.5 * sigma[1:] * sigma[:-1], 0.0)
    if not chained[1:].any():
        return Whitener(variance, covariance, None)
    banded = np.zeros((2, sigma.size))
    # A pure difference of white phases is barely positive definite over long records: its smallest eigenvalue falls
    # as (pi/n)**2 / 2 of the variance. 1e-9 of it (no effect below 1e4 rows a record) keeps the factor safe beyond.
    banded[0] = variance * (1.0 + 1e-9)
    banded[1, :-1] = covariance[1:]
    return Whitener(variance, covariance, cholesky_banded(banded, lower=True, check_finite=False))
