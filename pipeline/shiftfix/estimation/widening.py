"""Honest errors when the residuals are not white: the noise that they show is carried into the estimate's covariance."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.stats import chi2

from shiftfix.estimation import priors as prior_rows
from shiftfix.estimation.colour import Colour, estimate_colour, gather, generalised, portmanteau, sandwich
from shiftfix.estimation.fit import Fit
from shiftfix.estimation.noise import Whitener

NOISE_MODES = ("declared", "estimated")


@dataclass(frozen=True, eq=False)
class Widened:
    """A fit with the covariance that its residuals ask for.

    Parameters
    ----------
    fit : Fit
    covariance : ndarray, shape (p + q, p + q)
    kind : str
        `formal`, `scaled` (white, but larger than stated) or `widened` (coloured).
    carry : callable
        Change of all parameters for a change of z.
    findings : tuple of str
    colour : Colour or None
    """

    fit: Fit
    covariance: np.ndarray
    kind: str
    carry: Callable[[np.ndarray], np.ndarray]
    findings: tuple[str, ...]
    colour: Colour | None


def widen(fit: Fit, mode: str = "declared", *, level: float = 1e-3, minimum_rows: int = 40) -> Widened:
    """Return the fit with an error that fits its residuals.

    Parameters
    ----------
    fit : Fit
    mode : {"declared", "estimated"}
        `declared` keeps the estimate and widens its covariance when the residuals contradict the stated noise;
        `estimated` also re-weights the estimate by the noise that the residuals show.
    level : float
        Probability below which a test contradicts the stated noise.
    minimum_rows : int
        With fewer rows no colour is looked for; a too large chi-square scales the covariance.
    """
    used = fit.used
    rows = fit.forward.rows
    count = int(used.sum())
    dof = max(fit.degrees_of_freedom, 1)
    reduced = fit.chi_square / dof
    statistic, p_white = portmanteau(fit.whitened[used], rows.station[used], rows.middle_s[used])
    too_large = chi2.sf(fit.chi_square, dof) < level
    findings: list[str] = []
    if too_large:
        findings.append(
            f"residuals are {np.sqrt(reduced):.2f} times the stated noise (chi-square {fit.chi_square:.0f} for {dof})"
        )
    if p_white < level:
        findings.append(f"residuals are not white: neighbours are alike (Ljung-Box {statistic:.0f}, chance {p_white:.1e})")
    if mode == "declared" and not too_large and p_white >= level:
        return Widened(fit, fit.covariance, "formal", fit.carry, (), None)
    if count < minimum_rows:
        scale = max(1.0, reduced)
        return Widened(fit, fit.covariance * scale, "scaled", fit.carry, tuple(findings), None)
    blocks = gather(rows, used)
    whiten = fit.whiten
    white = block_covariance(blocks.matrix, whiten)
    linear = fit.nuisance
    design = np.column_stack([fit.forward.partials(fit.path), linear.columns])
    colour = estimate_colour(rows, fit.residuals, design, white, blocks)
    lower = _lower(fit)
    findings.append(_describe(colour, fit, white))
    if mode == "estimated":
        for _ in range(2):
            fit, covariance = _reweighted(fit, colour, lower)
            design = np.column_stack([fit.forward.partials(fit.path), linear.columns])
            colour = estimate_colour(rows, fit.residuals, design, white, blocks)
        fit, covariance = _reweighted(fit, colour, lower)
        design = np.column_stack([fit.forward.partials(fit.path), linear.columns])
        return Widened(fit, covariance, "widened", _carrier(colour, design, covariance), tuple(findings), colour)
    covariance = sandwich(colour, design, white, lower)
    # The blocks lose a little of the rows' information; never claim less than the formal error.
    grow = max(
        1.0,
        float(np.median(np.diag(fit.covariance)[: fit.parameters.size] / np.diag(covariance)[: fit.parameters.size])),
    )
    return Widened(fit, covariance * grow, "widened", fit.carry, tuple(findings), colour)


def block_covariance(matrix: np.ndarray, whiten: Whitener) -> np.ndarray:
    """Return the covariance of block means for the tridiagonal covariance of the rows."""
    right = whiten.variance[:, None] * matrix.T
    off = whiten.covariance[1:, None]
    right[1:] += off * matrix.T[:-1]
    right[:-1] += off * matrix.T[1:]
    return matrix @ right


def _lower(fit: Fit) -> np.ndarray:
    p = fit.parameters.size
    _, prior_jacobian = prior_rows.stacked(fit.settings.priors, fit.parameters)
    lower = np.zeros((len(fit.nuisance.prior_rows) + len(prior_jacobian), p + fit.linear.size))
    lower[: len(fit.nuisance.prior_rows), p:] = fit.nuisance.prior_rows
    lower[len(fit.nuisance.prior_rows) :, :p] = prior_jacobian
    return lower


def _reweighted(fit: Fit, colour: Colour, lower: np.ndarray) -> tuple[Fit, np.ndarray]:
    linear = fit.nuisance
    p = fit.parameters.size
    rows = fit.forward.rows
    design = np.column_stack([fit.forward.partials(fit.path), linear.columns])
    prior_residual, _ = prior_rows.stacked(fit.settings.priors, fit.parameters)
    toward = np.concatenate([linear.prior_values - linear.prior_rows @ fit.linear, -prior_residual])
    step, covariance = generalised(colour, design, fit.residuals, lower, toward)
    parameters, values = fit.parameters + step[:p], fit.linear + step[p:]
    path = fit.motion.at(parameters)
    residuals = rows.z - fit.forward.predict(path) - linear.columns @ values
    moved = replace(
        fit,
        parameters=parameters,
        linear=values,
        path=path,
        residuals=residuals,
        normalised=residuals / rows.sigma,
        whitened=fit.whiten(residuals),
    )
    return moved, covariance


def _carrier(colour: Colour, design: np.ndarray, covariance: np.ndarray) -> Callable[[np.ndarray], np.ndarray]:
    matrix = colour.blocks.matrix
    gain = covariance @ cho_solve(cho_factor(colour.covariance), matrix @ design).T

    def carry(change_of_z: np.ndarray) -> np.ndarray:
        return gain @ (matrix @ change_of_z)

    return carry


def _describe(colour: Colour, fit: Fit, white: np.ndarray) -> str:
    """Return the largest noise components in words: Allan-type size at the length of the arc's blocks."""
    parts = []
    ids = [r.station_id for r in fit.forward.receivers]
    span = float(np.ptp(fit.forward.rows.middle_s)) or 1.0
    for name, variance in zip(colour.names, colour.variances, strict=True):
        kind, who = name.rstrip("]").split("[")
        who = who if who == "emitter" else ids[int(who)]
        if kind == "white frequency":
            size = np.sqrt(variance / span)
        elif kind == "random-walk frequency":
            size = np.sqrt(variance * span)
        else:
            continue
        if size > 0.3 * np.sqrt(np.median(np.diag(white))):
            parts.append((size, f"{kind} of {who} {size:.1e} over the arc"))
    parts.sort(key=lambda pair: -pair[0])
    return "slow noise in the residuals: " + ("; ".join(text for _, text in parts[:4]) or "none above the stated noise")
