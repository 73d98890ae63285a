"""Solutions that fit: which of the minima are distinct, and the odds between them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shiftfix.estimation.fit import Fit


def distinct_fits(fits: Sequence[Fit], tolerance_sigma: float = 1.0) -> list[Fit]:
    """Return fits in order of cost, those left out that lie within the error of a better one.

    Two fits are the same basin when their parameters differ by less than `tolerance_sigma` standard deviations (of
    the wider of the two), or by rounding.
    """
    kept: list[Fit] = []
    for fit in sorted(fits, key=lambda f: (not f.converged, f.cost)):
        if not any(_same(fit, other, tolerance_sigma) for other in kept):
            kept.append(fit)
    return kept


def _same(a: Fit, b: Fit, tolerance: float) -> bool:
    difference = _canonical(a) - _canonical(b)
    p = difference.size
    if np.all(np.abs(difference) < 1e-6 * a.motion.scales):
        return True
    sigma = np.sqrt(np.maximum(np.diag(a.covariance)[:p], np.diag(b.covariance)[:p]))
    return bool(np.all(np.abs(difference) < tolerance * sigma + 1e-9 * a.motion.scales))


def _canonical(fit: Fit) -> np.ndarray:
    """Return the parameters with latitude and longitude in their usual ranges: a fit may have gone over a pole or round."""
    out = fit.parameters.copy()
    names = fit.motion.parameter_names
    if "latitude_rad" in names and "longitude_rad" in names:
        i, j = names.index("latitude_rad"), names.index("longitude_rad")
        latitude, longitude = out[i], out[j]
        out[i] = np.arcsin(np.sin(latitude))
        out[j] = np.arctan2(np.cos(latitude) * np.sin(longitude), np.cos(latitude) * np.cos(longitude))
    return out


def odds(fits: Sequence[Fit], noise_scale: float = 1.0) -> np.ndarray:
    """Return the probability of each solution among those listed, shape (len(fits),).

    Laplace's approximation of the evidence: exp(-cost / 2) times the volume of the error ellipsoid in the motion
    parameters, with equal prior density everywhere. `noise_scale` > 1 (residual spread over stated sigma) weakens the
    evidence as it should when the noise was stated too small.
    """
    if not fits:
        return np.empty(0)
    log_weight = np.array([_log_volume(f) - 0.5 * f.cost / max(noise_scale, 1.0) ** 2 for f in fits])
    weight = np.exp(log_weight - log_weight.max())
    return weight / weight.sum()


def _log_volume(fit: Fit) -> float:
    p = fit.parameters.size
    scaled = fit.covariance[:p, :p] / np.outer(fit.motion.scales, fit.motion.scales)
    sign, value = np.linalg.slogdet(scaled)
    # A direction that the data hardly see is cut at ten natural scales: it cannot buy unlimited odds.
    if sign <= 0 or not np.isfinite(value):
        return 0.0
    values = np.linalg.eigvalsh(scaled)
    return float(0.5 * np.log(np.clip(values, 1e-300, 100.0)).sum())
