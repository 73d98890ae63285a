"""Rows of a delimited log: columns of text to columns of a frequency table, with a reason for every row that does not fit."""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import Problem, Reject, StationTable, parse_quantity
from shiftfix_ingest import plausibility
from shiftfix_ingest.delimited_params import UNIT, DelimitedParams
from shiftfix_ingest.receiver_chain import chain_terms, sky_frequency
from shiftfix_ingest.text_table import TextTable
from shiftfix_ingest.text_values import numbers, times, why_no_number

_CUT = 3  # characters by which a last line without line end must be shorter than every other row to look truncated


class RowReasons:
    """First reason of each row for which it cannot be used."""

    def __init__(self, count: int) -> None:
        self.texts = np.full(count, "", dtype=object)

    def add(self, mask: np.ndarray, reason: Any) -> None:
        """Note a reason, a text or a function of the row's index, where `mask` holds and there is none yet."""
        for k in np.flatnonzero(mask & (self.texts == "")):
            self.texts[k] = reason if isinstance(reason, str) else reason(k)

    @property
    def bad(self) -> np.ndarray:
        return self.texts != ""


def convert(
    table: TextTable, where: dict[str, int], params: DelimitedParams, stations: StationTable | None
) -> tuple[pd.DataFrame | None, list[Reject], list[Problem], list[str]]:
    """Return rows, rejects, problems of the file as a whole (no rows then) and notes.

    Parameters
    ----------
    table : TextTable
    where : mapping of role to index of its column; `extra:NAME` for columns that pass through.
    params : DelimitedParams
    stations : StationTable, optional
        With receiver chains.
    """
    count = len(table.numbers)
    here = f"{table.name}:{min([*table.numbers[:1], *table.ragged])}"
    reasons = RowReasons(count)
    time_ns, time_reasons = _times(table, where, params)
    for k, reason in time_reasons.items():
        reasons.texts[k] = reason
    reasons.add(
        _cut_off(table), "the last line has no line end and is shorter than every other row: the file looks truncated"
    )
    text = {role: _text(table, where, role, params) for role in ("station", "emitter", "arc", "phase_arc")}
    reasons.add(text["station"] == "", "station is empty")
    values = _values(table, where, params, reasons)
    offset, frequency = _frequency(values, text["station"], time_ns, params, stations, reasons)
    sigma, interval, nominal = values["sigma"], values["interval"], values["nominal"]
    reasons.add(sigma <= 0, lambda k: f"sigma is not greater than 0: {sigma[k]:g} Hz")
    reasons.add(interval < 0, lambda k: f"interval is negative: {interval[k]:g} s")
    for name in ("nominal", "dial"):
        reasons.add(values[name] <= 0, lambda k, name=name: f"{name} is not greater than 0: {values[name][k]:g} Hz")
    reasons.add(frequency <= 0, lambda k: f"received frequency is not greater than 0: {frequency[k]:.10g} Hz")
    problems = [p for p in [plausibility.scale_problem(here, frequency, nominal, params)] if p]
    if not problems:
        problems += plausibility.size_problems(here, offset, sigma, frequency, nominal) if count else []
        off, ratio = plausibility.off_scale(frequency, nominal)
        against = "nominal frequency" if np.isfinite(nominal).any() else "median of the file"
        reasons.add(off, lambda k: f"frequency {frequency[k]:.10g} Hz is {ratio[k]:.3g} times the {against}")
    extra = {n: _extra(table, where[f"extra:{n}"], n, params, reasons) for n in params.extra}
    rejects = _rejects(table, reasons)
    refusal = _too_many(table, rejects, params)
    if refusal:
        problems.append(refusal)
    if problems or (len(rejects) == len(table)):
        return None, rejects, problems, []
    good = ~reasons.bad
    shift = {"start": 0.5, "middle": 0.0, "end": -0.5, "": 0.0}[params.time_tag]
    rows = pd.DataFrame(
        {
            "station_id": text["station"][good],
            "emitter_id": text["emitter"][good],
            "arc_id": text["arc"][good],
            "phase_arc_id": text["phase_arc"][good],
            "time_tai_ns": time_ns[good] + np.round((shift * interval[good] - params.delay) * 1e9).astype(np.int64),
            "interval_s": interval[good],
            "received_frequency_hz": frequency[good],
            "received_frequency_sigma_hz": sigma[good],
            "nominal_frequency_hz": nominal[good],
            "source": table.name,
            "row_number": table.numbers[good],
        }
    )
    for role, name in (("cn0", "cn0_db_hz"), ("rate", "frequency_rate_hz_s")):
        if role in where:
            rows[name] = values[role][good]
    for name, column in extra.items():
        rows[name] = column[good]
    problems, notes = plausibility.spacing_findings(here, rows)
    return (None if problems else rows), rejects, problems, notes


def _cut_off(table: TextTable) -> np.ndarray:
    """Return a mask of the last row, where it is the last line, without line end and clearly shorter than the others."""
    out = np.zeros(len(table.numbers), bool)
    if len(out) > 3 and not table.ended and table.numbers[-1] == len(table.lines):
        *others, last = (len(table.lines[n - 1]) for n in table.numbers)
        out[-1] = last <= min(others) - _CUT
    return out


