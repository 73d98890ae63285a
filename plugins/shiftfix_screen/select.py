"""Selection by emitter, station and time: other emitters' rows go, all other rows stay with a flag and its reason."""

from __future__ import annotations

import numpy as np

from shiftfix.api import InputError, Problem, merge_frequency_tables, tai_ns_from_utc


def select(tables, params):
    """Return the merged table of the chosen emitters; rows outside stations or times are flagged reject."""
    table = merge_frequency_tables(tables)
    if params.name_emitter:
        named = np.where(table.array("emitter_id").astype(str) == "", params.name_emitter, table.array("emitter_id"))
        table = table.with_rows(table.rows.assign(emitter_id=named))
    emitter = table.array("emitter_id").astype(str)
    station = table.array("station_id").astype(str)
    _check("emitter", (*params.emitters, *params.exclude_emitters), emitter)
    _check("station", (*params.stations, *params.exclude_stations), station)
    mine = np.isin(emitter, params.emitters) if params.emitters else np.ones(len(table), bool)
    mine &= ~np.isin(emitter, params.exclude_emitters)
    rows = table.rows[mine].reset_index(drop=True)
    flag, reason = rows["flag"].to_numpy(object).copy(), rows["reason"].to_numpy(object).copy()
    if params.keep_all:
        flag[:], reason[:] = "use", ""
    station = station[mine]
    out = np.isin(station, params.exclude_stations)
    if params.stations:
        out |= ~np.isin(station, params.stations)
    flag[out], reason[out] = "reject", "station left out"
    times = rows["time_tai_ns"].to_numpy()
    for text, late in ((params.start, False), (params.stop, True)):
        if text:
            limit = tai_ns_from_utc(text)
            beyond = times > limit if late else times < limit
            flag[beyond], reason[beyond] = "reject", f"{'after' if late else 'before'} {text}"
    rows = rows.assign(flag=flag, reason=reason)
    return table.with_rows(rows)


def _check(kind: str, wanted, present) -> None:
    missing = [w for w in wanted if w not in set(present)]
    if missing:
        raise InputError(
            Problem(
                "frequencies", f"no row of {kind} {', '.join(map(repr, missing))}", allowed=", ".join(sorted(set(present))) or "none"
            )
        )
