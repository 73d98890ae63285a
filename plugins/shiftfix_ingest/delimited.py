"""Node `ingest.delimited`: delimited text with declared columns, units and time scale to a frequency table.

The whole file is converted column by column; only rows that do not fit are looked at one by one. Read = accepted +
rejected, and each reject has its file and line.
"""

from __future__ import annotations

import io
from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import (
    FrequencyTable,
    InputError,
    Problem,
    Reject,
    Source,
    parse_quantity,
    tai_ns_from_gps,
    tai_ns_from_texts,
)
from shiftfix_ingest.delimited_checks import UNIT, declaration_problems, scale_problem
from shiftfix_ingest.delimited_params import DelimitedParams
from shiftfix_ingest.receiver_chain import chain_terms
from shiftfix_ingest.source_files import SourceFile, binary_problem, open_sources

_SHOWN = 20


def recognise(path: Any, first_bytes: bytes) -> bool:
    """Return False: columns must be declared, so that no delimited text can be recognised by its first bytes alone."""
    return False


def read_delimited(inputs: Any, params: DelimitedParams, context: Any) -> dict[str, FrequencyTable]:
    """Return the frequency table of all files.

    Raises
    ------
    InputError
        Unusable files and (with on_bad_row = refuse) unusable rows, all at once with file and line.
    """
    problems = declaration_problems(params, f"nodes.{context.node}.params")
    files, opening, notes = open_sources(params.files, context.display_path)
    problems += opening
    if notes and params.on_repeat == "refuse":
        problems += [
            Problem(
                n.split(" holds ")[0],
                "the same file is given twice",
                found=n,
                remedy='name it once, or on_repeat = "ignore"',
            )
            for n in notes
        ]
    problems += [p for p in (binary_problem(f, "delimited text") for f in files) if p]
    if problems:
        raise InputError(problems)
    frames, sources, rejects = [], [], []
    for file in files:
        context.check_cancelled()
        frame, bad, count, trouble = _read_file(file, params)
        problems += trouble
        if frame is None:
            continue
        if bad and params.on_bad_row == "refuse":
            problems += [Problem(f"{r.source}:{r.row_number}", r.reason, found=r.text) for r in bad[:_SHOWN]]
            if len(bad) > _SHOWN:
                problems.append(
                    Problem(
                        file.name,
                        f"{len(bad) - _SHOWN} more unusable rows",
                        remedy='correct them, or on_bad_row = "reject" to count and list them',
                    )
                )
        frames.append(frame)
        rejects += bad
        sources.append(Source(file.name, file.sha256, count, len(frame), len(bad)))
    if problems:
        raise InputError(problems)
    rows = pd.concat(frames, ignore_index=True)
    return {
        "frequencies": FrequencyTable(rows=rows, sources=tuple(sources), rejects=tuple(rejects), notes=tuple(notes))
    }


def _read_file(
    file: SourceFile, params: DelimitedParams
) -> tuple[pd.DataFrame | None, list[Reject], int, list[Problem]]:
    try:
        text = file.data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = file.data[: error.start].count(b"\n") + 1
        return (
            None,
            [],
            0,
            [Problem(f"{file.name}:{line}", "not UTF-8 text", found=repr(file.data[error.start : error.start + 8]))],
        )
    lines = text.splitlines()
    keep = [k for k, s in enumerate(lines) if s.strip() and not (params.comment and s.startswith(params.comment))]
    if params.header and keep:
        head, keep = lines[keep[0]], keep[1:]
    else:
        head = ""
    if not keep:
        return None, [], 0, [Problem(file.name, "the file has no rows", found=f"{len(lines)} lines")]
    separator = params.separator or _separator(head or lines[keep[0]], params.decimal)
    names = [n.strip().strip('"') for n in head.split(separator)] if head else []
    width = len(names) or len(lines[keep[0]].split(separator))
    where, problems = {}, []
    for role, column in {**params.columns, **{f"extra:{n}": c for n, c in params.extra.items()}}.items():
        if isinstance(column, int) and 1 <= column <= width:
            where[role] = column - 1
        elif column in names:
            where[role] = names.index(column)
        else:
            problems.append(
                Problem(
                    f"{file.name}:1",
                    f"no column {column!r} for {role}",
                    allowed=", ".join(names) or f"numbers 1 to {width}",
                )
            )
    if problems:
        return None, [], len(keep), problems
    if _ragged(lines, keep, separator, width):
        fields = pd.DataFrame([_fields(lines[k], separator, width) for k in keep], dtype=object)
    else:
        body = text if len(keep) == len(lines) else "\n".join(lines[k] for k in keep)
        fields = pd.read_csv(
            io.StringIO(body),
            sep=separator,
            header=None,
            dtype=object,
            keep_default_na=False,
            engine="c",
            quotechar='"',
        )
        fields[width] = ""
    numbers = np.array(keep) + 1
    return _convert(file, fields, numbers, where, params, lines)


def _ragged(lines: list[str], keep: list[int], separator: str, width: int) -> bool:
    """Return whether any row has another number of fields; quoted separators go the same slow but safe way."""
    return any(lines[k].count(separator) != width - 1 for k in keep)


def _fields(line: str, separator: str, width: int) -> list[str]:
    parts = line.split(separator)
    # One column more than declared marks a row that has too many fields; a short one is filled with empty text.
    return (parts + [""] * width)[:width] + [
        "surplus" if len(parts) > width else "missing" if len(parts) < width else ""
    ]


