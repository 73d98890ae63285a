"""Text table: the lines of a delimited file as columns of text, with the line number of every row.

Nothing is converted here. A line that does not have the header's number of fields is kept apart with its reason; a quoted
field may hold the separator, but not a line end.
"""

from __future__ import annotations

import csv
import difflib
import io
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import Problem
from shiftfix_ingest.source_files import SourceFile, binary_problem

WHITESPACE = "whitespace"
_UTF16 = (b"\xff\xfe", b"\xfe\xff")
_QUOTE = '"'


@dataclass(frozen=True)
class TextTable:
    """Fields of a delimited file.

    Parameters
    ----------
    name : str
        Of the file, as the user wrote it.
    lines : list of str
        All lines of the file; line n is `lines[n - 1]`.
    head : int
        Number of the header line, or of the first row without one.
    names : list of str
        Of the columns; empty without a header.
    width : int
        Number of columns.
    fields : pandas.DataFrame
        Text of the rows that have that number of fields, one column a field.
    numbers : ndarray of int
        Their line numbers.
    ragged : mapping of int to str
        Line number and reason of every row that has another number of fields.
    ended : bool
        Whether the last line has a line end.
    """

    name: str
    lines: list[str]
    head: int
    names: list[str]
    width: int
    fields: pd.DataFrame
    numbers: np.ndarray
    ragged: Mapping[int, str]
    ended: bool

    def __len__(self) -> int:
        return len(self.numbers) + len(self.ragged)

    def column(self, index: int) -> np.ndarray:
        """Return one column as text without blanks around it."""
        return self.fields.iloc[:, index].str.strip().to_numpy(object)

    def place(self, columns: Mapping[str, Any]) -> tuple[dict[str, int], list[Problem]]:
        """Return the index of the column of each role, and a problem for each that the file lacks or has twice."""
        where, problems = {}, []
        for role, column in columns.items():
            here = f"{self.name}:{self.head}"
            if isinstance(column, int) and not isinstance(column, bool) and 1 <= column <= self.width:
                where[role] = column - 1
            elif self.names.count(column) > 1:
                problems.append(
                    Problem(
                        here,
                        f"column {column!r} for {role} occurs {self.names.count(column)} times",
                        found=", ".join(self.names),
                        remedy="give its number, counted from 1",
                    )
                )
            elif column in self.names:
                where[role] = self.names.index(column)
            else:
                close = difflib.get_close_matches(str(column), self.names, 1)
                problems.append(
                    Problem(
                        here,
                        f"no column {column!r} for {role}",
                        allowed=", ".join(self.names) or f"numbers 1 to {self.width}",
                        remedy=f"did you mean {close[0]}?" if close else "",
                    )
                )
        return where, problems


def read_text_table(
    file: SourceFile,
    *,
    separator: str = "",
    comment: str = "#",
    header: bool = True,
    skip: int = 0,
    decimal: str = ".",
    encoding: str = "utf-8",
) -> tuple[TextTable | None, Problem | None]:
    """Return the table of a file, or None and the problem that makes it unreadable.

    Parameters
    ----------
    file : SourceFile
    separator : str
        One character, `whitespace` for any run of blanks, or empty: found from the first line.
    comment : str
        Lines that begin with it are left out, as blank ones are.
    header : bool
        Whether the first line that is left names the columns.
    skip : int
        Lines before it.
    decimal : str
        A decimal comma is not taken for a separator.
    encoding : str
        UTF-16 is known by its byte order mark.
    """
    text, problem = _decode(file, encoding)
    if problem:
        return None, problem
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    ended = lines[-1] == ""
    if ended:
        lines.pop()
    keep = [k for k in range(skip, len(lines)) if lines[k].strip() and not (comment and lines[k].startswith(comment))]
    if len(keep) < 1 + header:
        return None, Problem(
            file.name,
            "the file has no rows",
            found=f"{len(lines)} lines",
            allowed="a header line and rows below it" if header else "",
        )
    first = lines[keep[0]]
    separator = separator or _separator(first, decimal)
    separator = WHITESPACE if separator == " " else separator
    names = [n.strip().strip(_QUOTE) for n in _split(first, separator)] if header else []
    width = len(names) or len(_split(first, separator))
    rows = keep[header:]
    fields, numbers, ragged = _fields(lines, rows, separator, width)
    return TextTable(file.name, lines, keep[0] + 1, names, width, fields, numbers, ragged, ended), None


