"""Tracking data messages (CCSDS TDM, KVN and XML) to received frequencies.

One-way data of two participants: PATH = 1,2 with RECEIVE_FREQ_2, or 2,1 with RECEIVE_FREQ_1 (or RECEIVE_FREQ), and
DOPPLER_INSTANTANEOUS / DOPPLER_INTEGRATED with the transmitted frequency. All other records are counted and listed with
the reason why they make no row.

The design names a library (ccsds-ndm-py) as the reader. This walk of our own replaces it: that library accepts most of
the messages that the standard forbids, refuses a blank line before DATA_START, and gives no line numbers, which a
reject must have. Tests compare the values of both.

References
----------
CCSDS 503.0-B-2, Tracking Data Message, June 2020 with Corrigendum 1 (October 2021); section numbers are in the
messages. That RECEIVE_DELAY is taken off the tag, and that corrections are added to the data, is from memory of
section 3.3.2.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from shiftfix.api import FrequencyTable, InputError, Problem, Reject, Source, param
from shiftfix_ingest.source_files import SourceFile, binary_problem, head_text, open_sources, repeat_problems
from shiftfix_ingest.tdm_message import Message, parse_message
from shiftfix_ingest.tdm_rows import Rows, nominal_steps, segment_rows
from shiftfix_ingest.tdm_rules import message_problems

_DEFAULT_SIGMA_HZ = 1.0


@dataclass(frozen=True)
class TdmParams:
    """Parameters of `ingest.tdm`."""

    files: tuple = param("tracking data messages, KVN or XML, plain or gzip", path="files")
    sigma: float | None = param(
        "1-sigma of one received frequency; without it 1 Hz is taken and said", default=None, unit="Hz", minimum=1e-9
    )
    nominal_frequency: float | None = param(
        "nominal frequency of the channel; default: TRANSMIT_FREQ of the message", default=None, unit="Hz", minimum=1.0
    )
    stations: Mapping[str, str] = param("station id by participant name; default: the name itself", default={})
    emitters: Mapping[str, str] = param("emitter id by participant name; default: the name itself", default={})
    corrections: str = param(
        "applied: data with CORRECTION_RECEIVE / _DOPPLER in them; undone: without",
        default="applied",
        choices=("applied", "undone"),
    )
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


@dataclass
class _Read:
    """One file: message, rows and rejects."""

    source: SourceFile
    message: Message
    rows: Rows = field(default_factory=Rows)


def recognise(path: Any, first_bytes: bytes) -> bool:
    """Return whether the text begins with the version line, or the root element, of a tracking data message."""
    text = head_text(first_bytes).lstrip("\ufeff \r\n")
    if text.startswith("<"):
        return 'id="CCSDS_TDM_VERS"' in text.replace("'", '"')
    return text.startswith("CCSDS_TDM_VERS")


def read_tdm(inputs: Any, params: TdmParams, context: Any) -> dict[str, FrequencyTable]:
    """Return the received frequencies of all messages.

    Raises
    ------
    InputError
        Files that cannot be opened, and messages that break a rule of the standard: all problems at once, with file,
        line and section. Also when no record of any message makes a row, with the reasons.
    """
    sources, problems, notes = open_sources(params.files, context.display_path)
    problems += repeat_problems(notes, params.on_repeat)
    found: list[_Read] = []
    for source in sources:
        context.check_cancelled()
        binary = binary_problem(source, "a tracking data message, KVN or XML")
        if binary:
            problems.append(binary)
            continue
        message, bad = parse_message(source)
        bad += message_problems(message, source.name) if message.version else []
        problems += bad
        if not bad:
            found.append(_Read(source, message))
    if problems:
        raise InputError(problems)
    steps = nominal_steps([r.message for r in found])
    for one in found:
        for number, segment in enumerate(one.message.segments, 1):
            one.rows.add(segment_rows(segment, f"segment {number}", one.source.name, params, steps))
    if not any(len(r.rows) for r in found):
        raise InputError(_nothing(found))
    for one in found:
        notes += one.rows.notes
    if params.sigma is None:
        notes.append(
            f"no sigma is declared: {_DEFAULT_SIGMA_HZ:g} Hz is taken for every received frequency (params.sigma)"
        )
    for text in dict.fromkeys(notes):
        context.logger.warning("%s", text)
    return {"frequencies": _table(found, params, tuple(dict.fromkeys(notes)))}


def _nothing(found: Sequence[_Read]) -> list[Problem]:
    """Return one problem for each reason in each segment."""
    out = []
    for one in found:
        for reason, lines in one.rows.reasons().items():
            out.append(
                Problem(
                    f"{one.source.name}:{lines[0]}",
                    reason,
                    found=f"{len(lines)} records",
                    allowed="one-way received frequency or Doppler",
                )
            )
    return out


def _table(found: Sequence[_Read], params: TdmParams, notes: tuple[str, ...]) -> FrequencyTable:
    import numpy as np
    import pandas as pd

    frames, rejects, sources = [], [], []
    for one in found:
        frame = one.rows.frame()
        frame["source"] = one.source.name
        frames.append(frame)
        rejects += [Reject(one.source.name, line, reason, text) for line, reason, text in one.rows.rejects]
        refused = len(one.rows.rejects)
        sources.append(Source(one.source.name, one.source.sha256, len(frame) + refused, len(frame), refused))
    rows = pd.concat([f for f in frames if len(f)], ignore_index=True)
    rows["received_frequency_sigma_hz"] = params.sigma if params.sigma is not None else _DEFAULT_SIGMA_HZ
    if rows["cn0_db_hz"].isna().all():
        rows = rows.drop(columns="cn0_db_hz")
    order = np.lexsort((rows.emitter_id.to_numpy(str), rows.station_id.to_numpy(str), rows.time_tai_ns.to_numpy()))
    return FrequencyTable(
        rows=rows.iloc[order].reset_index(drop=True), sources=tuple(sources), rejects=tuple(rejects), notes=notes
    )