def _separator(line: str, decimal: str) -> str:
    for mark in (";", "\t", "|", ",", " "):
        if mark in line and not (mark == "," and decimal == ","):
            return mark
    return ","


def _number(column: pd.Series, decimal: str) -> np.ndarray:
    text = column.str.strip()
    if decimal == ",":
        text = text.str.replace(",", ".", regex=False)
    return pd.to_numeric(text, errors="coerce").to_numpy(float)


def _convert(file, fields, numbers, where, params, lines):
    count = len(fields)
    reasons = np.full(count, "", dtype=object)

    def note(mask: np.ndarray, reason: Any) -> None:
        mask = mask & (reasons == "")
        reasons[mask] = reason if isinstance(reason, str) else np.asarray(reason, object)[mask]

    extra = fields.iloc[:, -1].fillna("").to_numpy(str)
    note(np.isin(extra, ["surplus", "missing"]), "wrong number of fields in the row")
    times, trouble = _times(fields, where, params)
    messages = np.full(count, "", dtype=object)
    for index, message in trouble:
        messages[index] = message
    note(messages != "", messages)
    factor = {
        role: parse_quantity(f"1 {params.units[role]}", UNIT[role]).value for role in params.units if role in UNIT
    }
    values = {}
    for role in ("frequency", "sigma", "interval", "cn0", "rate"):
        if role in where:
            values[role] = _number(fields.iloc[:, where[role]], params.decimal) * factor.get(role, 1.0)
            note(~np.isfinite(values[role]), f"{role} is not a finite number")
    frequency = _sky(values["frequency"], params)
    sigma = values.get("sigma", np.full(count, params.sigma or np.nan))
    note(np.isfinite(sigma) & (sigma <= 0), "sigma is not greater than 0")
    interval = values.get("interval", np.full(count, params.interval))
    note(np.isfinite(interval) & (interval < 0), "interval is negative")
    scale = scale_problem(file, frequency, params)
    note(np.isfinite(frequency) & (frequency <= 0), "received frequency is not greater than 0")
    problems = [scale] if scale else []
    wrong_time = [m for m in messages if m]
    if len(wrong_time) > count // 2:
        first = int(np.flatnonzero(messages != "")[0])
        problems.append(
            Problem(
                f"{file.name}:{numbers[first]}",
                str(messages[first]),
                found=f"{len(wrong_time)} of {count} rows",
                allowed=f"ISO times in {params.time_scale}" + (" ending in Z" if params.time_scale == "UTC" else ""),
            )
        )
        return None, [], count, problems
    bad = reasons != ""
    if bad.all():
        first = int(np.flatnonzero(bad)[0])
        problems.append(
            Problem(
                f"{file.name}:{numbers[first]}",
                f"every row is unusable: {reasons[first]}",
                found=lines[numbers[first] - 1][:80],
            )
        )
        return None, [], count, problems
    rejects = [
        Reject(file.name, int(numbers[k]), str(reasons[k]), lines[numbers[k] - 1][:120]) for k in np.flatnonzero(bad)
    ]
    good = ~bad
    shift = {"start": 0.5, "middle": 0.0, "end": -0.5, "": 0.0}[params.time_tag]
    moved = times[good] + np.round((shift * interval[good] - params.delay) * 1e9).astype(np.int64)
    nominal = params.nominal_frequency or float(np.median(frequency[good]))
    rows = pd.DataFrame(
        {
            "station_id": _text(fields, where, "station", params.station, good),
            "emitter_id": _text(fields, where, "emitter", params.emitter, good),
            "arc_id": _text(fields, where, "arc", "", good),
            "phase_arc_id": _text(fields, where, "phase_arc", "", good),
            "time_tai_ns": moved,
            "interval_s": interval[good],
            "received_frequency_hz": frequency[good],
            "received_frequency_sigma_hz": sigma[good],
            "nominal_frequency_hz": nominal,
            "source": file.name,
            "row_number": numbers[good],
        }
    )
    for name in params.extra:
        rows[name] = _number(fields.iloc[:, where[f"extra:{name}"]], params.decimal)[good]
    for role, name in (("cn0", "cn0_db_hz"), ("rate", "frequency_rate_hz_s")):
        if role in values:
            rows[name] = values[role][good]
    return rows, rejects, count, problems


def _text(fields, where, role, default, good):
    return fields.iloc[:, where[role]].str.strip().to_numpy(object)[good] if role in where else default


def _times(fields, where, params):
    column = fields.iloc[:, where["time"]].str.strip()
    if params.time_format == "gps":
        week, seconds = _number(fields.iloc[:, where["week"]], "."), _number(column, params.decimal)
        good = np.isfinite(week) & np.isfinite(seconds) & (seconds >= 0) & (seconds < 604800)
        out = np.zeros(len(column), np.int64)
        out[good] = [tai_ns_from_gps(int(w), s) for w, s in zip(week[good], seconds[good], strict=True)]
        return out, [(int(k), "not a GPS week and second of week") for k in np.flatnonzero(~good)]
    return tai_ns_from_texts(column.to_numpy(object), params.time_scale)


def _sky(values: np.ndarray, params: DelimitedParams) -> np.ndarray:
    if params.frequency_kind == "offset":
        return params.nominal_frequency + values
    if params.frequency_kind == "audio":
        sign, constant = chain_terms(params.chain)
        return constant + sign * values
    return values
