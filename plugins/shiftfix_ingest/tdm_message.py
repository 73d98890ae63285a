"""Tracking data message as read: header, and segments of metadata and records, each with its line."""

from __future__ import annotations

from dataclasses import dataclass, field

from shiftfix.api import Problem
from shiftfix_ingest.ccsds_lines import message_lines
from shiftfix_ingest.ccsds_xml import Element, parse_xml
from shiftfix_ingest.source_files import SourceFile

STANDARD = "CCSDS 503.0-B-2"


@dataclass(frozen=True)
class Entry:
    """One keyword of header or metadata."""

    keyword: str
    value: str
    line: int


@dataclass(frozen=True)
class Record:
    """One observation: keyword, time tag and value as written."""

    keyword: str
    tag: str
    value: str
    line: int


@dataclass
class Segment:
    """Metadata and records of one segment."""

    line: int
    metadata: list[Entry] = field(default_factory=list)
    records: list[Record] = field(default_factory=list)

    def get(self, keyword: str, default: str = "") -> str:
        """Return the value of a metadata keyword."""
        return next((e.value for e in self.metadata if e.keyword == keyword), default)


@dataclass
class Message:
    """One tracking data message."""

    version: str = ""
    header: list[Entry] = field(default_factory=list)
    segments: list[Segment] = field(default_factory=list)
    last_line: int = 0


def parse_message(source: SourceFile) -> tuple[Message, list[Problem]]:
    """Return the message of a file in either notation, and what is wrong with its structure."""
    if source.data.lstrip(b"\xef\xbb\xbf \r\n")[:1] == b"<":
        return _from_xml(source)
    return _from_lines(source)


def _from_lines(source: SourceFile) -> tuple[Message, list[Problem]]:
    message, problems = Message(), []
    place, comment_fits = "start", False
    segment = Segment(0)
    for line in message_lines(source, STANDARD, problems):
        where = f"{source.name}:{line.number}"
        message.last_line = line.number
        if place == "start":
            if line.keyword != "CCSDS_TDM_VERS":
                return message, [
                    Problem(
                        where,
                        "not a tracking data message",
                        found=repr(f"{line.keyword} {line.value}".strip()[:60]),
                        allowed=f"CCSDS_TDM_VERS = 2.0 as the first line that is not blank ({STANDARD}, table 3-2)",
                    )
                ]
            message.version, place, comment_fits = line.value, "header", True
        elif line.kind == "comment":
            if not comment_fits:
                problems.append(
                    Problem(
                        where,
                        "comment out of place",
                        found=f"COMMENT {line.value}"[:60],
                        allowed=f"right after the version, META_START or DATA_START ({STANDARD}, 4.5.2)",
                    )
                )
        elif line.kind == "marker":
            wanted = {
                "header": "META_START",
                "meta": "META_STOP",
                "between": "DATA_START",
                "data": "DATA_STOP",
                "after": "META_START",
            }
            if line.keyword != wanted[place]:
                problems.append(
                    Problem(where, f"{line.keyword} out of place", allowed=f"{wanted[place]} ({STANDARD}, 3.1)")
                )
                if line.keyword not in ("META_START", "DATA_START"):
                    continue
            if line.keyword == "META_START":
                segment = Segment(line.number)
                message.segments.append(segment)
            place = {"META_START": "meta", "META_STOP": "between", "DATA_START": "data", "DATA_STOP": "after"}[
                line.keyword
            ]
            comment_fits = line.keyword.endswith("START")
        elif line.kind == "other":
            problems.append(
                Problem(
                    where, "line is no assignment", found=line.value[:60], allowed=f"KEYWORD = value ({STANDARD}, 4.2)"
                )
            )
        elif place in ("header", "meta"):
            comment_fits = False
            (message.header if place == "header" else segment.metadata).append(
                Entry(line.keyword, line.value, line.number)
            )
        elif place == "data":
            comment_fits = False
            parts = line.value.split()
            if len(parts) != 2:
                problems.append(
                    Problem(
                        where,
                        f"{line.keyword} needs a time tag and one value",
                        found=line.value,
                        allowed=f"{STANDARD}, 3.4",
                    )
                )
                continue
            segment.records.append(Record(line.keyword, parts[0], parts[1], line.number))
        else:
            problems.append(
                Problem(
                    where,
                    f"{line.keyword} outside metadata and data",
                    allowed=f"META_START ... DATA_STOP ({STANDARD}, 3.1)",
                )
            )
    if place == "start" and not problems:
        problems.append(Problem(f"{source.name}:1", "the file has only blank lines"))
    elif place in ("header", "meta", "between", "data"):
        missing = {"header": "META_START", "meta": "META_STOP", "between": "DATA_START", "data": "DATA_STOP"}[place]
        problems.append(
            Problem(
                f"{source.name}:{message.last_line}",
                f"the message ends without {missing}",
                allowed=f"{STANDARD}, 3.1",
                remedy="the file is truncated: fetch it again",
            )
        )
    return message, problems


