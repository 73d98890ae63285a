"""From the segments of a tracking data message to rows of received frequency at the middle of the interval."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from decimal import Decimal
from typing import Any

import numpy as np

from shiftfix.api import SPEED_OF_LIGHT_M_S, tai_ns_from_texts
from shiftfix_ingest.ccsds_values import nanoseconds, same_text, unquoted
from shiftfix_ingest.tdm_keywords import CONVERTIBLE, stem_and_index
from shiftfix_ingest.tdm_message import Message, Record, Segment

_DOPPLER = ("DOPPLER_INSTANTANEOUS", "DOPPLER_INTEGRATED")
Steps = Mapping[str, list[tuple[int, float]]]


@dataclass
class Rows:
    """Rows and rejects of one message, in the order of its lines."""

    columns: dict[str, list] = field(default_factory=dict)
    rejects: list[tuple[int, str, str]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    def __len__(self) -> int:
        return len(self.columns.get("row_number", ()))

    def add(self, other: Rows) -> None:
        """Append the rows, rejects and notes of a segment."""
        for name, values in other.columns.items():
            self.columns.setdefault(name, []).extend(values)
        self.rejects += other.rejects
        self.notes += other.notes

    def reject(self, records: Sequence[Record], reason: str) -> None:
        """List records that make no row."""
        self.rejects += [(r.line, reason, f"{r.keyword} = {r.tag} {r.value}") for r in records]

    def reasons(self) -> dict[str, list[int]]:
        """Return the lines of the rejects by reason."""
        out: dict[str, list[int]] = {}
        for line, reason, _ in self.rejects:
            out.setdefault(reason, []).append(line)
        return out

    def frame(self) -> Any:
        """Return the rows as a data frame."""
        import pandas as pd

        return pd.DataFrame(self.columns)


def nominal_steps(messages: Sequence[Message]) -> dict[str, list[tuple[int, float]]]:
    """Return, by the name of the transmitting participant, the times [ns of TAI] and values [Hz] of TRANSMIT_FREQ.

    They may stand in another segment, or another message, than the data (section 3.3.2.1.3).
    """
    out: dict[str, list[tuple[int, float]]] = {}
    for message in messages:
        for segment in message.segments:
            scale = same_text(segment.get("TIME_SYSTEM"))
            if scale not in CONVERTIBLE:
                continue
            records = [r for r in segment.records if stem_and_index(r.keyword)[0] == "TRANSMIT_FREQ"]
            times, _ = tai_ns_from_texts([r.tag for r in records], scale, require_z=False)
            for record, time in zip(records, times.tolist(), strict=True):
                name = segment.get(f"PARTICIPANT_{stem_and_index(record.keyword)[1]}")
                out.setdefault(same_text(unquoted(name)), []).append((time, float(record.value)))
    return {name: sorted(steps) for name, steps in out.items()}


def segment_rows(segment: Segment, label: str, name: str, params: Any, steps: Steps) -> Rows:
    """Return the rows and rejects of one segment.

    Parameters
    ----------
    segment : Segment
    label, name : str
        Segment and file, for notes.
    params : TdmParams
    steps : mapping
        Transmitted frequencies by participant, from `nominal_steps`.
    """
    out = Rows()
    wanted, doppler = _sort(segment, out)
    if not wanted:
        return out
    refusal = _refusal(segment)
    if refusal:
        out.reject(wanted, refusal)
        out.notes.append(f"{name}: {label} is not used: {refusal}")
        return out
    sender, receiver = (int(d) for d in segment.get("PATH").split(","))
    misplaced = [r for r in wanted if stem_and_index(r.keyword)[1] not in (0, receiver)]
    if misplaced:
        out.reject(misplaced, f"PATH = {sender},{receiver}: participant {receiver} receives, not this one")
        wanted = [r for r in wanted if stem_and_index(r.keyword)[1] in (0, receiver)]
    times, interval_s = _middles(segment, wanted, receiver, doppler)
    emitter, station = (unquoted(segment.get(f"PARTICIPANT_{k}")) for k in (sender, receiver))
    nominal = _nominal(times, steps.get(same_text(emitter), []), params.nominal_frequency)
    if doppler and nominal is None:
        out.reject(wanted, "Doppler without TRANSMIT_FREQ: declare params.nominal_frequency")
        return out
    values = _frequencies(segment, wanted, doppler, nominal, params.corrections)
    if nominal is None:
        nominal = np.full(len(wanted), float(np.round(np.median(values)))) if wanted else np.zeros(0)
        out.notes.append(
            f"{name}: {label} has no TRANSMIT_FREQ; its median received frequency is taken as nominal "
            "(params.nominal_frequency)"
        )
    good = values > 0
    if not good.all():
        out.reject(
            [r for r, g in zip(wanted, good, strict=True) if not g], "received frequency is not above 0 Hz at sky level"
        )
    if not doppler and not segment.get("INTEGRATION_INTERVAL"):
        out.notes.append(f"{name}: {label} has no INTEGRATION_INTERVAL; its frequencies are taken as instantaneous")
    out.notes += _notes(segment, f"{name}: {label}", params.corrections, doppler)
    degraded = same_text(segment.get("DATA_QUALITY")) == "DEGRADED"
    strengths = {r.tag: float(r.value) for r in segment.records if r.keyword == "PC_N0"}
    kept = np.flatnonzero(good)
    count = len(kept)
    out.columns = {
        "station_id": [_renamed(station, params.stations)] * count,
        "emitter_id": [_renamed(emitter, params.emitters)] * count,
        "time_tai_ns": times[kept].tolist(),
        "interval_s": [interval_s] * count,
        "received_frequency_hz": values[kept].tolist(),
        "nominal_frequency_hz": nominal[kept].tolist(),
        "cn0_db_hz": [strengths.get(wanted[k].tag, float("nan")) for k in kept],
        "flag": ["downweight" if degraded else "use"] * count,
        "reason": ["DATA_QUALITY = DEGRADED" if degraded else ""] * count,
        "row_number": [wanted[k].line for k in kept],
    }
    return out


def _sort(segment: Segment, out: Rows) -> tuple[list[Record], bool]:
    """Return the records that may become rows, whether they are Doppler, and reject the others with their reason."""
    received = [r for r in segment.records if stem_and_index(r.keyword)[0] == "RECEIVE_FREQ"]
    doppler = [r for r in segment.records if r.keyword in _DOPPLER]
    if len({r.keyword for r in doppler}) > 1:
        out.reject(
            [r for r in doppler if r.keyword == _DOPPLER[0]],
            "the segment gives DOPPLER_INTEGRATED as well, which is used",
        )
        doppler = [r for r in doppler if r.keyword == _DOPPLER[1]]
    if received and doppler:
        out.reject(doppler, "the segment gives RECEIVE_FREQ as well, which is used")
        doppler = []
    for record in segment.records:
        stem = stem_and_index(record.keyword)[0]
        if stem == "RECEIVE_FREQ" or record.keyword in _DOPPLER:
            continue
        if stem == "TRANSMIT_FREQ":
            reason = "TRANSMIT_FREQ gives the nominal frequency; it is no row"
        elif record.keyword == "PC_N0":
            reason = "PC_N0 stands beside the received frequency; it is no row"
        else:
            reason = f"{stem} is not a received frequency"
        out.reject([record], reason)
    return (received or doppler), not received


def _refusal(segment: Segment) -> str:
    """Return why the signal data of a segment cannot be used; empty when they can."""
    mode, path, system = same_text(segment.get("MODE")), segment.get("PATH"), same_text(segment.get("TIME_SYSTEM"))
    if mode == "SINGLE DIFF":
        return "MODE = SINGLE_DIFF: differenced data are not read, this version takes one-way data only"
    if not path:
        return "no MODE and PATH: it is not said who transmits and who receives"
    legs = path.split(",")
    if len(legs) > 2:
        kind = "two-way" if len(legs) == 3 and legs[0] == legs[-1] else "three-way" if len(legs) == 3 else "relayed"
        return f"PATH = {path} is {kind}: this version takes one-way data only"
    if legs[0] == legs[1]:
        return f"PATH = {path} begins and ends at one participant"
    if system not in CONVERTIBLE:
        return f"TIME_SYSTEM = {system} cannot be converted; allowed: {', '.join(CONVERTIBLE)}"
    if same_text(segment.get("TIMETAG_REF")) == "TRANSMIT":
        return "TIMETAG_REF = TRANSMIT: the time of reception is not known"
    return ""


def _middles(segment: Segment, records: Sequence[Record], receiver: int, doppler: bool) -> tuple[np.ndarray, float]:
    """Return the reception times of the middles at the antenna [ns of TAI] and the length of the interval [s]."""
    scale = same_text(segment.get("TIME_SYSTEM"))
    times, _ = tai_ns_from_texts([r.tag for r in records], scale, require_z=False)
    times = times - nanoseconds(segment.get(f"RECEIVE_DELAY_{receiver}", "0"))
    interval = segment.get("INTEGRATION_INTERVAL")
    if not interval or (doppler and records and records[0].keyword == "DOPPLER_INSTANTANEOUS"):
        return times, 0.0
    half = nanoseconds(str(Decimal(interval) / 2))
    shift = {"START": half, "MIDDLE": 0, "END": -half}[same_text(segment.get("INTEGRATION_REF"))]
    return times + shift, float(interval)


def _nominal(times: np.ndarray, steps: Sequence[tuple[int, float]], declared: float | None) -> np.ndarray | None:
    """Return the nominal frequency of each row: declared, or the last step at or before it (the first, if none is)."""
    if declared is not None:
        return np.full(len(times), declared)
    if not steps:
        return None
    index = np.searchsorted(np.array([t for t, _ in steps]), times, side="right") - 1
    return np.array([f for _, f in steps])[np.maximum(index, 0)]


def _frequencies(
    segment: Segment, records: Sequence[Record], doppler: bool, nominal: np.ndarray | None, corrections: str
) -> np.ndarray:
    """Return received frequencies at sky level [Hz], each rounded once."""
    correction = Decimal(segment.get("CORRECTION_DOPPLER" if doppler else "CORRECTION_RECEIVE", "0"))
    applied = same_text(segment.get("CORRECTIONS_APPLIED")) == "YES"
    change = correction * ((corrections == "applied") - applied)  # 0 when the data are as they are wanted
    if doppler:
        rate = np.array([float((Decimal(r.value) + change) * 1000) for r in records])
        return nominal - nominal * rate / SPEED_OF_LIGHT_M_S
    offset = Decimal(segment.get("FREQ_OFFSET", "0")) + change
    return np.array([float(Decimal(r.value) + offset) for r in records])


def _notes(segment: Segment, where: str, corrections: str, doppler: bool) -> list[str]:
    keyword = "CORRECTION_DOPPLER" if doppler else "CORRECTION_RECEIVE"
    value, stated = segment.get(keyword), segment.get("CORRECTIONS_APPLIED")
    out = []
    if value:
        out.append(f"{where}: {keyword} = {value}, CORRECTIONS_APPLIED = {stated}; rows have it {corrections}")
    rates = [r for r in segment.records if stem_and_index(r.keyword)[0] == "TRANSMIT_FREQ_RATE" and float(r.value)]
    if rates:
        out.append(f"{where}: the transmitter is ramped; the nominal frequency is that of its steps")
    return out


def _renamed(participant: str, names: Mapping[str, str]) -> str:
    """Return the id of a participant; empty for UNKNOWN."""
    for key, value in names.items():
        if same_text(key) == same_text(participant):
            return value
    return "" if same_text(participant) == "UNKNOWN" else participant
