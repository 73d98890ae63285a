"""Rows and rejects of one RINEX station: which records make a frequency, and why the others do not."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from shiftfix.api import SPEED_OF_LIGHT_M_S
from shiftfix_ingest.phase_records import REASONS, phase_arcs
from shiftfix_ingest.rinex_grid import StationGrid
from shiftfix_ingest.rinex_text import ObservationFile

_COMBINED_NOISE = 3.0  # noise of the two-band combination over that of one band: 2.98 for GPS L1/L2
_GPS_TAI_NS = 19_000_000_000


@dataclass
class Taken:
    """Rows and rejects of one station."""

    columns: dict[str, np.ndarray]
    rejects: list[tuple[int, int, str]] = field(default_factory=list)


def take(
    station: str, grid: StationGrid, files: Sequence[ObservationFile], params: Any, span: tuple[int, int]
) -> Taken:
    """Return the rows and rejects of one station."""
    phase = params.observable == "phase"
    times = grid.phases.time_tai_ns
    record = grid.file >= 0
    names = np.array(grid.satellites)
    asked = (
        np.isin(names, params.satellites)
        if params.satellites
        else np.array([n[0] == "G" for n in grid.satellites], bool)
    )
    asked &= ~np.isin(names, params.exclude_satellites)
    chosen = _chosen(times, grid.phases.interval_s, params.interval)
    wanted = record & asked & (chosen & (times >= span[0]) & (times <= span[1]))[:, None]
    present = np.isfinite(grid.phase_m if phase else grid.rate_m_s)
    with np.errstate(invalid="ignore"):
        weak = grid.cn0_db_hz < params.minimum_cn0
    unreadable = _unreadable(grid, files)
    why = np.full(record.shape, "", object)
    why[~present] = f"no {params.observable}" + (" on both bands" if params.combination != "single" else "")
    why[unreadable] = "not a number"
    why[present & weak] = f"weaker than {params.minimum_cn0:g} dB-Hz"
    usable = record & present & ~weak & ~unreadable
    before = np.full(record.shape, -1)
    arc = np.zeros(record.shape, int)
    if phase:
        arc, began = phase_arcs(grid.phases, usable)
        steps = np.flatnonzero(chosen)
        before[steps[1:]] = steps[:-1, None]
        previous = np.maximum(before, 0)
        column = np.arange(len(names))[None, :]
        spacing = times[:, None] - times[previous]
        longest = 1.5 * max(params.interval, grid.phases.interval_s) * 1e9
        joined = (
            usable & (before >= 0) & (arc[previous, column] == arc) & usable[previous, column] & (spacing <= longest)
        )
        loose = usable & ~joined
        why[loose] = np.array(REASONS, object)[np.where(began[loose] > 0, began[loose], 1)]
    else:
        joined = usable
        before = np.broadcast_to(np.arange(len(times))[:, None], before.shape)
    e, s = np.nonzero(joined & wanted)
    b = before[e, s]
    taken = Taken(_columns(station, grid, params, arc, e, s, b))
    taken.columns["file"] = grid.file[e, s]
    for k, j in zip(*np.nonzero(wanted & ~joined), strict=True):
        taken.rejects.append((int(grid.file[k, j]), int(grid.line[k, j]), str(why[k, j])))
    taken.rejects += _repeated(grid, files, asked, names, span)
    return taken


def _chosen(times: np.ndarray, recorded_s: float, interval_s: float) -> np.ndarray:
    """Return the epochs on the wanted spacing: whole multiples of it in GPS time, to half the recording interval."""
    if not interval_s or interval_s <= recorded_s:
        return np.ones(len(times), bool)
    step = round(interval_s * 1e9)
    phase = (times - _GPS_TAI_NS) % step
    return np.minimum(phase, step - phase) < 0.5 * recorded_s * 1e9


def _unreadable(grid: StationGrid, files: Sequence[ObservationFile]) -> np.ndarray:
    out = np.zeros(grid.file.shape, bool)
    for number, file in enumerate(files):
        if file.unreadable:
            out |= (grid.file == number) & np.isin(grid.line, [line for line, _ in file.unreadable])
    return out


def _repeated(grid: StationGrid, files, asked, names, span) -> list[tuple[int, int, str]]:
    """Return rejects for records whose satellite and epoch another file gave already."""
    out = []
    for number, line in grid.repeated:
        file = files[number]
        k = int(np.searchsorted(file.line, line))
        inside = span[0] <= file.epoch_tai_ns[file.epoch[k]] <= span[1]
        if inside and asked[names == file.satellite[k]].any():
            out.append((number, line, "repeated epoch"))
    return out


def _columns(station: str, grid: StationGrid, params: Any, arc, e, s, b) -> dict[str, np.ndarray]:
    times = grid.phases.time_tai_ns
    nominal = grid.nominal_hz[s]
    more = _COMBINED_NOISE if params.combination != "single" else 1.0
    names = np.array(grid.satellites, object)[s]
    if params.observable == "phase":
        length_ns = times[e] - times[b]
        length_s = length_ns / 1e9
        rate = (grid.phase_m[e, s] - grid.phase_m[b, s]) / length_s
        sigma = nominal * np.sqrt(2.0) * params.phase_sigma * more / (SPEED_OF_LIGHT_M_S * length_s)
        arcs = np.array([f"{station}/{n}/{a}" for n, a in zip(names, arc[e, s], strict=True)], object)
        middle = times[b] + length_ns // 2
    else:
        length_s = np.zeros(len(e))
        rate = grid.rate_m_s[e, s]
        sigma = np.full(len(e), params.doppler_sigma * more)
        arcs = np.full(len(e), "", object)
        middle = times[e]
    out = {
        "station_id": np.full(len(e), station, object),
        "emitter_id": names,
        "time_tai_ns": middle,
        "interval_s": length_s,
        "received_frequency_hz": nominal * (1.0 - rate / SPEED_OF_LIGHT_M_S),
        "received_frequency_sigma_hz": sigma,
        "nominal_frequency_hz": nominal,
        "phase_arc_id": arcs,
        "cn0_db_hz": grid.cn0_db_hz[e, s],
        "pseudorange_m": grid.code_m[e, s],
        "pseudorange_start_m": grid.code_m[b, s],
        "receiver_clock_s": grid.clock_s[e],
        "receiver_clock_start_s": grid.clock_s[b],
        "row_number": grid.line[e, s],
    }
    return out
