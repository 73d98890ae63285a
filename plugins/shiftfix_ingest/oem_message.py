"""Orbit ephemeris message as read: blocks of metadata and states, each state with its line."""

from __future__ import annotations

from dataclasses import dataclass, field

from shiftfix.api import Problem
from shiftfix_ingest.ccsds_lines import message_lines
from shiftfix_ingest.ccsds_values import EPOCH_RULE, NUMBER_RULE, is_epoch, is_number
from shiftfix_ingest.ccsds_xml import Element, parse_xml
from shiftfix_ingest.source_files import SourceFile

STANDARD = "CCSDS 502.0-B-3"
VERSIONS = ("1.0", "2.0", "3.0")
_HEADER = ("CLASSIFICATION", "CREATION_DATE", "ORIGINATOR", "MESSAGE_ID")
_METADATA = (
    "OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "REF_FRAME_EPOCH", "TIME_SYSTEM", "START_TIME",
    "USEABLE_START_TIME", "USEABLE_STOP_TIME", "STOP_TIME", "INTERPOLATION", "INTERPOLATION_DEGREE",
)  # fmt: skip
_MANDATORY = ("OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "TIME_SYSTEM", "START_TIME", "STOP_TIME")
_STATE = ("X", "Y", "Z", "X_DOT", "Y_DOT", "Z_DOT")
_ACCELERATION = ("X_DDOT", "Y_DDOT", "Z_DDOT")


@dataclass
class Block:
    """One metadata block with its states.

    Parameters
    ----------
    line : int
    metadata : dict of str to str
    lines : dict of str to int
        Line of each metadata keyword.
    epochs : list of str
    states : list of tuple
        x, y, z [km], vx, vy, vz [km/s].
    rows : list of int
        Line of each state.
    covariances : int
        Number of covariance matrices, which are passed over.
    """

    line: int
    metadata: dict[str, str] = field(default_factory=dict)
    lines: dict[str, int] = field(default_factory=dict)
    epochs: list[str] = field(default_factory=list)
    states: list[tuple[float, ...]] = field(default_factory=list)
    rows: list[int] = field(default_factory=list)
    covariances: int = 0


def parse_oem(source: SourceFile) -> tuple[list[Block], list[Problem]]:
    """Return the blocks of a file in either notation, and every violated rule with its line."""
    if source.data.lstrip(b"\xef\xbb\xbf \r\n")[:1] == b"<":
        blocks, header, version, problems = _from_xml(source)
    else:
        blocks, header, version, problems = _from_lines(source)
    if version is None:
        return blocks, problems
    if version not in VERSIONS:
        problems.append(Problem(f"{source.name}:1", "unsupported version", found=version, allowed=", ".join(VERSIONS)))
    problems += [
        Problem(f"{source.name}:1", f"{k} is missing", allowed=f"mandatory in the header ({STANDARD}, section 5)")
        for k in ("CREATION_DATE", "ORIGINATOR")
        if k not in header
    ]
    if not blocks and not problems:
        problems.append(Problem(f"{source.name}:1", "no metadata block", allowed=f"META_START ({STANDARD}, section 5)"))
    for block in blocks:
        problems += _rules(block, source.name)
    return blocks, problems


def _rules(block: Block, name: str) -> list[Problem]:
    where = f"{name}:{block.line}"
    out = [
        Problem(where, f"{k} is missing", allowed=f"mandatory in the metadata ({STANDARD}, section 5)")
        for k in _MANDATORY
        if k not in block.metadata
    ]
    place = -1
    for keyword, line in block.lines.items():
        if keyword not in _METADATA:
            out.append(
                Problem(
                    f"{name}:{line}", "unknown keyword in the metadata", found=keyword, allowed=", ".join(_METADATA)
                )
            )
            continue
        if _METADATA.index(keyword) < place:
            out.append(
                Problem(f"{name}:{line}", f"{keyword} out of order", allowed=f"the order of {STANDARD}, section 5")
            )
        place = max(place, _METADATA.index(keyword))
    if "INTERPOLATION" in block.metadata and "INTERPOLATION_DEGREE" not in block.metadata:
        out.append(
            Problem(
                where,
                "INTERPOLATION_DEGREE is missing",
                allowed=f"mandatory with INTERPOLATION ({STANDARD}, section 5)",
            )
        )
    if len(block.states) < 2 and not out:
        out.append(Problem(where, "fewer than two states follow", found=str(len(block.states)), allowed="at least two"))
    return out


def _state(texts: list[str], where: str, problems: list[Problem]) -> tuple[float, ...] | None:
    bad = [t for t in texts if not is_number(t)]
    if len(texts) not in (6, 9) or bad:
        problems.append(
            Problem(
                where,
                "state cannot be read",
                found=bad[0] if bad else f"{len(texts)} numbers",
                allowed=f"6 or 9 numbers after the epoch; {NUMBER_RULE} ({STANDARD}, section 5)",
            )
        )
        return None
    return tuple(float(t) for t in texts[:6])


def _take(block: Block, epoch: str, texts: list[str], line: int, source: SourceFile, problems: list[Problem]) -> None:
    where = f"{source.name}:{line}"
    if not is_epoch(epoch):
        problems.append(
            Problem(where, "epoch cannot be read", found=epoch, allowed=f"{EPOCH_RULE} ({STANDARD}, section 7)")
        )
        return
    state = _state(texts, where, problems)
    if state:
        block.epochs.append(epoch)
        block.states.append(state)
        block.rows.append(line)


def _from_lines(source: SourceFile) -> tuple[list[Block], set[str], str | None, list[Problem]]:
    problems: list[Problem] = []
    blocks: list[Block] = []
    header: set[str] = set()
    version: str | None = None
    place, last = "start", 1
    for line in message_lines(source, STANDARD, problems):
        where = f"{source.name}:{line.number}"
        last = line.number
        if place == "start":
            if line.keyword != "CCSDS_OEM_VERS":
                problems.append(
                    Problem(
                        where,
                        "not an orbit ephemeris message",
                        found=repr(f"{line.keyword} {line.value}".strip()[:60]),
                        allowed=f"CCSDS_OEM_VERS = 3.0 as the first line that is not blank ({STANDARD}, section 5)",
                    )
                )
                return blocks, header, None, problems
            version, place = line.value, "header"
        elif line.kind == "comment":
            continue
        elif line.kind == "marker":
            fits = {
                "META_START": ("header", "data"),
                "META_STOP": ("meta",),
                "COVARIANCE_START": ("data",),
                "COVARIANCE_STOP": ("covariance",),
            }
            if place not in fits.get(line.keyword, ()):
                problems.append(Problem(where, f"{line.keyword} out of place", allowed=f"{STANDARD}, section 5"))
            if line.keyword == "META_START":
                blocks.append(Block(line.number))
                place = "meta"
            elif line.keyword == "COVARIANCE_START":
                place = "covariance"
            else:
                place = "data"
        elif place == "header":
            if line.kind != "assignment" or line.keyword not in _HEADER:
                problems.append(
                    Problem(
                        where,
                        "unknown keyword in the header",
                        found=line.keyword or line.value[:40],
                        allowed=", ".join(_HEADER),
                    )
                )
            header.add(line.keyword)
        elif place == "meta":
            if line.kind != "assignment":
                problems.append(
                    Problem(where, "line is no assignment", found=line.value[:60], allowed="KEYWORD = value")
                )
                continue
            if line.keyword in blocks[-1].metadata:
                problems.append(Problem(where, f"{line.keyword} is repeated", allowed="once a block"))
            blocks[-1].metadata[line.keyword] = line.value
            blocks[-1].lines[line.keyword] = line.number
        elif place == "covariance":
            blocks[-1].covariances += line.keyword == "EPOCH"
        elif line.kind != "other":
            problems.append(
                Problem(
                    where,
                    "keyword among the states",
                    found=line.keyword,
                    allowed=f"epoch and 6 or 9 numbers ({STANDARD}, section 5)",
                )
            )
        elif blocks:
            epoch, *texts = line.value.split()
            _take(blocks[-1], epoch, texts, line.number, source, problems)
    if place in ("start", "header", "meta", "covariance"):
        missing = {
            "start": "CCSDS_OEM_VERS",
            "header": "META_START",
            "meta": "META_STOP",
            "covariance": "COVARIANCE_STOP",
        }[place]
        problems.append(
            Problem(
                f"{source.name}:{last}",
                f"the message ends without {missing}",
                remedy="the file is truncated: fetch it again",
            )
        )
    return blocks, header, version, problems


def _from_xml(source: SourceFile) -> tuple[list[Block], set[str], str | None, list[Problem]]:
    root, problems = parse_xml(source, "oem")
    if root is None:
        return [], set(), None, problems
    header, body = root.first("header") or Element("", root.line), root.first("body") or Element("", root.line)
    blocks = []
    for segment in body.children:
        block = Block(segment.line)
        blocks.append(block)
        for entry in (segment.first("metadata") or Element("", segment.line)).children:
            if entry.name != "COMMENT":
                block.metadata[entry.name] = entry.text
                block.lines[entry.name] = entry.line
        for item in (segment.first("data") or Element("", segment.line)).children:
            if item.name == "covarianceMatrix":
                block.covariances += 1
            elif item.name == "stateVector":
                values = {c.name: c.text for c in item.children}
                known = [k for k in (*_STATE, *_ACCELERATION) if k in values]
                if [c.name for c in item.children] != ["EPOCH", *known]:
                    problems.append(
                        Problem(
                            f"{source.name}:{item.line}",
                            "state cannot be read",
                            found=" ".join(values),
                            allowed=f"EPOCH {' '.join(_STATE)} ({STANDARD}, section 5)",
                        )
                    )
                    continue
                _take(block, values["EPOCH"], [values[k] for k in known], item.line, source, problems)
            elif item.name != "COMMENT":
                problems.append(
                    Problem(f"{source.name}:{item.line}", "unknown element in the data", found=f"<{item.name}>")
                )
    return blocks, {c.name for c in header.children}, root.attributes.get("version", ""), problems