def _from_xml(source: SourceFile) -> tuple[Message, list[Problem]]:
    message = Message()
    root, problems = parse_xml(source, "tdm")
    if root is None:
        return message, problems
    message.version = root.attributes.get("version", "")
    if root.attributes.get("id") != "CCSDS_TDM_VERS":
        problems.append(
            Problem(
                f"{source.name}:{root.line}",
                "root element without its id",
                found=root.attributes.get("id", "none"),
                allowed=f'id="CCSDS_TDM_VERS" ({STANDARD}, 5)',
            )
        )
    header, body = root.first("header"), root.first("body")
    if [c.name for c in root.children] != ["header", "body"] or header is None or body is None:
        found = " ".join(c.name for c in root.children)
        return message, [
            *problems,
            Problem(f"{source.name}:{root.line}", "header and body expected", found=found, allowed=f"{STANDARD}, 5"),
        ]
    message.header = _entries(source, header, problems)
    for element in body.children:
        if [c.name for c in element.children] != ["metadata", "data"] or element.name != "segment":
            problems.append(
                Problem(
                    f"{source.name}:{element.line}",
                    "segment of metadata and data expected",
                    found=f"<{element.name}>",
                    allowed=f"{STANDARD}, 5",
                )
            )
            continue
        segment = Segment(element.line)
        segment.metadata = _entries(source, element.children[0], problems)
        segment.records = _records(source, element.children[1], problems)
        message.segments.append(segment)
    return message, problems


def _entries(source: SourceFile, parent: Element, problems: list[Problem]) -> list[Entry]:
    out: list[Entry] = []
    for child in parent.children:
        where = f"{source.name}:{child.line}"
        if child.name == "COMMENT":
            if out:
                problems.append(
                    Problem(where, "comment out of place", allowed=f"first in header or metadata ({STANDARD}, 4.5.2)")
                )
        elif not child.text:
            problems.append(
                Problem(where, f"{child.name} has no value", allowed=f"a value for every keyword ({STANDARD}, 4.3.1)")
            )
        else:
            out.append(Entry(child.name, child.text, child.line))
    return out


def _records(source: SourceFile, data: Element, problems: list[Problem]) -> list[Record]:
    out: list[Record] = []
    for child in data.children:
        where = f"{source.name}:{child.line}"
        if child.name == "COMMENT":
            if out:
                problems.append(Problem(where, "comment out of place", allowed=f"first in data ({STANDARD}, 4.5.2)"))
            continue
        names = [c.name for c in child.children]
        if child.name != "observation" or len(names) != 2 or names[0] != "EPOCH":
            problems.append(
                Problem(
                    where,
                    "observation of EPOCH and one keyword expected",
                    found=f"<{child.name}> {' '.join(names)}",
                    allowed=f"{STANDARD}, 5",
                )
            )
            continue
        epoch, value = child.children
        if not epoch.text or not value.text:
            problems.append(Problem(where, f"{value.name} has no value or no epoch", allowed=f"{STANDARD}, 4.3.1"))
            continue
        out.append(Record(value.name, epoch.text, value.text, value.line))
    return out
