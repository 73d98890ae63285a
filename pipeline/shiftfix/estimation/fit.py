"""Fit of one motion to one arc from one start: weighted, robust, separable; with the joint covariance of everything.

The motion parameters are found with the linear ones projected out; the joint covariance of both comes afterwards from
one QR factorisation of the scaled design matrix, and every error that the residuals cannot show is carried through the
same linear map (consider parameters).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.linalg import qr, solve_triangular

from shiftfix.estimation import priors as prior_rows
from shiftfix.estimation.editing import NEGLIGIBLE_WEIGHT, Gates, gross_outliers, robust_weights
from shiftfix.estimation.forward import ForwardModel, Media
from shiftfix.estimation.leastsquares import Minimum, minimise, projection
from shiftfix.estimation.noise import whitener
from shiftfix.estimation.nuisance import ClockModels, Nuisance, nuisance
from shiftfix.estimation.observations import Observations
from shiftfix.estimation.receivers import Receiver
from shiftfix.physics.motion.states import Motion, Path


@dataclass(frozen=True)
class FitSettings:
    """What a fit assumes.

    Parameters
    ----------
    clocks : ClockModels
    media : Media
    gates : Gates
    priors : tuple of Prior
        On the motion parameters.
    max_iterations : int
    check_cancelled : callable
    """

    clocks: ClockModels = field(default_factory=ClockModels)
    media: Media = field(default_factory=Media)
    gates: Gates = field(default_factory=Gates)
    priors: tuple = ()
    max_iterations: int = 60
    check_cancelled: Callable[[], None] = lambda: None


@dataclass(frozen=True, eq=False)
class Fit:
    """Result of a fit; rows in the order of the observations.

    Parameters
    ----------
    parameters : ndarray, shape (p,)
    linear : ndarray, shape (q,)
        Linear parameters, named in `nuisance.names`.
    covariance : ndarray, shape (p + q, p + q)
        Formal covariance, motion parameters first.
    gain : ndarray, shape (p + q, n)
        Change of the estimate for a change of each whitened row: carries any further error into the estimate.
    residuals : ndarray, shape (n,)
        z minus prediction.
    normalised : ndarray, shape (n,)
        residuals / 1-sigma of the row.
    weights : ndarray, shape (n,)
        Robust weights; NEGLIGIBLE_WEIGHT for rejected rows.
    chi_square : float
    degrees_of_freedom : int
    singular_values : ndarray, shape (p,)
        Of the projected Jacobian with columns in units of the motion's natural scales, largest first.
    directions : ndarray, shape (p, p)
        Rows: the parameter directions (in units of the scales) that belong to them.
    condition : float
        Condition number of the scaled joint design matrix.
    """

    motion: Motion
    path: Path
    forward: ForwardModel
    nuisance: Nuisance
    settings: FitSettings
    parameters: np.ndarray
    linear: np.ndarray
    covariance: np.ndarray
    gain: np.ndarray
    residuals: np.ndarray
    normalised: np.ndarray
    whitened: np.ndarray
    weights: np.ndarray
    chi_square: float
    degrees_of_freedom: int
    singular_values: np.ndarray
    directions: np.ndarray
    condition: float
    rank_full: bool
    converged: bool
    iterations: int

    @property
    def used(self) -> np.ndarray:
        """Rows that were not rejected."""
        return self.weights > 10 * NEGLIGIBLE_WEIGHT

    @property
    def cost(self) -> float:
        """Robust chi-square for comparing solutions of the same rows: rejected rows count with their gate."""
        gate = self.settings.gates.reject_1
        return self.chi_square + float((~self.used).sum()) * gate**2

    @property
    def whiten(self) -> Callable[[np.ndarray], np.ndarray]:
        """Whitening of the rows with the final weights."""
        rows = self.forward.rows
        return whitener(rows.sigma, rows.chained, self.weights)

    def carry(self, change_of_z: np.ndarray) -> np.ndarray:
        """Return the change of all parameters for given changes of z: (n,) -> (p + q,), (n, k) -> (p + q, k)."""
        return self.gain @ self.whiten(change_of_z)


def fit_arc(
    rows: Observations,
    receivers: Sequence[Receiver],
    motion: Motion,
    start: np.ndarray,
    settings: FitSettings | None = None,
    *,
    forward: ForwardModel | None = None,
    initial_weights: np.ndarray | None = None,
) -> Fit:
    """Return the fit that is reached from `start`.

    Parameters
    ----------
    rows : Observations
    receivers : sequence of Receiver
    motion : Motion
    start : ndarray, shape (p,)
    settings : FitSettings, optional
    forward : ForwardModel, optional
        Reused between fits of the same rows.
    initial_weights : ndarray, shape (n,), optional
        Weights of the first pass; gross outliers are found when absent.

    Raises
    ------
    ValueError
        When the path cannot be evaluated at the start.
    """
    settings = settings or FitSettings()
    forward = forward or ForwardModel(rows, receivers, settings.media)
    start = np.asarray(start, float)
    memo = _Memo(forward, motion)
    lag = memo.light_time(start) if len(rows) else 0.0
    linear_model = nuisance(rows, receivers, settings.clocks, lag)
    if initial_weights is None:
        gross = np.zeros(len(rows), bool) if settings.gates.keep_all else gross_outliers(rows)
        weights = np.where(gross, NEGLIGIBLE_WEIGHT, 1.0)
    else:
        weights = initial_weights
    parameters, iterations = start, 0
    for attempt in range(10):
        # Weights are settled on a minimum good to a tenth of a sigma; the last one is good to some thousandths.
        tolerance = 1e-2 if attempt == 0 and not settings.gates.keep_all else 1e-5
        minimum, linear = _weighted_fit(memo, linear_model, weights, parameters, settings, tolerance)
        parameters = minimum.parameters
        iterations += minimum.iterations
        residuals = rows.z - memo.prediction(parameters) - linear_model.columns @ linear
        renewed = robust_weights(residuals / rows.sigma, settings.gates, rows.station)
        change = np.abs(np.log(renewed / weights)).max(initial=0.0)
        if settings.gates.keep_all or (change < 0.02 and attempt > 0):
            break
        weights = renewed
    return _result(memo, linear_model, weights, minimum, linear, residuals, iterations, settings)


class _Memo:
    """Keeps the last path and its links: residuals and Jacobian are asked for at the same parameters in turn."""

    def __init__(self, forward: ForwardModel, motion: Motion) -> None:
        self.forward, self.motion = forward, motion
        self._key: bytes | None = None

    def _bind(self, parameters: np.ndarray) -> None:
        key = parameters.tobytes()
        if key != self._key:
            self._path = self.motion.at(parameters)
            self._link = self.forward.links(self._path)
            self._prediction = self.forward.predict(self._path, self._link)
            self._partials = None
            self._key = key

    def light_time(self, parameters: np.ndarray) -> float:
        """Return the median light time [s]."""
        self._bind(parameters)
        return float(np.median(self._link.light_time_s))

    def path(self, parameters: np.ndarray) -> Path:
        self._bind(parameters)
        return self._path

    def prediction(self, parameters: np.ndarray) -> np.ndarray:
        self._bind(parameters)
        return self._prediction

    def partials(self, parameters: np.ndarray) -> np.ndarray:
        self._bind(parameters)
        if self._partials is None:
            self._partials = self.forward.partials(self._path, self._link)
        return self._partials


def _weighted_fit(
    memo: _Memo, linear_model: Nuisance, weights: np.ndarray, start: np.ndarray, settings: FitSettings, tolerance: float
) -> tuple[Minimum, np.ndarray]:
    rows = memo.forward.rows
    whiten = whitener(rows.sigma, rows.chained, weights)
    eliminate = projection(whiten(linear_model.columns), linear_model.prior_rows, linear_model.prior_values)

    def residuals(p: np.ndarray) -> np.ndarray:
        free = eliminate.residuals(whiten(rows.z - memo.prediction(p)))
        return np.concatenate([free, prior_rows.stacked(settings.priors, p)[0]]) if settings.priors else free

    def jacobian(p: np.ndarray) -> np.ndarray:
        free = eliminate.jacobian(whiten(memo.partials(p)))
        return np.vstack([free, prior_rows.stacked(settings.priors, p)[1]]) if settings.priors else free

    minimum = minimise(
        residuals,
        jacobian,
        start,
        scales=memo.motion.scales,
        max_iterations=settings.max_iterations,
        tolerance=tolerance,
        check_cancelled=settings.check_cancelled,
    )
    linear = eliminate.linear(whiten(rows.z - memo.prediction(minimum.parameters)))
    return minimum, linear


def _result(
    memo: _Memo,
    linear_model: Nuisance,
    weights: np.ndarray,
    minimum: Minimum,
    linear: np.ndarray,
    residuals: np.ndarray,
    iterations: int,
    settings: FitSettings,
) -> Fit:
    rows = memo.forward.rows
    parameters = minimum.parameters
    whiten = whitener(rows.sigma, rows.chained, weights)
    p, _n = parameters.size, len(rows)
    design = np.column_stack([memo.partials(parameters), linear_model.columns])
    prior_residual, prior_jacobian = prior_rows.stacked(settings.priors, parameters)
    lower = np.zeros((len(linear_model.prior_rows) + len(prior_jacobian), design.shape[1]))
    lower[: len(linear_model.prior_rows), p:] = linear_model.prior_rows
    lower[len(linear_model.prior_rows) :, :p] = prior_jacobian
    covariance, gain, condition = joint_covariance(whiten(design), lower)
    whitened = whiten(residuals)
    used = weights > 10 * NEGLIGIBLE_WEIGHT
    prior_linear = linear_model.prior_rows @ linear - linear_model.prior_values
    chi_square = float(whitened @ whitened + prior_linear @ prior_linear + prior_residual @ prior_residual)
    scaled = minimum.jacobian * memo.motion.scales
    _, singular, directions = np.linalg.svd(scaled, full_matrices=False)
    return Fit(
        motion=memo.motion,
        path=memo.path(parameters),
        forward=memo.forward,
        nuisance=linear_model,
        settings=settings,
        parameters=parameters,
        linear=linear,
        covariance=covariance,
        gain=gain,
        residuals=residuals,
        normalised=residuals / rows.sigma,
        whitened=whitened,
        weights=weights,
        chi_square=chi_square,
        degrees_of_freedom=int(used.sum()) + len(lower) - design.shape[1],
        singular_values=singular,
        directions=directions,
        condition=condition,
        # 1e-10 of the largest: below it the direction is lost in the rounding of the partial derivatives.
        rank_full=bool(singular.size == p and singular.min(initial=np.inf) > 1e-10 * singular.max(initial=1.0)),
        converged=minimum.converged,
        iterations=iterations,
    )


def joint_covariance(design: np.ndarray, lower: np.ndarray) -> tuple[np.ndarray, np.ndarray, float]:
    """Return covariance, gain and condition of a whitened design.

    Parameters
    ----------
    design : ndarray, shape (n, m)
        Whitened rows of the data.
    lower : ndarray, shape (k, m)
        Whitened rows of the priors.

    Returns
    -------
    covariance : ndarray, shape (m, m)
    gain : ndarray, shape (m, n)
        Estimate change for a change of each whitened data row.
    condition : float
        Of the design with columns scaled to unit norm.

    Notes
    -----
    QR with column scaling. Directions whose singular value falls below 1e-13 of the largest get a variance that is
    bounded by that ratio: large, never infinite, never silently small.
    """
    stacked = np.vstack([design, lower])
    norm = np.linalg.norm(stacked, axis=0)
    norm = np.where(norm > 0, norm, 1.0)
    q, upper = qr(stacked / norm, mode="economic", check_finite=False)
    values = np.linalg.svd(upper, compute_uv=False)
    condition = float(values[0] / values[-1]) if values[-1] > 0 else float("inf")
    if condition < 1e12:
        inverse = solve_triangular(upper, np.eye(len(upper)), check_finite=False)
    else:
        u, s, vt = np.linalg.svd(upper)
        inverse = (vt.T / np.maximum(s, 1e-13 * s[0])) @ u.T
    inverse = inverse / norm[:, None]
    return inverse @ inverse.T, inverse @ q[: len(design)].T, condition