def _decode(file: SourceFile, encoding: str) -> tuple[str, Problem | None]:
    data = file.data
    if data[:2] in _UTF16:
        try:
            return data.decode("utf-16"), None
        except UnicodeDecodeError as error:
            return "", Problem(file.name, "the UTF-16 text is truncated or damaged", found=str(error))
    problem = binary_problem(file, "delimited text")
    if problem:
        return "", problem
    try:
        return data.decode("utf-8-sig" if encoding == "utf-8" else encoding), None
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        return "", Problem(
            f"{file.name}:{line}",
            "not UTF-8 text",
            found=repr(data[error.start : error.start + 8]),
            remedy='say encoding = "latin-1" if the receiver writes that',
        )


def _separator(line: str, decimal: str) -> str:
    for mark in (";", "\t", "|", ","):
        if mark in line and not (mark == "," and decimal == ","):
            return mark
    return WHITESPACE


def _split(line: str, separator: str) -> list[str]:
    """Return the fields of one line; none when it cannot be split."""
    if _QUOTE in line and separator != WHITESPACE:
        try:
            return next(csv.reader([line], delimiter=separator), [])
        except csv.Error:
            return []
    return line.split() if separator == WHITESPACE else line.split(separator)


def _fields(
    lines: Sequence[str], rows: Sequence[int], separator: str, width: int
) -> tuple[pd.DataFrame, np.ndarray, dict[int, str]]:
    """Return fields and line numbers of the rows of the right width, and the reason for each other row.

    Plain rows are split by the C parser of pandas; rows with quotes one by one.
    """
    if separator == WHITESPACE:
        counts = np.fromiter((len(lines[k].split()) for k in rows), np.int64, len(rows))
    else:
        counts = np.fromiter((lines[k].count(separator) for k in rows), np.int64, len(rows)) + 1
    quoted = np.fromiter((_QUOTE in lines[k] for k in rows), bool, len(rows)) & (separator != WHITESPACE)
    index = np.asarray(rows, dtype=np.int64)
    # A separator at the end of every row, which the header line does not have, is no field of its own.
    spare = ~quoted & (counts == width + 1) & (separator != WHITESPACE)
    spare[spare] = [lines[k].rstrip().endswith(separator) for k in index[spare]]
    plain = ~quoted & (counts == width)
    ragged: dict[int, str] = {}
    for k, found in zip(index[~plain & ~spare & ~quoted], counts[~plain & ~spare & ~quoted], strict=True):
        ragged[int(k) + 1] = f"wrong number of fields in the row: {found}, not {width}"
    parts = []
    taken = index[plain]
    if taken.size:
        frame = pd.read_csv(
            io.StringIO("\n".join([lines[k] for k in taken])),
            sep=r"\s+" if separator == WHITESPACE else separator,
            header=None,
            names=range(width),
            index_col=False,
            dtype=object,
            keep_default_na=False,
            skip_blank_lines=False,
            quoting=csv.QUOTE_NONE,
            engine="c",
        )
        parts.append((taken, frame))
    slow, kept = [], []
    for k in index[quoted]:
        found = _split(lines[k], separator)
        if lines[k].count(_QUOTE) % 2:
            ragged[int(k) + 1] = "a quote is not closed in the row"
        elif len(found) != width:
            ragged[int(k) + 1] = f"wrong number of fields in the row: {len(found)}, not {width}"
        else:
            slow.append(found)
            kept.append(k)
    for k in index[spare]:
        slow.append(lines[k].split(separator)[:width])
        kept.append(k)
    if kept:
        parts.append((np.array(kept), pd.DataFrame(slow, columns=range(width), dtype=object)))
    if not parts:
        return pd.DataFrame(columns=range(width), dtype=object), np.empty(0, np.int64), ragged
    numbers = np.concatenate([p[0] for p in parts])
    fields = parts[0][1] if len(parts) == 1 else pd.concat([p[1] for p in parts], ignore_index=True)
    order = np.argsort(numbers, kind="stable")
    if len(parts) > 1 or (np.diff(numbers) < 0).any():
        fields, numbers = fields.iloc[order].reset_index(drop=True), numbers[order]
    return fields, numbers + 1, ragged