def _times(table: TextTable, where: dict[str, int], params: DelimitedParams) -> tuple[np.ndarray, dict[int, str]]:
    return times(
        {role: table.column(where[role]) for role in ("time", "date", "week") if role in where},
        time_format=params.time_format,
        scale=params.time_scale,
        unit=params.units.get("time", "s"),
        require_z=not params.unmarked_utc,
        decimal=params.decimal,
    )


def _text(table: TextTable, where: dict[str, int], role: str, params: DelimitedParams) -> np.ndarray:
    default = {"station": params.station, "emitter": params.emitter}.get(role, "")
    if role not in where:
        return np.full(len(table.numbers), default, dtype=object)
    out = table.column(where[role])
    return np.where(out == "", default, out) if default else out


def _values(
    table: TextTable, where: dict[str, int], params: DelimitedParams, reasons: RowReasons
) -> dict[str, np.ndarray]:
    """Return all numbers in SI; an empty field takes the value of the parameter, and NaN where an empty one is allowed."""
    count = len(table.numbers)
    default = {
        "sigma": params.sigma,
        "interval": params.interval if params.interval or "interval" not in where else None,
        "nominal": params.nominal_frequency,
        "dial": params.dial,
    }
    out = {}
    for role, unit in UNIT.items():
        given = default.get(role)
        if role not in where:
            out[role] = np.full(count, np.nan if given is None else given)
            continue
        text = table.column(where[role])
        factor = parse_quantity(f"1 {params.units[role]}", unit).value if role in params.units else 1.0
        out[role] = numbers(text, params.decimal) * factor
        empty = text == ""
        if given is not None:
            out[role][empty] = given
        allowed = empty if given is not None or role in ("cn0", "rate", "nominal") else np.zeros(count, bool)
        reasons.add(
            ~np.isfinite(out[role]) & ~allowed,
            lambda k, role=role, text=text: f"{role} {why_no_number(text[k], params.decimal)}",
        )
    return out


def _frequency(
    values: dict[str, np.ndarray],
    station: np.ndarray,
    time_ns: np.ndarray,
    params: DelimitedParams,
    stations: StationTable | None,
    reasons: RowReasons,
) -> tuple[np.ndarray | None, np.ndarray]:
    """Return the offset from nominal (None when the log has none) and the sky frequency [Hz]."""
    value = values["frequency"]
    if params.frequency_kind == "sky":
        return None, value
    if params.frequency_kind == "offset":
        reasons.add(~np.isfinite(values["nominal"]), "an offset without nominal frequency")
        return value, values["nominal"] + value
    dial = np.nan_to_num(values["dial"]) if params.sideband else np.zeros(len(value))
    if params.chain or stations is None:
        sign, constant = chain_terms(params.chain)
        return None, sky_frequency(value, sign, constant, dial, params.sideband or "upper")
    sign, constant = np.full(len(value), np.nan), np.full(len(value), np.nan)
    first, last = stations.array("valid_from_tai_ns"), stations.array("valid_until_tai_ns")
    for row, name in enumerate(stations.array("station_id")):
        mine = (station == name) & (time_ns >= first[row]) & (time_ns <= last[row])
        own = float(stations.array("chain_sign_1")[row])
        if own or params.sideband:
            sign[mine], constant[mine] = own or 1.0, float(stations.array("chain_constant_hz")[row])
    reasons.add(
        np.isnan(sign), lambda k: f"the station book has no receiver chain of station {station[k]!r} at that time"
    )
    return None, sky_frequency(value, sign, constant, dial, params.sideband or "upper")


def _extra(table: TextTable, column: int, name: str, params: DelimitedParams, reasons: RowReasons) -> np.ndarray:
    text = table.column(column)
    values = numbers(text, params.decimal)
    reasons.add(~np.isfinite(values) & (text != ""), lambda k: f"{name} {why_no_number(text[k], params.decimal)}")
    return values


def _rejects(table: TextTable, reasons: RowReasons) -> list[Reject]:
    found = {int(table.numbers[k]): str(reasons.texts[k]) for k in np.flatnonzero(reasons.bad)} | dict(table.ragged)
    return [Reject(table.name, line, found[line], table.lines[line - 1][:120]) for line in sorted(found)]


def _too_many(table: TextTable, rejects: list[Reject], params: DelimitedParams) -> Problem | None:
    """Return a problem when more than half of the rows are unusable: that is a wrong declaration, not bad luck."""
    if 2 * len(rejects) <= len(table):
        return None
    kinds = Counter(r.reason.split(":")[0].split(" '")[0] for r in rejects)
    first = rejects[0]
    others = "; ".join(f"{n} x {kind}" for kind, n in kinds.most_common(3))
    scale = params.time_scale + (" ending in Z" if params.time_scale == "UTC" and not params.unmarked_utc else "")
    return Problem(
        f"{first.source}:{first.row_number}",
        first.reason,
        found=f"{len(rejects)} of {len(table)} rows are unusable ({others})",
        allowed=f"at most half of the rows; times: {params.time_format} in {scale}",
        remedy="correct the declared columns, units and time scale",
    )
