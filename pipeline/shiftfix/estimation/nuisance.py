"""Linear part of the observation equation: rest frequency, its drift and steps, and the offsets of the stations.

In ln(received frequency) they are exactly linear, so that they are eliminated by projection and need no search. The
common mode of rest frequency and all station offsets is not observable: the frequency datum fixes it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from shiftfix.estimation.observations import Observations
from shiftfix.estimation.receivers import Receiver

STATION_MODELS = ("constant", "drift", "random_walk", "piecewise", "calibrated")
EMITTER_MODELS = ("constant", "drift", "random_walk")


@dataclass(frozen=True, eq=False)
class Nuisance:
    """Linear parameters of an arc with their priors.

    Parameters
    ----------
    columns : ndarray, shape (n, q)
        Partial derivatives of z.
    names : tuple of str
    prior_rows : ndarray, shape (k, q)
        Prior statements, whitened: `prior_rows @ b = prior_values` with unit variance.
    prior_values : ndarray, shape (k,)
    datum : str
        What defines frequency, in words.
    datum_sigma : float
        1-sigma [1] of the datum that no parameter carries (added to the rest frequency only).
    reference_s : float
        Time to which rest frequency and offsets refer [s past the arc epoch].
    """

    columns: np.ndarray
    names: tuple[str, ...]
    prior_rows: np.ndarray
    prior_values: np.ndarray
    datum: str
    datum_sigma: float = 0.0
    reference_s: float = 0.0
    stations: tuple[str, ...] = ()

    def index(self, name: str) -> int | None:
        """Return the position of a parameter, None when it is not there."""
        return self.names.index(name) if name in self.names else None


@dataclass(frozen=True)
class ClockModels:
    """How oscillators behave, as declared.

    Parameters
    ----------
    station : str
        One of `STATION_MODELS` for all stations; `calibrated` means that offsets were taken off already.
    emitter : str
        One of `EMITTER_MODELS`.
    station_drift_sigma_per_s, emitter_drift_sigma_per_s : float
        Prior 1-sigma of the drift of the fractional frequency.
    station_walk, emitter_walk : float
        Random walk of the fractional frequency [1/sqrt(s)].
    steps_s : tuple of float
        Times at which the emitter's frequency may step [s past the arc epoch].
    step_sigma : float
        Prior 1-sigma of a step [1].
    datum : str
        `auto`, or the station whose reference defines frequency.
    rest_log, rest_log_sigma : float
        Prior of ln(rest frequency / reference frequency); sigma inf means none.
    """

    station: str = "constant"
    emitter: str = "constant"
    station_drift_sigma_per_s: float = 1e-9
    emitter_drift_sigma_per_s: float = 3e-9
    station_walk: float = 1e-11
    emitter_walk: float = 1e-10
    steps_s: tuple[float, ...] = field(default=())
    step_sigma: float = 1e-6
    datum: str = "auto"
    rest_log: float = 0.0
    rest_log_sigma: float = float("inf")


def nuisance(
    rows: Observations, receivers: Sequence[Receiver], models: ClockModels, emission_lag_s: float = 0.0
) -> Nuisance:
    """Return the linear parameters of an arc.

    Parameters
    ----------
    rows : Observations
    receivers : sequence of Receiver
    models : ClockModels
    emission_lag_s : float
        Typical light time: steps and drift of the emitter happen at emission. An error of 0.1 s in it moves a drift
        term of 1e-9 /s by 1e-10 only in common, which the rest frequency takes up.
    """
    middle = rows.middle_s
    reference = 0.5 * (middle.min() + middle.max()) if middle.size else 0.0
    builder = _Builder(len(rows))
    builder.add("ln_rest_frequency_1", np.ones(len(rows)), models.rest_log, models.rest_log_sigma)
    emission = middle - emission_lag_s
    if models.emitter == "drift":
        builder.add("emitter_drift_1_s", emission - reference, 0.0, models.emitter_drift_sigma_per_s)
    elif models.emitter == "random_walk":
        builder.add_walk("emitter_walk", emission, np.ones(len(rows), bool), models.emitter_walk)
    for k, step in enumerate(models.steps_s):
        share = np.clip((rows.stop_s - emission_lag_s - step) / np.maximum(rows.interval_s, 1e-9), 0.0, 1.0)
        builder.add(f"emitter_step_{k + 1}_1", share, 0.0, models.step_sigma)
    used = [s for s in range(len(receivers)) if (rows.station == s).any()]
    datum, datum_sigma, fixed = _datum(rows, receivers, models, used)
    for s in used:
        receiver = receivers[s]
        mine = (rows.station == s).astype(float)
        if models.station == "calibrated":
            if np.isfinite(receiver.offset_sigma) and receiver.offset_sigma > 0:
                builder.add(f"offset[{receiver.station_id}]_1", mine, receiver.offset, receiver.offset_sigma)
            continue
        if s != fixed:
            named = models.datum != "auto"
            sigma = float("inf") if named else receiver.offset_sigma
            name = f"offset[{receiver.station_id}]_1"
            if models.station == "piecewise":
                for g in np.unique(rows.group[rows.station == s]):
                    builder.add(f"{name}.{g + 1}", mine * (rows.group == g), receiver.offset, sigma)
            else:
                builder.add(name, mine, receiver.offset, sigma)
        drift_sigma = receiver.drift_sigma_per_s
        if models.station == "drift":
            drift_sigma = drift_sigma or models.station_drift_sigma_per_s
        # With a drifting emitter the datum's own drift is not separable: it belongs to the datum.
        if drift_sigma > 0 and not (s == fixed and models.emitter != "constant"):
            builder.add(
                f"drift[{receiver.station_id}]_1_s", mine * (middle - reference), receiver.drift_per_s, drift_sigma
            )
        if models.station == "random_walk" and s != fixed:
            builder.add_walk(f"walk[{receiver.station_id}]", middle, mine > 0, models.station_walk)
    return builder.build(datum, datum_sigma, reference, tuple(receivers[s].station_id for s in used))


def _datum(rows: Observations, receivers: Sequence[Receiver], models: ClockModels, used: list[int]) -> tuple:
    if models.station == "calibrated":
        return "known emitters, through the calibrated station offsets", 0.0, None
    ids = [receivers[s].station_id for s in used]
    if models.datum != "auto":
        if models.datum not in ids:
            raise ValueError(f"datum station {models.datum!r} has no rows; stations with rows: {', '.join(ids)}")
        fixed = used[ids.index(models.datum)]
        sigma = receivers[fixed].offset_sigma
        return _named(receivers[fixed], sigma), sigma if np.isfinite(sigma) else 0.0, fixed
    finite = [s for s in used if np.isfinite(receivers[s].offset_sigma)]
    if finite:
        best = min(finite, key=lambda s: receivers[s].offset_sigma)
        others = ", ".join(receivers[s].station_id for s in finite if s != best)
        text = f"reference of {receivers[best].station_id} (1-sigma {receivers[best].offset_sigma:.1e})"
        return text + (f", with the priors of {others}" if others else ""), 0.0, None
    if np.isfinite(models.rest_log_sigma) and used:
        return "declared rest frequency (no station has a prior of its offset)", 0.0, None
    counts = [(rows.station == s).sum() for s in used]
    fixed = used[int(np.argmax(counts))] if used else None
    return (_named(receivers[fixed], float("inf")) if used else "none"), 0.0, fixed


def _named(receiver: Receiver, sigma: float) -> str:
    quality = f"1-sigma {sigma:.1e}" if np.isfinite(sigma) else "of unknown accuracy"
    return f"reference of {receiver.station_id}, taken as exact ({quality})"


class _Builder:
    """Collects columns and prior rows in order."""

    def __init__(self, rows: int) -> None:
        self.rows = rows
        self.columns: list[np.ndarray] = []
        self.names: list[str] = []
        self.priors: list[tuple[dict[int, float], float]] = []

    def add(self, name: str, column: np.ndarray, mean: float, sigma: float) -> None:
        self.columns.append(column)
        self.names.append(name)
        if np.isfinite(sigma):
            self.priors.append(({len(self.names) - 1: 1.0 / sigma}, mean / sigma))

    def add_walk(self, name: str, times: np.ndarray, mine: np.ndarray, walk: float) -> None:
        """Add a random walk as values at nodes, linear between them, zero at the first node."""
        first, last = times[mine].min(), times[mine].max()
        # At most 60 nodes: the part of the walk between nodes, walk * sqrt(node spacing) / 2, is what is left out.
        count = int(np.clip(np.ceil((last - first) / 30.0), 1, 60))
        step = max((last - first) / count, 1e-9)
        position = np.clip((times - first) / step, 0.0, count)
        lower = np.minimum(position.astype(int), count - 1)
        share = position - lower
        previous = None
        for k in range(1, count + 1):
            column = mine * (np.where(lower == k - 1, share, 0.0) + np.where(lower == k, 1.0 - share, 0.0))
            self.columns.append(column)
            self.names.append(f"{name}.{k}")
            here = len(self.names) - 1
            scale = 1.0 / (walk * np.sqrt(step))
            self.priors.append(({here: scale} | ({previous: -scale} if previous is not None else {}), 0.0))
            previous = here

    def build(self, datum: str, datum_sigma: float, reference: float, stations: tuple[str, ...]) -> Nuisance:
        columns = np.column_stack(self.columns) if self.columns else np.empty((self.rows, 0))
        rows = np.zeros((len(self.priors), columns.shape[1]))
        for k, (entries, _) in enumerate(self.priors):
            for column, value in entries.items():
                rows[k, column] = value
        values = np.array([value for _, value in self.priors])
        return Nuisance(columns, tuple(self.names), rows, values, datum, datum_sigma, reference, stations)
