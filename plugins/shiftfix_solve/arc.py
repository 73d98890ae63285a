"""From tables to the arrays of one arc: rows, receivers, Earth frame; every row keeps its way back to file and line."""

from __future__ import annotations

import difflib
from dataclasses import dataclass, replace

import numpy as np

from shiftfix.api import (
    EarthFrame,
    FrequencyTable,
    InputError,
    Media,
    Observations,
    OffsetTable,
    Problem,
    Receiver,
    StationTable,
    bundled_earth_orientation,
    earth_frame,
    merge_frequency_tables,
    observations,
    station_entries,
    station_receiver,
    utc_text,
)

LIGHT_TIME_MARGIN_S = 2.0
"""The emitter's state is asked for up to this long before the first reception (emitters within 600 000 km)."""


@dataclass(frozen=True, eq=False)
class Arc:
    """One arc ready for the solver.

    Parameters
    ----------
    table : FrequencyTable
        Rows of the emitter, merged; flags of earlier nodes kept.
    rows : Observations
        Of the rows that take part.
    index : ndarray of int
        Row of `table` for each of `rows`.
    excluded : dict of int to str
        Rows of `table` that take no part, with the reason.
    receivers : tuple of Receiver
    frame : EarthFrame
    epoch_tai_ns : int
    media : Media
    notes : tuple of str
    offsets : OffsetTable or None
        Calibrated station offsets that were taken off.
    """

    table: FrequencyTable
    rows: Observations
    index: np.ndarray
    excluded: dict[int, str]
    receivers: tuple[Receiver, ...]
    frame: EarthFrame
    epoch_tai_ns: int
    media: Media
    notes: tuple[str, ...]
    offsets: OffsetTable | None = None

    @property
    def span_s(self) -> tuple[float, float]:
        """Span of reception, widened by the light time at its start [s past the epoch]."""
        return float(self.rows.start_s.min()) - LIGHT_TIME_MARGIN_S, float(self.rows.stop_s.max()) + 1.0


