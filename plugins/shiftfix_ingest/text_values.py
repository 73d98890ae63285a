"""Text values: columns of text to numbers and times, with the reason for every field that is neither.

Decimal text goes to the nearest double; counts of seconds go to nanoseconds without passing through a double.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from decimal import Decimal

import numpy as np

from shiftfix.api import tai_ns_from_gps, tai_ns_from_posix, tai_ns_from_texts

_SECONDS_PER_WEEK = 604800
_FACTOR = {"s": Decimal(1), "ms": Decimal("1e-3"), "us": Decimal("1e-6"), "ns": Decimal("1e-9")}
TIME_FORMATS = ("iso", "gps", "posix")
TIME_UNITS = tuple(_FACTOR)


def numbers(texts: np.ndarray, decimal: str = ".") -> np.ndarray:
    """Return the numbers of a column of text; NaN for what is not a number (blank text included)."""
    if decimal == ",":
        texts = np.array([t.replace(",", ".") if "." not in t else "x" for t in texts], dtype=object)
    try:
        if any("_" in t for t in texts):
            raise ValueError
        return texts.astype(float)
    except ValueError:
        return np.array([_number(t) for t in texts], dtype=float)


def _number(text: str) -> float:
    try:
        return math.nan if "_" in text else float(text)
    except ValueError:
        return math.nan


def why_no_number(text: str, decimal: str = ".") -> str:
    """Return why a text is not a finite number, with the likely remedy."""
    if not text:
        return "is empty"
    if decimal == "." and "," in text:
        return f'is not a finite number: {text!r} has a comma; say decimal = ",", or take out thousands separators'
    if decimal == "," and "." in text:
        return f"is not a finite number: {text!r} has a point, the declared decimal mark is a comma"
    return f"is not a finite number: {text!r}"


def times(
    columns: Mapping[str, np.ndarray],
    *,
    time_format: str,
    scale: str,
    unit: str = "s",
    require_z: bool = True,
    decimal: str = ".",
) -> tuple[np.ndarray, dict[int, str]]:
    """Return nanoseconds of TAI of the rows, and the reason by index of each row that has no time (value 0 there).

    Parameters
    ----------
    columns : mapping of role to column of text
        `time`, and `date` (iso) or `week` (gps).
    time_format : {"iso", "gps", "posix"}
        Calendar or day-of-year text; GPS week and count of the week; count since 1970 without leap seconds.
    scale, require_z
        As in `tai_ns_from_texts`, for iso.
    unit : {"s", "ms", "us", "ns"}
        Of the counts.
    decimal : str
        Decimal mark of the counts.
    """
    text = columns["time"]
    if time_format == "iso":
        if "date" in columns:
            text = np.array([f"{d}T{t}" for d, t in zip(columns["date"], text, strict=True)], dtype=object)
        out, trouble = tai_ns_from_texts(text, scale, require_z)
        return out, dict(trouble)
    counts, reasons = _nanoseconds(text, unit, decimal)
    if time_format == "posix":
        day = 86400 * 10**9
        early = (counts < 730 * day) & ~np.isin(np.arange(len(counts)), list(reasons))
        reasons |= {
            int(k): f"{text[k]!r} is before 1972 as a count of {unit} since 1970" for k in np.flatnonzero(early)
        }
        good = np.ones(len(counts), bool)
        good[list(reasons)] = False
        out = np.zeros(len(counts), np.int64)
        out[good] = tai_ns_from_posix(counts[good])
        return out, reasons
    week = numbers(columns["week"])
    wrong = ~(np.isfinite(week) & (week >= 0) & (week < 10000) & (week == np.floor(week)))
    late = (counts < 0) | (counts >= _SECONDS_PER_WEEK * 10**9)
    for k in np.flatnonzero(wrong | late):
        found = f"week {columns['week'][k]!r}, {unit} of week {text[k]!r}"
        reasons[int(k)] = f"not a GPS week and count of the week: {found}"
    weeks = np.where(wrong, 0, week).astype(np.int64)
    out = tai_ns_from_gps(0, 0.0) + weeks * (_SECONDS_PER_WEEK * 10**9) + counts
    out[list(reasons)] = 0
    return out, reasons


def _nanoseconds(texts: np.ndarray, unit: str, decimal: str) -> tuple[np.ndarray, dict[int, str]]:
    """Return counts of `unit` as whole nanoseconds, rounded to the nearest, and a reason for each that is none."""
    factor = _FACTOR[unit] * 10**9
    limit = 7e18 / float(factor)
    values = numbers(texts, decimal)
    out = np.zeros(len(texts), np.int64)
    reasons: dict[int, str] = {}
    for k, (text, value) in enumerate(zip(texts, values, strict=True)):
        if not abs(value) < limit:
            reasons[k] = (
                f"time {why_no_number(text, decimal)}"
                if not math.isfinite(value)
                else f"time {text!r} is too large for a count of {unit}"
            )
            continue
        out[k] = int(round(Decimal(text.replace(",", ".")) * factor))
    return out, reasons
