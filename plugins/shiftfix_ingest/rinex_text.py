"""Body of a RINEX observation file: epochs, satellites and observables as arrays, with the line of every record.

The structure (epoch lines) is walked in Python, a few thousand steps a day; numbers are parsed column by column.
Missing observations (blank or 0) are NaN. Phases are cycles, codes metres, Dopplers hertz, strengths as written.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shiftfix.api import Problem, tai_ns_from_calendar
from shiftfix_ingest.rinex_header import SCALES, Header, incomplete_codes, read_header, take_line
from shiftfix_ingest.source_files import SourceFile

_WIDTH = 16  # F14.3 and two one-digit indicators
_NS = 1_000_000_000


@dataclass
class ObservationFile:
    """Observations of one file; a record is one satellite at one epoch.

    Parameters
    ----------
    source : SourceFile
    header : Header
    epoch_tai_ns : ndarray (e,) of int64
        Time tags as the receiver wrote them, on the file's time system.
    epoch_flag : ndarray (e,) of int
        0 good, 1 power failure since the epoch before.
    epoch_clock_s : ndarray (e,)
        Receiver clock offset on the epoch line, NaN when absent.
    epoch : ndarray (n,) of int
        Index of each record's epoch.
    satellite : ndarray (n,) of str
        As in G17.
    line : ndarray (n,) of int
        First line of the record.
    values : dict of str to ndarray (n,)
        By observation code; NaN where missing or where the satellite's system has no such code.
    lock : dict of str to ndarray (n,) of int8
        Loss-of-lock indicator by code (phases), 0 when blank.
    unreadable : list of (line, text)
        Records with something that is not a number; those values are NaN.
    """

    source: SourceFile
    header: Header
    epoch_tai_ns: np.ndarray = field(default_factory=lambda: np.zeros(0, np.int64))
    epoch_flag: np.ndarray = field(default_factory=lambda: np.zeros(0, int))
    epoch_clock_s: np.ndarray = field(default_factory=lambda: np.zeros(0))
    epoch: np.ndarray = field(default_factory=lambda: np.zeros(0, int))
    satellite: np.ndarray = field(default_factory=lambda: np.zeros(0, "U3"))
    line: np.ndarray = field(default_factory=lambda: np.zeros(0, int))
    values: dict[str, np.ndarray] = field(default_factory=dict)
    lock: dict[str, np.ndarray] = field(default_factory=dict)
    unreadable: list[tuple[int, str]] = field(default_factory=list)


class _Broken(Exception):
    def __init__(self, problem: Problem) -> None:
        self.problem = problem


def parse_observations(source: SourceFile) -> tuple[ObservationFile, list[Problem]]:
    """Return the observations of one plain RINEX text and the problems that make it unusable."""
    lines = source.data.decode("latin-1").replace("\r\n", "\n").split("\n")
    if not lines[-1]:
        lines.pop()
    header, problems = read_header(lines, source.name)
    out = ObservationFile(source, header)
    if problems:
        return out, problems
    walk = _Walk(lines, header, source.name)
    try:
        walk.run()
    except _Broken as broken:
        return out, [broken.problem]
    if not walk.records:
        return out, [
            Problem(f"{source.name}:{len(lines)}", "no observation follows the header", remedy="fetch the file again")
        ]
    out.epoch_tai_ns = np.array(walk.times, np.int64)
    out.epoch_flag = np.array(walk.flags)
    out.epoch_clock_s = np.array(walk.clocks, float)
    _fill(out, walk, lines)
    return out, []


class _Walk:
    """Walk over the epochs; `records` are (epoch index, satellite, index of first line, number of the code list)."""

    def __init__(self, lines: list[str], header: Header, name: str) -> None:
        self.lines, self.header, self.name = lines, header, name
        self.times: list[int] = []
        self.flags: list[int] = []
        self.clocks: list[float] = []
        self.records: list[tuple[int, str, int, int]] = []
        self.lists: list[dict[str, list[str]]] = [dict(header.codes)]

    def run(self) -> None:
        row = self.header.lines
        step = self._epoch_2 if self.header.version < 3 else self._epoch_3
        end = len(self.lines)
        while end > row and not self.lines[end - 1].strip("\x1a \t"):
            end -= 1
        while row < end:
            if not self.lines[row].strip("\x1a \t"):
                row += 1
                continue
            row = step(row)

    def _time(self, row: int, year: str, rest: list[str], second: str) -> int:
        scale, behind_s = SCALES[self.header.time_system]
        try:
            number = int(year)
            if self.header.version < 3:
                number += 1900 if number >= 80 else 2000
            whole, _, fraction = second.strip().partition(".")
            nanosecond = int((fraction or "0").ljust(9, "0")[:9])
            tai = tai_ns_from_calendar(number, *map(int, rest), int(whole), scale, nanosecond)
        except ValueError as error:
            raise _Broken(
                Problem(
                    f"{self.name}:{row + 1}",
                    "epoch line cannot be read",
                    found=repr(self.lines[row][:60]),
                    allowed=self._shape(),
                    remedy=str(error),
                )
            ) from None
        return tai + behind_s * _NS

    def _shape(self) -> str:
        return (
            "' yy mm dd hh mm ss.sssssss  f nn'"
            if self.header.version < 3
            else "'> yyyy mm dd hh mm ss.sssssss  f nnn'"
        )

    def _counts(self, row: int, flag: str, count: str) -> tuple[int, int]:
        if flag.strip() in ("2", "3", "4", "5", "6") and not count.strip():
            count = "0"
        if not (flag.strip() or "0").isdigit() or not count.strip().isdigit():
            raise _Broken(
                Problem(
                    f"{self.name}:{row + 1}",
                    "epoch line cannot be read",
                    found=repr(self.lines[row][:60]),
                    allowed=self._shape(),
                )
            )
        return int(flag.strip() or "0"), int(count)

    def _need(self, row: int, until: int, count: int) -> None:
        if until > len(self.lines):
            raise _Broken(
                Problem(
                    f"{self.name}:{row + 1}",
                    "the file is truncated",
                    found=f"{len(self.lines) - row - 1} lines after this epoch line",
                    allowed=f"{until - row - 1} lines for {count} satellites",
                    remedy="fetch the file again",
                )
            )

    def _event(self, row: int, flag: int, count: int) -> int:
        """Pass over an event: header lines (2-5), which may bring new code lists, or slip records (6)."""
        until = row + 1 + count
        if flag == 6:
            per = -(-len(self.header.codes_of("G")) // 5) if self.header.version < 3 else 1
            extra = (max(count - 1, 0)) // 12 if self.header.version < 3 else 0
            until = row + 1 + extra + count * per
            self._need(row, until, count)
            return until
        self._need(row, until, count)
        before = {k: list(v) for k, v in self.header.codes.items()}
        for k in range(row + 1, until):
            problem = take_line(self.header, self.lines[k], f"{self.name}:{k + 1}")
            if problem:
                raise _Broken(problem)
        if self.header.codes != before:
            bad = incomplete_codes(self.header, f"{self.name}:{row + 1}")
            if bad:
                raise _Broken(bad[0])
            self.lists.append({k: list(v) for k, v in self.header.codes.items()})
        return until

    def _epoch_2(self, row: int) -> int:
        line = self.lines[row]
        flag, count = self._counts(row, line[28:29], line[29:32])
        if flag > 1:
            return self._event(row, flag, count)
        time = self._time(row, line[1:3], [line[4:6], line[7:9], line[10:12], line[13:15]], line[15:26])
        self._epoch(time, flag, line[68:80])
        names = line[32:68]
        at = row + 1
        while len(names) < 3 * count and at < len(self.lines):
            names = names.ljust(36 * (at - row)) + self.lines[at][32:68]
            at += 1
        per = -(-len(self.header.codes["*"]) // 5)
        self._need(row, at + per * count, count)
        for k in range(count):
            name = names[3 * k : 3 * k + 3]
            satellite = (name[:1].strip() or "G") + name[1:].replace(" ", "0")
            if not (satellite[0].isalpha() and satellite[1:].isdigit() and len(satellite) == 3):
                raise _Broken(
                    Problem(
                        f"{self.name}:{row + 1}",
                        "satellite cannot be read",
                        found=repr(name),
                        allowed="a letter and two digits",
                    )
                )
            self.records.append((len(self.times) - 1, satellite, at + per * k, len(self.lists) - 1))
        return at + per * count

    def _epoch_3(self, row: int) -> int:
        line = self.lines[row]
        if line[:1] != ">":
            raise _Broken(
                Problem(f"{self.name}:{row + 1}", "epoch line expected", found=repr(line[:60]), allowed=self._shape())
            )
        flag, count = self._counts(row, line[31:32], line[32:35])
        if flag > 1:
            return self._event(row, flag, count)
        time = self._time(row, line[2:6], [line[7:9], line[10:12], line[13:15], line[16:18]], line[18:29])
        self._epoch(time, flag, line[41:56])
        self._need(row, row + 1 + count, count)
        for k in range(row + 1, row + 1 + count):
            satellite = self.lines[k][:3].replace(" ", "0")
            if not (len(satellite) == 3 and satellite[0].isalpha() and satellite[1:].isdigit()):
                raise _Broken(
                    Problem(
                        f"{self.name}:{k + 1}",
                        f"satellite record {k - row} of {count} expected",
                        found=repr(self.lines[k][:40]),
                        allowed="a letter and two digits first",
                        remedy="the file is truncated or damaged here: fetch it again",
                    )
                )
            self.records.append((len(self.times) - 1, satellite, k, len(self.lists) - 1))
        return row + 1 + count

    def _epoch(self, time: int, flag: int, clock: str) -> None:
        self.times.append(time)
        self.flags.append(flag)
        try:
            self.clocks.append(float(clock) if clock.strip() else float("nan"))
        except ValueError:
            self.clocks.append(float("nan"))


def _fill(out: ObservationFile, walk: _Walk, lines: list[str]) -> None:
    """Parse the numbers of all records, one code list and system at a time."""
    out.epoch = np.array([r[0] for r in walk.records])
    out.satellite = np.array([r[1] for r in walk.records])
    first = np.array([r[2] for r in walk.records])
    out.line = first + 1
    which = np.array([r[3] for r in walk.records])
    text = "\n".join(lines).encode("latin-1") + b" " * (_WIDTH + 3)
    buffer = np.frombuffer(text, np.uint8)
    lengths = np.array([len(line) for line in lines])
    starts = np.concatenate([[0], np.cumsum(lengths[:-1] + 1)])
    systems = out.satellite.astype("U1")
    old = out.header.version < 3
    bad = np.zeros(len(first), bool)
    for number, lists in enumerate(walk.lists):
        for system in np.unique(systems[which == number]):
            codes = lists.get("*" if old else str(system), [])
            index = np.flatnonzero((which == number) & (systems == system))
            for k, code in enumerate(codes):
                row = first[index] + (k // 5 if old else 0)
                column = _WIDTH * (k % 5) if old else 3 + _WIDTH * k
                chars = _columns(buffer, starts[row], lengths[row], column)
                value, wrong = decimals(chars[:, :14])
                bad[index] |= wrong
                value[value == 0.0] = np.nan
                out.values.setdefault(code, np.full(len(first), np.nan))[index] = value
                if code[0] == "L":
                    digit = chars[:, 14].astype(np.int16) - 48
                    lock = np.where((digit >= 0) & (digit <= 9), digit, 0).astype(np.int8)
                    out.lock.setdefault(code, np.zeros(len(first), np.int8))[index] = lock
    out.unreadable = [(int(out.line[k]), lines[first[k]].rstrip()[:80]) for k in np.flatnonzero(bad)]


def _columns(buffer: np.ndarray, start: np.ndarray, length: np.ndarray, column: int) -> np.ndarray:
    """Return 16 characters from a column of each line; blanks past the line's end."""
    offset = np.arange(column, column + _WIDTH)
    inside = offset < length[:, None]
    place = np.where(inside, start[:, None] + offset, 0)
    return np.where(inside, buffer[place], 32)


