"""Colour of the residuals: is the noise white as stated, and what do the slow clock errors cost?

Rows are gathered into blocks of consecutive counts. In the blocks the covariance is a sum of known shapes with unknown
sizes (white phase, white frequency and random-walk frequency of each station, and the emitter's own); the sizes come
from restricted maximum likelihood (Patterson & Thompson 1971), which accounts for what the fit has taken up.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, solve_triangular
from scipy.optimize import minimize
from scipy.stats import chi2

from shiftfix.estimation.observations import Observations


@dataclass(frozen=True, eq=False)
class Blocks:
    """Rows gathered into blocks.

    Parameters
    ----------
    matrix : ndarray, shape (m, n)
        Block means of rows: for counts of one phase record the mean frequency over the block, weights = interval.
    station, middle_s, length_s : ndarray, shape (m,)
    """

    matrix: np.ndarray
    station: np.ndarray
    start_s: np.ndarray
    stop_s: np.ndarray


@dataclass(frozen=True, eq=False)
class Colour:
    """Fitted noise of the blocks.

    Parameters
    ----------
    covariance : ndarray, shape (m, m)
    names : tuple of str
    variances : ndarray
        Size of each component, in the units of its shape.
    log_likelihood : float
        Restricted log-likelihood.
    """

    blocks: Blocks
    covariance: np.ndarray
    names: tuple[str, ...]
    variances: np.ndarray
    log_likelihood: float


def portmanteau(whitened: np.ndarray, station: np.ndarray, times_s: np.ndarray, lags: int = 12) -> tuple[float, float]:
    """Return statistic and p-value of the Ljung-Box test for whiteness over all stations (Ljung & Box 1978)."""
    statistic, degrees = 0.0, 0
    for s in np.unique(station):
        e = whitened[station == s][np.argsort(times_s[station == s], kind="stable")]
        n = e.size
        if n < 4 * lags:
            continue
        e = e - e.mean()
        power = float(e @ e)
        if power <= 0:
            continue
        for k in range(1, lags + 1):
            statistic += n * (n + 2) * (float(e[k:] @ e[:-k]) / power) ** 2 / (n - k)
        degrees += lags
    return statistic, float(chi2.sf(statistic, degrees)) if degrees else 1.0


def gather(rows: Observations, used: np.ndarray, blocks: int = 300) -> Blocks:
    """Return blocks of consecutive rows, about `blocks` of them, none across stations, gaps or breaks of the phase."""
    index = np.flatnonzero(used)
    order = index[np.lexsort((rows.middle_s[index], rows.station[index]))]
    chained_any = rows.chained.any()
    spacing = np.diff(rows.middle_s[order])
    same = rows.station[order][1:] == rows.station[order][:-1]
    typical = np.median(spacing[same]) if same.any() else 1.0
    together = same & (spacing < 3.0 * typical)
    if chained_any:
        together &= rows.chained[order][1:] & (np.diff(order) == 1)
    run = np.concatenate([[0], np.cumsum(~together)])
    size = max(1, int(np.ceil(len(order) / blocks)))
    position = np.arange(len(order)) - np.searchsorted(run, run, side="left")
    label = np.unique(np.column_stack([run, position // size]), axis=0, return_inverse=True)[1].ravel()
    m = label.max() + 1 if len(label) else 0
    matrix = np.zeros((m, len(rows)))
    weight = (
        np.where(rows.interval_s[order] > 0, rows.interval_s[order], 1.0)
        if chained_any
        else 1.0 / rows.sigma[order] ** 2
    )
    matrix[label, order] = weight
    matrix /= matrix.sum(1)[:, None]
    start, stop, station = np.full(m, np.inf), np.full(m, -np.inf), np.zeros(m, np.int64)
    np.minimum.at(start, label, rows.start_s[order])
    np.maximum.at(stop, label, rows.stop_s[order])
    station[label] = rows.station[order]
    return Blocks(matrix, station, start, stop)


def estimate_colour(
    rows: Observations,
    residuals: np.ndarray,
    design: np.ndarray,
    white: np.ndarray,
    blocks: Blocks,
    *,
    floor: float = 1e-4,
) -> Colour:
    """Return the noise of the blocks by restricted maximum likelihood.

    Parameters
    ----------
    rows : Observations
    residuals : ndarray, shape (n,)
        Of z after the fit.
    design : ndarray, shape (n, k)
        Partial derivatives of everything that was estimated without a prior of weight.
    white : ndarray, shape (m, m)
        Covariance of the blocks by the stated noise; its size is estimated too, one factor a station.
    blocks : Blocks
    """
    r = blocks.matrix @ residuals
    x = blocks.matrix @ design
    norm = np.linalg.norm(x, axis=0)
    x = x[:, norm > 0] / norm[norm > 0]
    x = np.linalg.qr(x)[0]
    components, names, start = _components(blocks, white)
    scale = float(np.var(r)) or 1e-30

    # The stated noise is a floor in every trial: what the data show beyond it is what is looked for.
    base = white + 1e-9 * np.trace(white) / len(white) * np.eye(len(white))

    def negative(theta: np.ndarray) -> tuple[float, np.ndarray]:
        v = base.copy()
        for size, shape in zip(np.exp(theta), components, strict=True):
            v += size * shape
        try:
            factor = cholesky(v, lower=True, check_finite=False)
        except np.linalg.LinAlgError:
            return 1e30, np.zeros_like(theta)
        wx = solve_triangular(factor, x, lower=True, check_finite=False)
        wr = solve_triangular(factor, r, lower=True, check_finite=False)
        q, upper = np.linalg.qr(wx)
        e = wr - q @ (q.T @ wr)
        value = np.log(np.diag(factor)).sum() + np.log(np.abs(np.diag(upper))).sum() + 0.5 * e @ e
        inverse = solve_triangular(factor, np.eye(len(v)), lower=True, check_finite=False)
        projected = inverse - q @ (q.T @ inverse)
        p = inverse.T @ projected
        pr = inverse.T @ e
        gradient = np.array(
            [
                0.5 * s * (np.einsum("ij,ij->", p, c) - pr @ c @ pr)
                for s, c in zip(np.exp(theta), components, strict=True)
            ]
        )
        return float(value), gradient

    sizes = np.array([np.log(max(0.1 * scale / max(np.trace(c) / len(c), 1e-300), 1e-300)) for c in components])
    limits = [(s - 25.0, s + 12.0) for s in sizes]
    answer = minimize(negative, sizes, jac=True, method="L-BFGS-B", bounds=limits, options={"maxiter": 60})
    variances = np.exp(answer.x)
    covariance = base.copy()
    for size, shape in zip(variances, components, strict=True):
        covariance += size * shape
    return Colour(blocks, covariance, names, variances, -float(answer.fun))


def _components(blocks: Blocks, white: np.ndarray) -> tuple[list[np.ndarray], tuple[str, ...], None]:
    """Return shapes: per station white phase or value noise, white frequency noise, random-walk frequency; emitter's."""
    shapes: list[np.ndarray] = []
    names: list[str] = []
    length = np.maximum(blocks.stop_s - blocks.start_s, 1e-3)
    middle = 0.5 * (blocks.start_s + blocks.stop_s)
    origin = middle.min()
    walk = np.minimum(middle[:, None], middle[None]) - origin
    for s in np.unique(blocks.station):
        mine = blocks.station == s
        both = np.outer(mine, mine)
        shapes += [np.where(both, white, 0.0), np.diag(mine / length), np.where(both, walk, 0.0)]
        names += [f"stated[{s}]", f"white frequency[{s}]", f"random-walk frequency[{s}]"]
    overlap = np.minimum(blocks.stop_s[:, None], blocks.stop_s[None]) - np.maximum(
        blocks.start_s[:, None], blocks.start_s[None]
    )
    if len(np.unique(blocks.station)) > 1:
        shapes.append(np.maximum(overlap, 0.0) / np.outer(length, length))
        names.append("white frequency[emitter]")
        shapes.append(walk)
        names.append("random-walk frequency[emitter]")
    return shapes, tuple(names), None


