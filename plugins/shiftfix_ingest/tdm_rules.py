"""Rules of the tracking data message that a reader enforces, each with its place in the standard.

References
----------
CCSDS 503.0-B-2, Tracking Data Message, June 2020 with Corrigendum 1 (October 2021): tables 3-2 and 3-3, sections 3
and 4. Which keywords version 1.0 lacks: section 1.2.6.6.
"""

from __future__ import annotations

import re

from shiftfix.api import Problem, tai_ns_from_texts
from shiftfix_ingest.ccsds_values import EPOCH_RULE, NUMBER_RULE, is_epoch, is_integer, is_number, same_text
from shiftfix_ingest.tdm_keywords import (
    CHOICES,
    CONVERTIBLE,
    DATA_INDEXED_KIND,
    DATA_KIND,
    HEADER,
    INDEXED,
    KINDS,
    META_INTEGER,
    META_KIND,
    NEW_IN_2,
    RANK,
    VERSIONS,
    stem_and_index,
)
from shiftfix_ingest.tdm_message import STANDARD, Entry, Message, Segment


def message_problems(message: Message, name: str) -> list[Problem]:
    """Return every violated rule of a message, with file, line and the section of the standard."""
    problems: list[Problem] = []
    if message.version not in VERSIONS:
        problems.append(
            _problem(name, 1, "unsupported version", message.version or "none", ", ".join(VERSIONS), "table 3-2")
        )
    problems += _header(message, name)
    if not message.segments and not problems:
        problems.append(_problem(name, message.last_line, "no segment", "", "at least one segment", "3.1"))
    for segment in message.segments:
        problems += _metadata(segment, name, message.version)
        problems += _path(segment, name)
        problems += _records(segment, name, message.version)
    return problems


def _problem(name: str, line: int, what: str, found: str, allowed: str, rule: str) -> Problem:
    return Problem(f"{name}:{line}", what, found=found[:80], allowed=f"{allowed} ({STANDARD}, {rule})")


def _header(message: Message, name: str) -> list[Problem]:
    out: list[Problem] = []
    place = -1
    for entry in message.header:
        if entry.keyword not in HEADER:
            out.append(
                _problem(
                    name, entry.line, "unknown keyword in the header", entry.keyword, ", ".join(HEADER), "table 3-2"
                )
            )
            continue
        rank = HEADER.index(entry.keyword)
        if rank <= place:
            out.append(
                _problem(
                    name, entry.line, f"{entry.keyword} out of order or repeated", "", ", ".join(HEADER), "table 3-2"
                )
            )
        place = max(place, rank)
        if entry.keyword == "CREATION_DATE":
            out += _epochs([entry], name, "UTC")
    present = {e.keyword for e in message.header}
    for keyword in ("CREATION_DATE", "ORIGINATOR"):
        if keyword not in present:
            out.append(_problem(name, 1, f"{keyword} is missing", "", "mandatory in the header", "table 3-2"))
    return out + _version_problems(message.header, name, message.version)


def _version_problems(entries: list, name: str, version: str) -> list[Problem]:
    if version != "1.0":
        return []
    return [
        _problem(
            name, e.line, "keyword of version 2.0 in a message of version 1.0", e.keyword, "version 2.0", "1.2.6.6"
        )
        for e in entries
        if any(e.keyword.startswith(new) or (new == "PHASE_CT" and new in e.keyword) for new in NEW_IN_2)
    ]