def decimals(chars: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return numbers of F14.3 fields (n, 14) of character codes, NaN where blank, and where they are no numbers.

    Fields as the format wants them are integers over 1000, correctly rounded; anything else goes through `float`.
    """
    digit = chars.astype(np.int16) - 48
    is_digit = (digit >= 0) & (digit <= 9)
    blank = chars == 32
    minus = chars == 45
    whole = np.r_[0:10, 11:14]
    usual = (chars[:, 10] == 46) & is_digit[:, 11:].all(1) & (is_digit | blank | minus)[:, :10].all(1)
    usual &= ~(blank[:, 1:10] & ~blank[:, :9]).any(1)  # no blank after a digit or sign
    usual &= ~(minus[:, 1:10] & ~blank[:, :9]).any(1)  # a sign comes first
    weights = 10 ** np.r_[12:2:-1, 2:-1:-1].astype(np.int64)
    number = np.where(is_digit[:, whole], digit[:, whole], 0).astype(np.int64) @ weights
    value = np.where(minus.any(1), -number, number) / 1000.0
    empty = blank.all(1)
    value[empty] = np.nan
    wrong = np.zeros(len(chars), bool)
    for k in np.flatnonzero(~usual & ~empty):
        try:
            value[k] = float(chars[k].astype(np.uint8).tobytes().decode("latin-1"))
            wrong[k] = not np.isfinite(value[k])
        except ValueError:
            wrong[k] = True
        if wrong[k]:
            value[k] = np.nan
    return value, wrong