def generalised(
    colour: Colour, design: np.ndarray, residuals: np.ndarray, prior_rows: np.ndarray, prior_residuals: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Return step and covariance of the generalised least-squares estimate in the blocks.

    Parameters
    ----------
    colour : Colour
    design : ndarray, shape (n, k)
    residuals : ndarray, shape (n,)
    prior_rows, prior_residuals : ndarray, shapes (j, k) and (j,)
        Whitened prior statements: `prior_rows @ step = prior_residuals`.
    """
    factor = cholesky(colour.covariance, lower=True)
    a = np.vstack([solve_triangular(factor, colour.blocks.matrix @ design, lower=True), prior_rows])
    b = np.concatenate([solve_triangular(factor, colour.blocks.matrix @ residuals, lower=True), prior_residuals])
    norm = np.linalg.norm(a, axis=0)
    norm = np.where(norm > 0, norm, 1.0)
    q, upper = np.linalg.qr(a / norm)
    inverse = np.linalg.pinv(upper, rcond=1e-13)
    return (inverse @ (q.T @ b)) / norm, (inverse @ inverse.T) / np.outer(norm, norm)


def sandwich(colour: Colour, design: np.ndarray, white: np.ndarray, lower: np.ndarray) -> np.ndarray:
    """Return the covariance of the estimate that used the stated noise, when the noise is what `colour` says.

    Parameters
    ----------
    design : ndarray, shape (n, k)
    white : ndarray, shape (m, m)
        Stated covariance of the blocks.
    lower : ndarray, shape (j, k)
        Whitened prior rows.
    """
    x = colour.blocks.matrix @ design
    norm = np.sqrt((x**2).sum(0) / np.diag(white).mean() + (lower**2).sum(0))
    norm = np.where(norm > 0, norm, 1.0)
    x, lower = x / norm, lower / norm
    factor = cho_factor(white + 1e-12 * np.trace(white) / len(white) * np.eye(len(white)))
    wx = cho_solve(factor, x)
    bread = np.linalg.pinv(x.T @ wx + lower.T @ lower, rcond=1e-15, hermitian=True)
    meat = wx.T @ colour.covariance @ wx + lower.T @ lower
    return bread @ meat @ bread / np.outer(norm, norm)