def build_arc(
    frequencies: tuple[FrequencyTable, ...],
    stations: StationTable,
    offsets: OffsetTable | None,
    orientation,
    *,
    emitter: str,
    earth_orientation: str,
    troposphere: bool,
    epoch_tai_ns: int | None = None,
) -> Arc:
    """Return the arc of one emitter.

    Raises
    ------
    InputError
        No rows, several emitters without a choice, stations without an entry: all at once.
    CoverageError
        Times outside the Earth-orientation table or an ephemeris.
    """
    table = _one_emitter(merge_frequency_tables(frequencies), emitter)
    flags = table.array("flag")
    excluded = {int(i): str(table.array("reason")[i]) or "rejected earlier" for i in np.flatnonzero(flags == "reject")}
    times = table.array("time_tai_ns")
    station_ids = table.array("station_id").astype(str)
    names = tuple(dict.fromkeys(sorted(station_ids)))
    source, line = table.array("source"), table.array("row_number")
    entries = station_entries(stations, names, station_ids, times, lambda i: f"{source[i]}:{line[i]}")
    if epoch_tai_ns is None:
        second = 1_000_000_000
        epoch_tai_ns = int((int(times.min()) + int(times.max())) // 2 // second * second)
    relative = (times - epoch_tai_ns) * 1e-9
    half = 0.5 * table.array("interval_s")
    span = (float((relative - half).min()) - LIGHT_TIME_MARGIN_S - 1.0, float((relative + half).max()) + 2.0)
    degraded = earth_orientation == "degraded"
    frame, notes = earth_frame(epoch_tai_ns, span, orientation or bundled_earth_orientation(), degraded)
    receivers = tuple(station_receiver(stations, entries[name], frame, epoch_tai_ns) for name in names)
    if offsets is not None:
        receivers = tuple(_calibrated(r, offsets) for r in receivers)
    station = np.array([names.index(s) for s in station_ids], dtype=np.int64)
    correction = _calibration(table, offsets, station, receivers, excluded)
    sigma = _relative_noise(table, correction)
    take = np.array([i for i in range(len(table)) if i not in excluded], dtype=np.int64)
    if not take.size:
        raise InputError(
            Problem("frequencies", f"none of the {len(table)} rows can be used", found=_commonest(excluded))
        )
    reference = float(np.median(table.array("nominal_frequency_hz")))
    bias = np.array([r.time_bias_s for r in receivers])[station]
    rows, order = observations(
        station=station[take],
        middle_s=relative[take],
        interval_s=table.array("interval_s")[take],
        received_hz=table.array("received_frequency_hz")[take],
        sigma_hz=sigma[take],
        reference_hz=reference,
        phase_arc=table.array("phase_arc_id")[take],
        calibrated_offset=correction["offset"][take],
        zenith_correction_m=correction["zenith"][take],
        start_correction_s=(bias + correction["start"])[take],
        stop_correction_s=(bias + correction["stop"])[take],
        group=_groups(table)[take],
    )
    day = utc_text(epoch_tai_ns)
    day_of_year = float((np.datetime64(day[:10]) - np.datetime64(day[:4] + "-01-01")).astype(int) + 1)
    return Arc(
        table,
        rows,
        take[order],
        excluded,
        receivers,
        frame,
        epoch_tai_ns,
        Media(troposphere, day_of_year),
        tuple(notes),
        offsets,
    )


def _one_emitter(table: FrequencyTable, emitter: str) -> FrequencyTable:
    present = sorted(set(table.array("emitter_id").astype(str)))
    if emitter:
        if emitter not in present:
            close = difflib.get_close_matches(emitter, present, 1)
            raise InputError(
                Problem(
                    "frequencies",
                    f"no row of emitter {emitter!r}",
                    allowed=", ".join(p or "(unnamed)" for p in present),
                    remedy=f"did you mean {close[0]}?" if close else "",
                )
            )
        return table.with_rows(table.rows[table.array("emitter_id") == emitter].reset_index(drop=True))
    if len(present) > 1:
        raise InputError(
            Problem(
                "frequencies",
                "rows of several emitters",
                found=", ".join(p or "(unnamed)" for p in present),
                remedy="name one with params.emitter",
            )
        )
    return table


def _calibrated(receiver: Receiver, offsets: OffsetTable) -> Receiver:
    """Return a receiver whose prior is what the calibration left uncertain for all its rows alike."""
    mine = offsets.array("station_id").astype(str) == receiver.station_id
    common = float(np.median(offsets.array("common_sigma_1")[mine])) if mine.any() else float("inf")
    return replace(receiver, offset=0.0, offset_sigma=common, drift_per_s=0.0, drift_sigma_per_s=0.0)


def _calibration(table, offsets, station, receivers, excluded) -> dict[str, np.ndarray]:
    n = len(table)
    out = {key: np.zeros(n) for key in ("offset", "start", "stop", "zenith", "independent", "phase")}
    if offsets is None:
        return out
    keys = {}
    columns = ("station_id", "time_tai_ns", "interval_s")
    for k, key in enumerate(zip(*(offsets.array(c) for c in columns), strict=True)):
        keys[(str(key[0]), int(key[1]) // 1000, round(float(key[2]), 6))] = k
    fields = {
        "offset": "offset_1",
        "start": "time_offset_start_s",
        "stop": "time_offset_stop_s",
        "zenith": "zenith_correction_m",
        "independent": "offset_sigma_1",
        "phase": "phase_sigma_s",
    }
    arrays = {key: offsets.array(column) for key, column in fields.items()}
    span = _spans(offsets)
    times, intervals = table.array("time_tai_ns"), table.array("interval_s")
    for i in range(n):
        name = receivers[station[i]].station_id
        k = keys.get((name, int(times[i]) // 1000, round(float(intervals[i]), 6)))
        if k is not None:
            for key, values in arrays.items():
                out[key][i] = values[k]
        elif name in span and i not in excluded:
            _interpolate(out, i, int(times[i]), span[name], arrays, excluded)
        elif i not in excluded:
            excluded[i] = "no calibration of this station"
    return out


def _spans(offsets: OffsetTable) -> dict[str, tuple[np.ndarray, np.ndarray, np.ndarray]]:
    ids, times = offsets.array("station_id").astype(str), offsets.array("time_tai_ns")
    half = 0.5 * offsets.array("interval_s") * 1e9
    out = {}
    for name in np.unique(ids):
        rows = np.flatnonzero(ids == name)
        rows = rows[np.argsort(times[rows], kind="stable")]
        out[str(name)] = (rows, times[rows], half[rows])
    return out


def _interpolate(out, i, time, span, arrays, excluded) -> None:
    """Use the calibrated interval that covers a row, or the line between neighbours less than one interval away."""
    rows, times, half = span
    right = int(np.searchsorted(times, time))
    for k in (right - 1, right):
        if 0 <= k < len(rows) and abs(times[k] - time) <= half[k] + 1e3:
            for key, values in arrays.items():
                out[key][i] = values[rows[k]]
            # An offset that was not measured over the row's own interval has no shared phase errors with it.
            out["phase"][i] = 0.0
            return
    excluded[i] = "no calibration of this station at this time"


def _relative_noise(table, correction) -> np.ndarray:
    """Return the 1-sigma of each row [Hz] with the calibration's own noise added."""
    received, sigma = table.array("received_frequency_hz"), table.array("received_frequency_sigma_hz")
    interval = np.maximum(table.array("interval_s"), 1e-9)
    phase = np.sqrt(2.0) * correction["phase"] / interval
    relative = np.hypot(np.hypot(sigma / received, correction["independent"]), phase)
    relative = np.where(table.array("flag") == "downweight", 3.0 * relative, relative)
    return relative * received


def _groups(table) -> np.ndarray:
    arcs = table.array("arc_id").astype(str)
    if (arcs != "").any():
        return np.unique(arcs, return_inverse=True)[1].astype(np.int64)
    # Gaps of more than 15 minutes divide passes.
    times = table.array("time_tai_ns")
    order = np.argsort(times, kind="stable")
    group = np.zeros(len(times), np.int64)
    group[order] = np.concatenate([[0], np.cumsum(np.diff(times[order]) > 900_000_000_000)]) if len(times) else []
    return group


def _commonest(excluded: dict[int, str]) -> str:
    reasons: dict[str, int] = {}
    for reason in excluded.values():
        reasons[reason] = reasons.get(reason, 0) + 1
    return "; ".join(f"{count} x {reason}" for reason, count in sorted(reasons.items(), key=lambda p: -p[1])[:5])
