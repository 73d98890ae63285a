"""Node `ingest.delimited`: delimited text with declared columns, units and time scale to a frequency table.

The whole file is converted column by column; only rows that do not fit are looked at one by one. Read = accepted +
rejected, and each reject has its file and line.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import FrequencyTable, InputError, Problem, Reject, Source, StationTable
from shiftfix_ingest.delimited_checks import declaration_problems
from shiftfix_ingest.delimited_params import DelimitedParams
from shiftfix_ingest.delimited_rows import convert
from shiftfix_ingest.plausibility import clash_note
from shiftfix_ingest.source_files import SourceFile, open_sources, repeat_problems
from shiftfix_ingest.text_table import read_text_table

_SHOWN = 20


def read_delimited(inputs: Any, params: DelimitedParams, context: Any) -> dict[str, FrequencyTable]:
    """Return the frequency table of all files.

    Raises
    ------
    InputError
        Unusable files and (with on_bad_row = refuse) unusable rows, all at once with file and line.
    """
    stations = inputs.get("stations")
    chains = stations is not None and bool((stations.array("chain_sign_1") != 0).any())
    problems = declaration_problems(params, f"nodes.{context.node}.params", chains)
    files, opening, notes = open_sources(params.files, context.display_path)
    problems += opening + repeat_problems(notes, params.on_repeat)
    if any(p.where.startswith("nodes.") for p in problems):
        raise InputError(problems)
    frames, counts, rejects = [], [], []
    for file in files:
        context.check_cancelled()
        rows, bad, count, trouble, remarks = _read_file(file, params, stations)
        problems += trouble
        notes += remarks
        if params.on_bad_row == "refuse" and not trouble:
            problems += _row_problems(file.name, bad)
        if rows is not None:
            frames.append(rows)
        rejects += bad
        counts.append((file, count))
    if problems:
        raise InputError(problems)
    table, twice = _without_repeats(pd.concat(frames, ignore_index=True))
    if twice:
        names = ", ".join(dict.fromkeys(r.source for r in twice))
        notes.append(f"{len(twice)} rows occur twice and are used once (from {names})")
    rejects += twice
    notes += clash_note(table)
    table["nominal_frequency_hz"] = _nominal(table)
    accepted = table["source"].value_counts()
    sources = [
        Source(f.name, f.sha256, n, int(accepted.get(f.name, 0)), n - int(accepted.get(f.name, 0))) for f, n in counts
    ]
    return {
        "frequencies": FrequencyTable(rows=table, sources=tuple(sources), rejects=tuple(rejects), notes=tuple(notes))
    }


def _read_file(
    file: SourceFile, params: DelimitedParams, stations: StationTable | None
) -> tuple[pd.DataFrame | None, list[Reject], int, list[Problem], list[str]]:
    """Return rows, rejects, count of rows read, problems and notes of one file."""
    table, problem = read_text_table(
        file,
        separator=params.separator,
        comment=params.comment,
        header=params.header,
        skip=params.skip,
        decimal=params.decimal,
        encoding=params.encoding,
    )
    if table is None:
        return None, [], 0, [problem], []
    where, problems = table.place({**params.columns, **{f"extra:{n}": c for n, c in params.extra.items()}})
    if problems:
        return None, [], len(table), problems, []
    rows, rejects, problems, notes = convert(table, where, params, stations)
    return rows, rejects, len(table), problems, notes


def _row_problems(name: str, bad: list[Reject]) -> list[Problem]:
    """Return a problem for each of the first unusable rows, and one for the rest."""
    out = [Problem(f"{r.source}:{r.row_number}", r.reason, found=r.text) for r in bad[:_SHOWN]]
    if bad:
        more = len(bad) - _SHOWN
        out.append(
            Problem(
                name,
                f"{more} more unusable rows" if more > 0 else f"unusable rows: {len(bad)}",
                allowed='none with on_bad_row = "refuse"',
                remedy='correct them, or set on_bad_row = "reject" to have them counted and listed',
            )
        )
    return out


def _without_repeats(rows: pd.DataFrame) -> tuple[pd.DataFrame, list[Reject]]:
    """Return the rows without exact repetitions, and those as rejects that name the first occurrence."""
    keys = ["station_id", "emitter_id", "time_tai_ns", "interval_s", "received_frequency_hz"]
    twice = rows.duplicated(keys, keep="first").to_numpy()
    if not twice.any():
        return rows, []
    group = rows.groupby(keys, sort=False).ngroup().to_numpy()
    first = {}
    for k in np.flatnonzero(~twice):
        first[group[k]] = k
    source, line = rows["source"].to_numpy(), rows["row_number"].to_numpy()
    rejects = []
    for k in np.flatnonzero(twice):
        f = first[group[k]]
        rejects.append(Reject(source[k], int(line[k]), f"the same observation stands at {source[f]}:{line[f]}"))
    return rows[~twice].reset_index(drop=True), rejects


def _nominal(rows: pd.DataFrame) -> pd.Series:
    """Return the nominal frequency; where none is given, the median received from that emitter."""
    return rows["nominal_frequency_hz"].fillna(
        rows.groupby("emitter_id", sort=False)["received_frequency_hz"].transform("median")
    )
