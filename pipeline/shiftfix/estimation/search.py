"""Global search without a prior: a grid of candidate motions, scored and refined in batches on a thinned arc.

Rest frequency and station offsets are projected out of every score, so that the grid runs over the motion alone. The
search uses range rate at reception time (an error of v**2/c**2, metres to some hundred metres of position): its result
is a list of starting states for the exact fit, one or more per basin.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from shiftfix.estimation.editing import gross_outliers
from shiftfix.estimation.leastsquares import Projection, projection
from shiftfix.estimation.nuisance import ClockModels, nuisance
from shiftfix.estimation.observations import Observations
from shiftfix.estimation.receivers import Receiver
from shiftfix.physics.constants import SPEED_OF_LIGHT_M_S

BatchStates = Callable[[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray]]


@dataclass(frozen=True, eq=False)
class SearchData:
    """Thinned arc for the search.

    Parameters
    ----------
    times_s : ndarray, shape (n,)
        Middle of the rows [s past the arc epoch].
    station : ndarray of int, shape (n,)
    position, velocity : ndarray, shape (n, 3)
        Receivers, GCRS.
    z, sigma : ndarray, shape (n,)
    eliminate : Projection
        Of rest frequency and station offsets.
    receivers : tuple of Receiver
    """

    times_s: np.ndarray
    station: np.ndarray
    position: np.ndarray
    velocity: np.ndarray
    z: np.ndarray
    sigma: np.ndarray
    eliminate: Projection
    receivers: tuple[Receiver, ...]

    def residuals(self, position: np.ndarray, velocity: np.ndarray) -> np.ndarray:
        """Return whitened, projected residuals of candidate states, (B, n, 3) -> (B, n + k)."""
        line = position - self.position
        speed = velocity - self.velocity
        rate = np.einsum("bni,bni->bn", line, speed) / np.sqrt(np.einsum("bni,bni->bn", line, line))
        white = (self.z + rate / SPEED_OF_LIGHT_M_S) / self.sigma
        priors = np.broadcast_to(self.eliminate.prior_values, (len(white), self.eliminate.prior_values.size))
        stacked = np.concatenate([white, priors], axis=1)
        return stacked - (stacked @ self.eliminate.basis) @ self.eliminate.basis.T


def search_data(
    rows: Observations, receivers: tuple[Receiver, ...], clocks: ClockModels, per_station: int = 24
) -> SearchData:
    """Return the arc thinned to at most `per_station` rows a station, gross outliers left out.

    Neighbouring rows are averaged in place of being dropped where that loses no curvature: the row in the middle of
    each stretch stands for it, with the stretch's median deviation from a straight line removed.
    """
    good = ~gross_outliers(rows)
    chosen: list[int] = []
    for s in np.unique(rows.station):
        mine = np.flatnonzero((rows.station == s) & good)
        mine = mine[np.argsort(rows.middle_s[mine], kind="stable")]
        if mine.size > per_station:
            mine = mine[np.unique(np.linspace(0, mine.size - 1, per_station).round().astype(int))]
        chosen.extend(mine.tolist())
    thin = rows.select(np.array(sorted(chosen), dtype=int))
    simple = ClockModels(
        station={"random_walk": "drift", "piecewise": "constant"}.get(clocks.station, clocks.station),
        emitter={"random_walk": "drift"}.get(clocks.emitter, clocks.emitter),
        station_drift_sigma_per_s=clocks.station_drift_sigma_per_s,
        emitter_drift_sigma_per_s=clocks.emitter_drift_sigma_per_s,
        steps_s=clocks.steps_s,
        step_sigma=clocks.step_sigma,
        datum=clocks.datum,
        rest_log=clocks.rest_log,
        rest_log_sigma=clocks.rest_log_sigma,
    )
    linear = nuisance(thin, receivers, simple)
    # The model error of the search (light time, mid-point averages, media) is of the order of 1e-9: residuals below it
    # mean nothing here, and a larger sigma keeps the damped steps well scaled.
    sigma = np.maximum(thin.sigma, 3e-10)
    position, velocity = np.empty((len(thin), 3)), np.empty((len(thin), 3))
    for s in np.unique(thin.station):
        mine = thin.station == s
        states = receivers[s].path.states(thin.middle_s[mine])
        position[mine], velocity[mine] = states.position, states.velocity
    eliminate = projection(linear.columns / sigma[:, None], linear.prior_rows, linear.prior_values)
    return SearchData(thin.middle_s, thin.station, position, velocity, thin.z, sigma, eliminate, tuple(receivers))


def refine(
    data: SearchData,
    states: BatchStates,
    candidates: np.ndarray,
    scales: np.ndarray,
    *,
    priors: tuple = (),
    schedule: tuple[tuple[int, int], ...] = ((3, 200), (5, 100), (10, 40), (15, 16)),
    check_cancelled: Callable[[], None] = lambda: None,
) -> tuple[np.ndarray, np.ndarray]:
    """Return refined candidates and their costs, best first.

    Parameters
    ----------
    candidates : ndarray, shape (B, p)
    scales : ndarray, shape (p,)
        Natural size of each parameter: sets steps of the difference quotients (1e-4 of it) and the damping.
    priors : tuple of Prior
    schedule : tuple of (iterations, survivors)
        After so many damped steps only the best candidates go on.

    Notes
    -----
    All candidates take a damped Gauss-Newton step at once; each has its own damping.
    """
    x = np.array(candidates, float)
    p = x.shape[1]

    def evaluate(y: np.ndarray) -> np.ndarray:
        with np.errstate(all="ignore"):
            r = data.residuals(*states(y, data.times_s))
            if priors:
                r = np.concatenate([r] + [prior.batch(y) for prior in priors], axis=1)
        return r

    r = evaluate(x)
    cost = _cost(r)
    damping = np.full(len(x), 1e-2)
    for iterations, survivors in schedule:
        for _ in range(iterations):
            check_cancelled()
            steps = np.repeat(x, p, axis=0) + np.tile(np.diag(1e-4 * scales), (len(x), 1))
            moved = evaluate(steps).reshape(len(x), p, -1)
            j = (moved - r[:, None, :]) / 1e-4
            normal = np.einsum("bpm,bqm->bpq", j, j)
            right = np.einsum("bpm,bm->bp", j, r)
            diagonal = np.einsum("bpp->bp", normal).copy()
            normal[:, np.arange(p), np.arange(p)] += (
                damping[:, None] * diagonal + 1e-12 * diagonal.max(1, initial=1e-30)[:, None]
            )
            bad = ~np.isfinite(normal).all((1, 2)) | ~np.isfinite(right).all(1)
            normal[bad], right[bad] = np.eye(p), 0.0
            step = np.linalg.solve(normal, right[..., None])[..., 0]
            trial = x - step * scales
            trial_r = evaluate(trial)
            trial_cost = _cost(trial_r)
            better = trial_cost < cost
            x[better], r[better] = trial[better], trial_r[better]
            gain = np.where(better, cost - trial_cost, 0.0)
            cost = np.where(better, trial_cost, cost)
            damping = np.clip(np.where(better, damping * 0.2, damping * 6.0), 1e-9, 1e9)
            if (gain < 1e-4 * (1.0 + cost)).all():
                break
        order = np.argsort(cost, kind="stable")
        # One of each basin goes on: without this a wide basin's many candidates crowd a weaker one (a mirror) out.
        keep = order[distinct(x[order], scales, 0.1, survivors)]
        x, r, cost, damping = x[keep], r[keep], cost[keep], damping[keep]
    finite = np.isfinite(cost)
    return x[finite], cost[finite]


def _cost(r: np.ndarray) -> np.ndarray:
    cost = np.einsum("bm,bm->b", r, r)
    return np.where(np.isfinite(cost), cost, np.inf)


def distinct(candidates: np.ndarray, scales: np.ndarray, tolerance: float, limit: int) -> np.ndarray:
    """Return the indices of at most `limit` candidates that differ by more than `tolerance` x scales from better ones."""
    scaled = candidates / scales
    kept: list[int] = []
    for k in range(len(scaled)):
        if not kept or (np.abs(scaled[kept] - scaled[k]).max(1) > tolerance).all():
            kept.append(k)
            if len(kept) == limit:
                break
    return np.array(kept, dtype=int)