def _metadata(segment: Segment, name: str, version: str) -> list[Problem]:
    out = _version_problems(segment.metadata, name, version)
    place, seen = -1, set()
    for entry in segment.metadata:
        stem, index = stem_and_index(entry.keyword)
        if stem not in RANK or (stem in INDEXED) != (index > 0):
            out.append(
                _problem(
                    name, entry.line, "unknown keyword in the metadata", entry.keyword, "those of table 3-3", "3.3.1.7"
                )
            )
            continue
        if entry.keyword in seen:
            out.append(_problem(name, entry.line, f"{entry.keyword} is repeated", "", "once a segment", "table 3-3"))
        elif RANK[stem] < place:
            out.append(
                _problem(name, entry.line, f"{entry.keyword} out of order", "", "the order of table 3-3", "table 3-3")
            )
        seen.add(entry.keyword)
        place = max(place, RANK[stem])
        out += _metadata_value(entry, stem, name)
    if "TIME_SYSTEM" not in seen:
        out.append(_problem(name, segment.line, "TIME_SYSTEM is missing", "", "mandatory", "table 3-3"))
    if not any(k.startswith("PARTICIPANT_") for k in seen):
        out.append(_problem(name, segment.line, "PARTICIPANT_n is missing", "", "at least one", "table 3-3"))
    if any(k.startswith("CORRECTION_") for k in seen) and "CORRECTIONS_APPLIED" not in seen:
        out.append(
            _problem(
                name, segment.line, "CORRECTIONS_APPLIED is missing", "", "mandatory with any CORRECTION_*", "table 3-3"
            )
        )
    if "INTERPOLATION" in seen and "INTERPOLATION_DEGREE" not in seen:
        out.append(
            _problem(
                name, segment.line, "INTERPOLATION_DEGREE is missing", "", "mandatory with INTERPOLATION", "table 3-3"
            )
        )
    if "INTEGRATION_INTERVAL" in seen and "INTEGRATION_REF" not in seen:
        out.append(
            _problem(
                name,
                segment.line,
                "INTEGRATION_REF is missing",
                "",
                "START, MIDDLE or END; there is no default",
                "table 3-3",
            )
        )
    limits = [e for e in segment.metadata if e.keyword in ("START_TIME", "STOP_TIME")]
    return out + _epochs(limits, name, "UTC")


def _metadata_value(entry: Entry, stem: str, name: str) -> list[Problem]:
    if stem in CHOICES and same_text(entry.value) not in CHOICES[stem]:
        allowed = ", ".join(c.replace(" ", "_") for c in CHOICES[stem])
        return [
            _problem(
                name, entry.line, f"{entry.keyword} has a value outside its list", entry.value, allowed, "table 3-3"
            )
        ]
    kind = META_KIND.get(stem, "number" if stem.startswith("CORRECTION_") else "")
    if kind:
        return _number(entry.value, kind, entry.keyword, name, entry.line, "table 3-3")
    if stem in META_INTEGER and not (is_integer(entry.value) and int(entry.value) > 0):
        return [
            _problem(
                name,
                entry.line,
                f"{entry.keyword} has a wrong value",
                entry.value,
                "a whole number above 0",
                "table 3-3",
            )
        ]
    return []


def _number(text: str, kind: str, keyword: str, name: str, line: int, rule: str) -> list[Problem]:
    if not is_number(text):
        return [_problem(name, line, f"{keyword} is not a number", text, NUMBER_RULE, "4.3.5")]
    allowed, good = KINDS[kind]
    if not good(float(text)):
        return [_problem(name, line, f"{keyword} has a wrong value", text, allowed, rule)]
    return []


