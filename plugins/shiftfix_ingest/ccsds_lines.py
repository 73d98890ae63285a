"""Lines of CCSDS messages in keyword = value notation, with what is wrong with each line as such."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

from shiftfix.api import Problem
from shiftfix_ingest.source_files import SourceFile

_ASSIGNMENT = re.compile(r"([A-Z0-9_]+)\s*=\s*(.*)")
_LONGEST = 254
MARKERS = ("META_START", "META_STOP", "DATA_START", "DATA_STOP", "COVARIANCE_START", "COVARIANCE_STOP")


@dataclass(frozen=True)
class Line:
    """One line that is not blank: number, kind (assignment, comment, marker, other), keyword and value or text."""

    number: int
    kind: str
    keyword: str
    value: str


def text_of(source: SourceFile) -> str:
    """Return the text of a message; CR, LF, CRLF and LFCR all end a line."""
    try:
        text = source.data.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = source.data.decode("latin-1")
    return text.replace("\r\n", "\n").replace("\n\r", "\n").replace("\r", "\n")


def message_lines(source: SourceFile, standard: str, problems: list[Problem]) -> Iterator[Line]:
    """Yield the lines of a message; problems of single lines are appended and those lines left out.

    Characters outside ASCII are refused except in comments, where the standards' own annexes have them.
    """
    for number, raw in enumerate(text_of(source).split("\n"), 1):
        text = raw.strip(" ")
        if not text:
            continue
        where = f"{source.name}:{number}"
        if len(raw) > _LONGEST:
            problems.append(
                Problem(where, "line too long", found=f"{len(raw)} characters", allowed=f"{_LONGEST} ({standard})")
            )
            continue
        if text == "COMMENT" or text.startswith("COMMENT "):
            yield Line(number, "comment", "COMMENT", text[8:])
            continue
        strange = next((c for c in text if not 32 <= ord(c) < 127), "")
        if strange:
            problems.append(
                Problem(
                    where,
                    "character that is not allowed",
                    found=repr(strange),
                    allowed=f"printable ASCII, no tab ({standard})",
                )
            )
            continue
        if text in MARKERS:
            yield Line(number, "marker", text, "")
            continue
        match = _ASSIGNMENT.fullmatch(text)
        if not match:
            yield Line(number, "other", "", text)
            continue
        if not match[2]:
            problems.append(
                Problem(where, f"{match[1]} has no value", allowed=f"a value for every keyword ({standard})")
            )
            continue
        yield Line(number, "assignment", match[1], match[2])
