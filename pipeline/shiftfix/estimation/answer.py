"""From starting states to an answer one may defend: fits, distinct solutions with odds, verdict, full covariance, budget."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from shiftfix.estimation.ambiguity import distinct_fits, odds
from shiftfix.estimation.considered import Considered, considered_changes
from shiftfix.estimation.covariance import describe_direction, local_axes, nearest_distance
from shiftfix.estimation.editing import Gates, robust_spread
from shiftfix.estimation.fit import Fit, FitSettings, fit_arc
from shiftfix.estimation.forward import ForwardModel
from shiftfix.estimation.leastsquares import projection
from shiftfix.estimation.motions import BoundMotion
from shiftfix.estimation.noise import whitener
from shiftfix.estimation.nuisance import nuisance
from shiftfix.estimation.observations import Observations
from shiftfix.estimation.receivers import Receiver
from shiftfix.estimation.widening import Widened, widen

UNSEEN_SHARE = {"GCRS": 0.05, "ITRS": 0.25}
"""A direction counts as not seen when its 1-sigma exceeds this share of the distance to the nearest receiver: there the
lines of sight turn so much within the error that the linear covariance says nothing. An orbit has the tighter limit:
its curve bends with the whole state, not with the line of sight alone."""


@dataclass(frozen=True)
class AnswerSettings:
    """What an answer assumes beyond the fit.

    Parameters
    ----------
    fit : FitSettings
    considered : Considered
    noise : {"declared", "estimated"}
    odds_threshold : float
        Below these odds of the best solution the answer is ambiguous.
    keep_delta_chi_square : float
        Other solutions are listed up to this far above the best.
    starts : int
        Largest number of starts that are fitted.
    elevation_mask_deg : float
        Rows of ground stations below it, as the best first fit sees them, are left out; -90 keeps all.
    elevation_weighting : bool
        Whether the 1-sigma of rows of ground stations grows as 1/sin(elevation): media and multipath (common practice).
    """

    fit: FitSettings = field(default_factory=FitSettings)
    considered: Considered = field(default_factory=Considered)
    noise: str = "declared"
    odds_threshold: float = 0.95
    keep_delta_chi_square: float = 25.0
    starts: int = 16
    elevation_mask_deg: float = -90.0
    elevation_weighting: bool = False


@dataclass(frozen=True, eq=False)
class Answer:
    """Answer of an arc.

    Parameters
    ----------
    verdict, text : str
    unobservable : tuple of str
    widened : Widened or None
        Best solution with its error; None when nothing could be fitted.
    others : tuple of Fit
        Other solutions, best first.
    odds : ndarray
        Of the best and the others.
    position, velocity : ndarray or None
        At the arc epoch, in the frame of the motion.
    state_covariance : ndarray, shape (6, 6), or None
    parameter_covariance : ndarray or None
        Of motion and linear parameters, considered errors included.
    budget : dict
        1-sigma of position [m] and velocity [m/s] by source; squares sum to the total.
    findings : tuple of str
    kept : ndarray of bool or None
        Rows of the observations that took part; None means all.
    """

    verdict: str
    text: str
    unobservable: tuple[str, ...]
    widened: Widened | None
    others: tuple[Fit, ...]
    odds: np.ndarray
    position: np.ndarray | None
    velocity: np.ndarray | None
    state_covariance: np.ndarray | None
    parameter_covariance: np.ndarray | None
    budget: dict
    findings: tuple[str, ...]
    kept: np.ndarray | None = None


def solve_arc(
    rows: Observations,
    receivers: Sequence[Receiver],
    bound: BoundMotion,
    starts: np.ndarray,
    settings: AnswerSettings | None = None,
) -> Answer:
    """Return the answer of one arc from given starts.

    Parameters
    ----------
    rows : Observations
    receivers : sequence of Receiver
    bound : BoundMotion
    starts : ndarray, shape (B, p)
        Best first.
    settings : AnswerSettings, optional
    """
    settings = settings or AnswerSettings()
    forward = ForwardModel(rows, receivers, settings.fit.media)
    used_rows = np.unique(rows.station)
    flat = all(not receivers[s].moving for s in used_rows) and bound.frame == "ITRS"
    null_cost = _null_cost(rows, receivers, settings.fit)
    fits, failures = _fits(rows, receivers, bound, np.atleast_2d(starts)[: settings.starts], settings, forward)
    kept = None
    if fits and (settings.elevation_mask_deg > -90.0 or settings.elevation_weighting):
        kept, graded = _by_elevation(rows, min(fits, key=lambda f: (not f.converged, f.cost)), settings)
        if kept.sum() >= max(0.3 * len(rows), 8):
            again = [f.parameters for f in distinct_fits(fits)]
            rows = graded.select(kept)
            forward = ForwardModel(rows, receivers, settings.fit.media)
            fits, failures = _fits(rows, receivers, bound, np.array(again), settings, forward)
            null_cost = _null_cost(rows, receivers, settings.fit)
        else:
            kept = None
    if not fits:
        reason = failures[0].splitlines()[0] if failures else "the search returned no starting state"
        return _refused("not converged", f"no start could be fitted: {reason}", (), None, ())
    fits = distinct_fits(fits)
    best = fits[0]
    spread = max(1.0, robust_spread(best.normalised[best.used]))
    # A solution that does not move nor is moved past explains nothing: then the curves are flat at every station.
    if flat and null_cost - best.cost < 30.0 * spread**2:
        text = (
            "the received frequency is constant at every station (no Doppler shift is seen); "
            "an emitter at rest relative to fixed stations can be anywhere"
        )
        return _refused("not locatable by this method", text, ("position, all directions",), None, ())
    fits = [f for f in fits if f.cost - best.cost < settings.keep_delta_chi_square * spread**2]
    chances = odds(fits, spread)
    order = np.argsort(-chances, kind="stable")
    # The lowest cost leads unless the odds clearly favour another basin.
    fits, chances = [fits[i] for i in order], chances[order]
    widened = widen(fits[0], settings.noise)
    fit = widened.fit
    unseen = _unseen(fit, bound, widened)
    covariance, budget = _with_considered(widened, bound, settings.considered)
    position, velocity, jacobian = bound.state(fit.path)
    p = fit.parameters.size
    state_covariance = jacobian @ covariance[:p, :p] @ jacobian.T
    findings = _findings(fit, widened, chances)
    others = tuple(fits[1:])
    if not fit.converged and not unseen:
        ratio = fit.singular_values[-1] / max(fit.singular_values[0], 1e-300)
        verdict, text = "not converged", "the iteration did not reach a minimum; see the findings"
        if ratio < 1e-3:
            text = (
                f"the iteration did not reach a minimum: the cost falls along a curved valley (weakest over strongest "
                f"direction {ratio:.0e}); more stations, a longer arc or a prior would close it"
            )
    elif unseen or not fit.rank_full:
        words = unseen[0] if unseen else "one combination of the parameters"
        more = f", and {len(unseen) - 1} more" if len(unseen) > 1 else ""
        verdict, text = "not observable", f"the data do not determine the emitter; not seen: {words}{more}"
    elif (~fit.used).mean() > 0.4:
        share = (~fit.used).mean()
        verdict, text = "quality failed", f"{100 * share:.0f} % of the rows contradict the solution: model or data are wrong"
    elif len(fits) > 1 and chances[0] < settings.odds_threshold:
        verdict = "ambiguous"
        text = f"{len(fits)} solutions fit; odds {', '.join(f'{c:.2f}' for c in chances[:4])}"
    else:
        verdict, text = "fix", "one solution fits"
    return Answer(
        verdict,
        text,
        unseen,
        widened,
        others,
        chances,
        position,
        velocity,
        state_covariance,
        covariance,
        budget,
        findings,
        kept,
    )


def _fits(
    rows, receivers, bound, starts, settings: AnswerSettings, forward: ForwardModel
) -> tuple[list[Fit], list[str]]:
    fits, failures = [], []
    for start in starts:
        settings.fit.check_cancelled()
        if any(_inside(start, fit, bound.scanned) for fit in fits):
            continue
        try:
            if bound.scanned:
                start = _scanned(rows, receivers, bound, start, settings.fit, forward)
            fits.append(fit_arc(rows, receivers, bound.motion, start, settings.fit, forward=forward))
        except ValueError as error:
            failures.append(str(error))
    return fits, failures


def _inside(start: np.ndarray, fit: Fit, scanned: tuple[int, ...]) -> bool:
    """Return whether a start lies within three standard deviations of a solution that is there already."""
    p = start.size
    difference = np.abs(start - fit.parameters)
    near = difference < 3.0 * np.sqrt(np.diag(fit.covariance)[:p]) + 1e-3 * fit.motion.scales
    near[list(scanned)] = True
    return bool(fit.converged and near.all())


def _scanned(rows, receivers, bound, start, settings: FitSettings, forward: ForwardModel) -> np.ndarray:
    """Return a start whose scanned parameters lie where the cost of all rows is least, the others fitted to them."""
    plain = replace(settings, gates=Gates(keep_all=True))
    linear = nuisance(rows, receivers, settings.clocks)
    whiten = whitener(rows.sigma, rows.chained)
    eliminate = projection(whiten(linear.columns), linear.prior_rows, linear.prior_values)

    def cost(parameters: np.ndarray) -> float:
        try:
            r = eliminate.residuals(whiten(rows.z - forward.predict(bound.motion.at(parameters))))
        except ValueError:
            return np.inf
        return float(np.minimum(r**2, 400.0).sum())

    best = np.array(start, float)
    # Half the spacing of the thinned search, then a few counts, then within a count.
    span = float(np.ptp(rows.middle_s))
    for width in (span / 8, span / 24, span / 100):
        for index in bound.scanned:
            trials = np.repeat(best[None], 33, axis=0)
            trials[:, index] += np.linspace(-width, width, 33)
            best = trials[int(np.argmin([cost(t) for t in trials]))]
        best = fit_arc(rows, receivers, bound.motion, best, plain, forward=forward).parameters
    return best


def _by_elevation(rows: Observations, fit: Fit, settings: AnswerSettings) -> tuple[np.ndarray, Observations]:
    """Return the rows above the mask, and the rows with their 1-sigma graded by elevation (ground stations only)."""
    elevation = fit.forward.elevation_deg(fit.path)
    ground = np.array([not r.moving for r in fit.forward.receivers])[rows.station]
    kept = ~ground | (elevation >= settings.elevation_mask_deg)
    if not settings.elevation_weighting:
        return kept, rows
    # Below 3 deg the sine would overstate what is left of the growth.
    factor = np.where(ground, 1.0 / np.sin(np.radians(np.clip(elevation, 3.0, 90.0))), 1.0)
    return kept, replace(rows, sigma=rows.sigma * factor)


def _refused(
    verdict: str, text: str, unseen: tuple[str, ...], widened: Widened | None, findings: tuple[str, ...]
) -> Answer:
    return Answer(verdict, text, unseen, widened, (), np.empty(0), None, None, None, None, {}, findings)


def _null_cost(rows: Observations, receivers: Sequence[Receiver], settings: FitSettings) -> float:
    """Return the chi-square of a curve that rest frequency and station offsets alone explain."""
    linear = nuisance(rows, receivers, settings.clocks)
    whiten = whitener(rows.sigma, rows.chained)
    r = projection(whiten(linear.columns), linear.prior_rows, linear.prior_values).residuals(whiten(rows.z))
    gate = settings.gates.reject_1
    return float(np.minimum(r**2, gate**2).sum())


def _unseen(fit: Fit, bound: BoundMotion, widened: Widened) -> tuple[str, ...]:
    """Return directions in words that the data do not determine."""
    position, velocity, jacobian = bound.state(fit.path)
    p = fit.parameters.size
    covariance = jacobian @ widened.covariance[:p, :p] @ jacobian.T
    distance = nearest_distance(fit)
    if bound.frame == "GCRS":
        axes, names = local_axes(position, velocity), ("radial", "along-track", "cross-track")
    else:
        up = position / np.linalg.norm(position)
        east = np.cross([0.0, 0.0, 1.0], up)
        east /= max(np.linalg.norm(east), 1e-12)
        axes, names = np.array([east, np.cross(up, east), up]), ("east", "north", "up")
    values, vectors = np.linalg.eigh(covariance[:3, :3])
    limit = UNSEEN_SHARE[bound.frame] * distance
    words = []
    for value, vector in zip(values[::-1], vectors.T[::-1], strict=True):
        sigma = np.sqrt(max(value, 0.0))
        if sigma > limit or not np.isfinite(sigma):
            # What moves together with the position tells the user what to add.
            speed = covariance[3:, :3] @ vector / max(value, 1e-300) * sigma
            size = f"1 sigma {sigma / 1e3:.3g} km" if sigma < distance else "as good as unknown"
            text = f"position ({describe_direction(vector, axes, names)}; {size})"
            if np.linalg.norm(speed) > 0:
                size = f"; {np.linalg.norm(speed):.3g} m/s" if sigma < distance else ""
                text += f" together with velocity ({describe_direction(speed, axes, names)}{size})"
            words.append(text)
    return tuple(words)


def _with_considered(widened: Widened, bound: BoundMotion, considered: Considered) -> tuple[np.ndarray, dict]:
    fit = widened.fit
    covariance = widened.covariance.copy()
    _, _, jacobian = bound.state(fit.path)
    p = fit.parameters.size

    def sizes(c: np.ndarray) -> dict[str, float]:
        state = jacobian @ c[:p, :p] @ jacobian.T
        return {
            "position_m": float(np.sqrt(np.trace(state[:3, :3]))),
            "velocity_m_s": float(np.sqrt(np.trace(state[3:, 3:]))),
        }

    formal = sizes(fit.covariance)
    budget = {"noise, offsets and priors as stated": formal}
    if widened.kind != "formal":
        total = sizes(widened.covariance)
        budget["residuals beyond the stated noise"] = {
            k: float(np.sqrt(max(total[k] ** 2 - formal[k] ** 2, 0.0))) for k in total
        }
        if any(total[k] < formal[k] for k in total):
            # Re-weighting can beat the stated weights: then the whole error is one line.
            budget = {"noise, offsets and priors as the residuals show": total}
    for source, columns in considered_changes(fit, considered).items():
        change = widened.carry(columns)
        extra = change @ change.T
        covariance += extra
        budget[source] = sizes(extra)
    budget["total"] = sizes(covariance)
    return covariance, budget


def _findings(fit: Fit, widened: Widened, chances: np.ndarray) -> tuple[str, ...]:
    out = list(widened.findings)
    rejected = int((~fit.used).sum())
    if rejected:
        out.append(f"{rejected} of {len(fit.weights)} rows rejected by the fit")
    down = int((fit.weights[fit.used] < 0.999).sum())
    if down:
        out.append(f"{down} rows weighted down")
    if fit.condition > 1e9:
        out.append(f"condition number of the scaled problem {fit.condition:.1e}: weak geometry or a free common offset")
    if len(chances) > 1:
        out.append(
            f"{len(chances)} distinct minima near the least cost; odds of the first {chances[0]:.3f}"
        )
    return tuple(out)