def _path(segment: Segment, name: str) -> list[Problem]:
    line = {e.keyword: e.line for e in segment.metadata}
    mode = same_text(segment.get("MODE"))
    known = {stem_and_index(k)[1] for k in line if k.startswith("PARTICIPANT_")}
    out: list[Problem] = []
    for keyword in ("PATH", "PATH_1", "PATH_2"):
        if keyword not in line:
            continue
        wanted = "SEQUENTIAL" if keyword == "PATH" else "SINGLE DIFF"
        if mode != wanted:
            out.append(
                _problem(
                    name,
                    line[keyword],
                    f"{keyword} without MODE = {wanted.replace(' ', '_')}",
                    segment.get("MODE") or "no MODE",
                    "PATH with SEQUENTIAL, PATH_1 and PATH_2 with SINGLE_DIFF",
                    "table 3-3",
                )
            )
        value = segment.get(keyword)
        if not re.fullmatch(r"\d,\d(,\d)*", value):
            out.append(
                _problem(
                    name,
                    line[keyword],
                    f"{keyword} cannot be read",
                    value,
                    "digits and commas, no blanks, as in 2,1",
                    "table 3-3",
                )
            )
            continue
        unknown = sorted({int(d) for d in value.split(",")} - known)
        if unknown:
            out.append(
                _problem(
                    name,
                    line[keyword],
                    f"{keyword} names a participant that is not defined",
                    value,
                    f"PARTICIPANT_{unknown[0]} in the metadata",
                    "table 3-3",
                )
            )
    if ("PATH_1" in line) != ("PATH_2" in line):
        out.append(
            _problem(
                name,
                line.get("PATH_1") or line["PATH_2"],
                "PATH_1 and PATH_2 go together",
                "only one",
                "both",
                "table 3-3",
            )
        )
    if mode and not any(k in line for k in ("PATH", "PATH_1", "PATH_2")):
        out.append(
            _problem(
                name,
                line["MODE"],
                "MODE without a path",
                segment.get("MODE"),
                "PATH, or PATH_1 and PATH_2",
                "table 3-3",
            )
        )
    differenced = any(stem_and_index(r.keyword)[0] in ("RECEIVE_FREQ", "RANGE") for r in segment.records)
    if mode == "SINGLE DIFF" and differenced and "RECEIVE_BAND" not in line:
        out.append(
            _problem(
                name,
                segment.line,
                "RECEIVE_BAND is missing",
                "",
                "mandatory for differenced frequency or range",
                "table 3-3",
            )
        )
    return out


def _records(segment: Segment, name: str, version: str) -> list[Problem]:
    out = _version_problems(segment.records, name, version)
    if not segment.records:
        return [*out, _problem(name, segment.line, "the data section is empty", "", "at least one record", "3.1")]
    by_keyword: dict[str, list[Entry]] = {}
    for record in segment.records:
        stem, index = stem_and_index(record.keyword)
        kind = DATA_INDEXED_KIND.get(stem) if index else DATA_KIND.get(stem)
        if kind is None:
            out.append(
                _problem(
                    name, record.line, "unknown keyword in the data", record.keyword, "those of section 3.5", "3.5"
                )
            )
            continue
        out += _number(record.value, kind, record.keyword, name, record.line, "3.5")
        by_keyword.setdefault(record.keyword, []).append(Entry(record.keyword, record.tag, record.line))
    if any(r.keyword == "DOPPLER_INTEGRATED" for r in segment.records) and not segment.get("INTEGRATION_INTERVAL"):
        out.append(
            _problem(
                name,
                segment.line,
                "INTEGRATION_INTERVAL is missing",
                "",
                "mandatory for DOPPLER_INTEGRATED",
                "table 3-3",
            )
        )
    system = same_text(segment.get("TIME_SYSTEM"))
    if system in ("SCLK", "MET", "MRT"):  # counts of an on-board clock need not be calendar times
        return out
    for entries in by_keyword.values():
        bad = _epochs(entries, name, system if system in CONVERTIBLE else "TAI")
        out += bad
        if not bad:
            out += _order(entries, name, system if system in CONVERTIBLE else "TAI")
    return out


def _epochs(entries: list[Entry], name: str, scale: str) -> list[Problem]:
    out = [
        _problem(name, e.line, f"epoch of {e.keyword} cannot be read", e.value, EPOCH_RULE, "4.3.9")
        for e in entries
        if not is_epoch(e.value)
    ]
    good = [e for e in entries if is_epoch(e.value)]
    _, wrong = tai_ns_from_texts([e.value for e in good], scale, require_z=False)
    return out + [
        _problem(name, good[k].line, f"epoch of {good[k].keyword} cannot be read", good[k].value, text, "4.3.9")
        for k, text in wrong
    ]


def _order(entries: list[Entry], name: str, scale: str) -> list[Problem]:
    times, _ = tai_ns_from_texts([e.value for e in entries], scale, require_z=False)
    out = []
    for k in (times[1:] <= times[:-1]).nonzero()[0]:
        same = times[k + 1] == times[k]
        out.append(
            _problem(
                name,
                entries[k + 1].line,
                f"{entries[k + 1].keyword} " + ("twice at one time" if same else "goes back in time"),
                entries[k + 1].value,
                "records of one keyword in the order of time, each time once",
                "3.4.11" if same else "3.4.10",
            )
        )
    return out
