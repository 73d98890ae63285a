"""FrequencyTable: received frequencies at sky level, one row an observation, file and line kept."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import ClassVar

import numpy as np
import pandas as pd

from shiftfix.tables.schema import Column, Table

FLAGS = ("use", "downweight", "reject")


@dataclass(frozen=True)
class Source:
    """One file that was read: name as given in the pipeline file, SHA-256 of its bytes, and the count of its rows."""

    name: str
    sha256: str
    rows_read: int
    rows_accepted: int
    rows_rejected: int


@dataclass(frozen=True)
class Reject:
    """One row that was not accepted: where it stands and why."""

    source: str
    row_number: int
    reason: str
    text: str = ""


@dataclass(frozen=True, eq=False, kw_only=True)
class FrequencyTable(Table):
    """Received frequencies of one or more emitters at one or more stations.

    `time_tai_ns` is the *reception* time of the middle of the interval in nanoseconds of TAI since
    1970-01-01T00:00:00 TAI; `received_frequency_hz` is the mean over `interval_s` (an interval of 0 s means an
    instantaneous value) at sky level in hertz, as the station's own reference measures it.

    Parameters
    ----------
    sources : tuple of Source
        Files read, with their counts: read = accepted + rejected.
    rejects : tuple of Reject
        Every row that a reader did not accept.
    notes : tuple of str
        What a reader wants the report to say (for example, a duplicate file that was ignored).
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("station_id", "text", "station that received"),
        Column("emitter_id", "text", "emitter, empty when unknown", default=""),
        Column("arc_id", "text", "arc or pass, empty when not divided", default=""),
        Column("time_tai_ns", "int", "reception time, middle of the interval, ns of TAI since 1970"),
        Column("interval_s", "float", "length of the count interval, 0 for instantaneous", default=0.0, minimum=0.0),
        Column(
            "received_frequency_hz", "float", "mean received frequency at sky level", minimum=0.0, strict_minimum=True
        ),
        Column("received_frequency_sigma_hz", "float", "1-sigma of that mean", minimum=0.0, strict_minimum=True),
        Column("nominal_frequency_hz", "float", "nominal frequency of the channel", minimum=0.0, strict_minimum=True),
        Column("phase_arc_id", "text", "consecutive counts of one unbroken phase record share it", default=""),
        Column("cn0_db_hz", "float", "carrier to noise density ratio", required=False, nullable=True),
        Column("frequency_rate_hz_s", "float", "slope measured beside the frequency", required=False, nullable=True),
        Column("pseudorange_m", "float", "code range at the end of the interval", required=False, nullable=True),
        Column("flag", "text", "use, downweight or reject", default="use", allowed=FLAGS),
        Column("reason", "text", "why the flag is not use", default=""),
        Column("source", "text", "file the row came from", default=""),
        Column("row_number", "int", "line in that file", default=0),
    )
    sources: tuple[Source, ...] = ()
    rejects: tuple[Reject, ...] = ()
    notes: tuple[str, ...] = field(default=())


def merge_frequency_tables(tables: Sequence[FrequencyTable]) -> FrequencyTable:
    """Return one table ordered by time and station; a file or row that comes twice is kept once and noted.

    Two rows are the same when station, emitter, time, interval and received frequency agree exactly. A repeated row that
    stands in another place than the kept one becomes a reject, and its file counts it so; the same row of the same file
    read twice is only noted.
    """
    tables = tuple(tables)
    rows = pd.concat([t.rows for t in tables], ignore_index=True) if len(tables) > 1 else tables[0].rows
    for column in FrequencyTable.columns:
        if column.name in rows and column.kind == "text" and len(tables) > 1:
            rows[column.name] = rows[column.name].astype(object)
    keys = ["station_id", "emitter_id", "time_tai_ns", "interval_s", "received_frequency_hz"]
    repeated = rows.duplicated(keys, keep="first").to_numpy()
    notes = [n for t in tables for n in t.notes]
    rejects = list(dict.fromkeys(r for t in tables for r in t.rejects))
    sources: dict[tuple[str, str], Source] = {}
    for table in tables:
        for source in table.sources:
            sources.setdefault((source.name, source.sha256), source)
    if repeated.any():
        names = ", ".join(sorted(set(rows.loc[repeated, "source"])))
        notes.append(f"{int(repeated.sum())} rows occur twice and are used once (from {names or 'unnamed source'})")
        used = set(zip(rows.loc[~repeated, "source"], rows.loc[~repeated, "row_number"], strict=True))
        dropped = rows.loc[repeated, ["source", "row_number"]].drop_duplicates()
        elsewhere = [(str(s), int(n)) for s, n in dropped.to_numpy() if (s, n) not in used]
        rejects += [Reject(s, n, "the same observation occurs twice") for s, n in elsewhere]
        lost = Counter(s for s, _ in elsewhere)
        sources = {
            key: replace(s, rows_accepted=s.rows_accepted - lost[s.name], rows_rejected=s.rows_rejected + lost[s.name])
            for key, s in sources.items()
        }
        rows = rows[~repeated]
    order = np.lexsort((rows["emitter_id"].to_numpy(str), rows["station_id"].to_numpy(str), rows["time_tai_ns"]))
    return FrequencyTable(
        rows=rows.iloc[order],
        sources=tuple(sources.values()),
        rejects=tuple(rejects),
        notes=tuple(dict.fromkeys(notes)),
    )
