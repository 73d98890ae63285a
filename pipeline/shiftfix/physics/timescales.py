"""Time scales at the rim: UTC, GPS and TT texts and counts to `time_tai_ns`, nanoseconds of TAI since 1970-01-01 TAI.

Leap seconds come from the table of ERFA. UTC before 1972 (rate offsets) is refused.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from functools import lru_cache

import erfa
import numpy as np

from shiftfix.physics.constants import TAI_MINUS_GPS_S, TT_MINUS_TAI_S

NS = 1_000_000_000
_DAY_NS = 86400 * NS
_GPS_EPOCH_TAI_NS = 3657 * _DAY_NS + TAI_MINUS_GPS_S * NS  # 1980-01-06T00:00:00 GPS
SCALES = ("UTC", "TAI", "TT", "GPS")
_YEARS = (1900, 2200)  # int64 nanoseconds since 1970 reach from 1677 to 2262
_OFFSET_NS = {"TAI": 0, "TT": -round(TT_MINUS_TAI_S * 1000) * 1_000_000, "GPS": TAI_MINUS_GPS_S * NS}

_ISO = re.compile(
    r"^(\d{4})-(?:(\d{2})-(\d{2})|(\d{3}))[T ](\d{2}):(\d{2}):(\d{2})(?:\.(\d+))?\s*(Z|[+-]\d{2}:?\d{2})?$"
)


@lru_cache(maxsize=1)
def _leaps() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return UTC day number since 1970, TAI - UTC [s] from that day on, and the TAI second at which it begins."""
    table = erfa.leap_seconds.get()
    table = table[table["year"] >= 1972]
    days = np.array([_day(int(r["year"]), int(r["month"]), 1) for r in table], dtype=np.int64)
    seconds = np.array([int(round(float(r["tai_utc"]))) for r in table], dtype=np.int64)
    return days, seconds, days * 86400 + seconds


def _day(year: int, month: int, day: int) -> int:
    """Return days since 1970-01-01 of the proleptic Gregorian calendar."""
    return int((np.datetime64(f"{year:04d}-{month:02d}-01") - np.datetime64("1970-01-01")).astype(int)) + day - 1


def tai_minus_utc_s(day: np.ndarray | int) -> np.ndarray:
    """Return TAI - UTC [s] on UTC days since 1970; raises ValueError before 1972."""
    days, seconds, _ = _leaps()
    index = np.searchsorted(days, day, side="right") - 1
    if np.any(index < 0):
        raise ValueError("UTC before 1972-01-01 is not supported (its seconds were not SI seconds)")
    return seconds[index]


def tai_ns_from_calendar(
    year: int, month: int, day: int, hour: int, minute: int, second: float | int, scale: str = "UTC", nanosecond: int = 0
) -> int:
    """Return nanoseconds of TAI of a calendar time in `scale` (UTC, TAI, TT or GPS); second 60 only where UTC has one."""
    if scale not in SCALES:
        raise ValueError(f"unknown time scale {scale!r}; allowed: {', '.join(SCALES)}")
    if not _YEARS[0] <= year <= _YEARS[1]:
        raise ValueError(f"year {year} is out of range; allowed: {_YEARS[0]} to {_YEARS[1]}")
    if not 1 <= month <= 12 or not 1 <= day <= _month_length(year, month):
        raise ValueError(f"no such date: {year:04d}-{month:02d}-{day:02d}")
    whole = int(np.floor(second))
    fraction = int(round((second - whole) * NS)) + nanosecond
    number = _day(year, month, day)
    if not (0 <= hour < 24 and 0 <= minute < 60 and 0 <= whole < 61):
        raise ValueError(f"no such time of day: {hour:02d}:{minute:02d}:{second:g}")
    if whole == 60 and not (scale == "UTC" and hour == 23 and minute == 59 and _has_leap(number)):
        raise ValueError("second 60 exists only at the end of a UTC day with a leap second")
    total = (number * 86400 + hour * 3600 + minute * 60 + whole) * NS + fraction
    if scale == "UTC":
        return total + int(tai_minus_utc_s(number)) * NS
    return total + _OFFSET_NS[scale]


def _month_length(year: int, month: int) -> int:
    leap = year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)
    return (31, 29 if leap else 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)[month - 1]


def _has_leap(day: int) -> bool:
    return bool(int(tai_minus_utc_s(day + 1)) - int(tai_minus_utc_s(day)) == 1)


def tai_ns_from_gps(week: int, seconds: float) -> int:
    """Return nanoseconds of TAI of a full GPS week number and seconds of week."""
    whole = int(np.floor(seconds))
    return _GPS_EPOCH_TAI_NS + (int(week) * 604800 + whole) * NS + int(round((seconds - whole) * NS))


def tai_ns_from_posix(posix_ns: np.ndarray) -> np.ndarray:
    """Return nanoseconds of TAI of POSIX times [ns], which count UTC days of 86400 s since 1970.

    A leap second has no POSIX time of its own: what was logged in it falls on the second after or before it.

    Raises
    ------
    ValueError
        Before 1972.
    """
    posix_ns = np.asarray(posix_ns, dtype=np.int64)
    return posix_ns + tai_minus_utc_s(posix_ns // _DAY_NS) * NS


def tai_ns_from_utc(text: str) -> int:
    """Return nanoseconds of TAI of one UTC text, ISO calendar or day of year, ending in Z.

    Raises
    ------
    ValueError
        Day-first dates, local offsets, missing Z or seconds, impossible dates: with what to write instead.
    """
    return _parse(text, "UTC", True)


def _parse(text: str, scale: str, require_z: bool) -> int:
    text = str(text).strip()
    match = _ISO.match(text)
    if not match:
        raise ValueError(_why_not(text))
    year, month, day, doy, hour, minute, second, fraction, zone = match.groups()
    if zone and zone != "Z":
        raise ValueError(f"local time {text!r}: offsets from UTC are not accepted; write UTC ending in Z")
    if scale == "UTC" and require_z and zone != "Z":
        raise ValueError(f"time without scale {text!r}: UTC must end in Z, as in 2026-03-01T12:00:00Z")
    if scale != "UTC" and zone == "Z":
        raise ValueError(f"{text!r} ends in Z (UTC) but the declared time scale is {scale}")
    if doy is not None:
        length = 366 if _month_length(int(year), 2) == 29 else 365
        if not 1 <= int(doy) <= length:
            raise ValueError(f"no such day of year: {text!r}; {year} has {length} days")
        date = np.datetime64(f"{year}-01-01") + (int(doy) - 1)
        month, day = str(date)[5:7], str(date)[8:10]
    nanosecond = int((fraction or "0").ljust(9, "0")[:9])
    return tai_ns_from_calendar(
        int(year), int(month), int(day), int(hour), int(minute), int(second), scale, nanosecond
    )


def _why_not(text: str) -> str:
    if re.match(r"^\d{1,2}[./-]\d{1,2}[./-]\d{2,4}", text):
        return f"day-first or month-first date {text!r}: write the year first, as in 2026-03-01T12:00:00Z"
    if re.match(r"^\d{4}-\d{2}-\d{2}[T ]\d{2}:\d{2}(Z|$)", text):
        return f"seconds are missing in {text!r}"
    if re.match(r"^\d+([.,]\d+)?$", text):
        return f"bare count {text!r} without time scale and epoch; write UTC ending in Z"
    if "," in text:
        return f"decimal comma in {text!r}: use a point"
    return f"not a time: {text!r}; allowed: 2026-03-01T12:00:00.5Z or 2026-060T12:00:00.5Z"


def tai_ns_from_texts(
    texts: Sequence[str] | np.ndarray, scale: str = "UTC", require_z: bool = True
) -> tuple[np.ndarray, list[tuple[int, str]]]:
    """Return nanoseconds of TAI of many texts, and (index, message) of each that is not a time (value 0 there)."""
    values = np.asarray(texts, dtype=object)
    out = np.zeros(len(values), dtype=np.int64)
    done = np.zeros(len(values), dtype=bool)
    if len(values):
        raw = np.array([str(v) for v in values]) if not isinstance(texts, np.ndarray) or texts.dtype.kind == "O" else texts
        try:
            fixed = raw.astype("S")
        except UnicodeEncodeError:
            fixed = None
        if fixed is not None and fixed.dtype.itemsize >= 19:
            out, done = _fixed_width(fixed, scale, require_z)
            if not done.all():
                _fill_day_of_year(fixed, scale, require_z, out, done)
    problems: list[tuple[int, str]] = []
    for index in np.flatnonzero(~done):
        try:
            out[index] = _parse(values[index], scale, require_z)
        except ValueError as error:
            problems.append((int(index), str(error)))
    return out, problems


def _fixed_width(texts: np.ndarray, scale: str, require_z: bool) -> tuple[np.ndarray, np.ndarray]:
    """Parse YYYY-MM-DDThh:mm:ss[.f*][Z] column by column; anything unusual is left to the slow path."""
    width = texts.dtype.itemsize
    bytes_ = texts.view(np.uint8).reshape(len(texts), width)
    digit = bytes_ - 48
    ok = np.ones(len(texts), bool)
    for k in (0, 1, 2, 3, 5, 6, 8, 9, 11, 12, 14, 15, 17, 18):
        ok &= digit[:, k] <= 9
    for k, symbols in ((4, b"-"), (7, b"-"), (10, b"T "), (13, b":"), (16, b":")):
        ok &= np.isin(bytes_[:, k], list(symbols))
    number = lambda a, b: sum(digit[:, k].astype(np.int64) * 10 ** (b - 1 - k) for k in range(a, b))  # noqa: E731
    year, month, day = number(0, 4), number(5, 7), number(8, 10)
    hour, minute, second = number(11, 13), number(14, 16), number(17, 19)
    nanosecond = np.zeros(len(texts), np.int64)
    ended = np.zeros(len(texts), bool)
    zulu = np.zeros(len(texts), bool)
    fraction = np.zeros(len(texts), bool)
    figures = np.zeros(len(texts), bool)
    scale_now = np.full(len(texts), 100_000_000, np.int64)
    for k in range(19, width):
        c = bytes_[:, k]
        blank = c == 0
        point = (c == 46) & (k == 19)
        z = (c == 90) & ~ended & ~zulu
        is_digit = (digit[:, k] <= 9) & fraction & ~zulu & ~ended
        ok &= blank | point | z | is_digit
        nanosecond += np.where(is_digit, digit[:, k].astype(np.int64) * scale_now, 0)
        scale_now = np.where(is_digit, scale_now // 10, scale_now)
        fraction |= point
        figures |= is_digit
        zulu |= z
        ended |= blank | z
    ok &= figures | ~fraction
    ok &= (year >= _YEARS[0]) & (year <= _YEARS[1])
    ok &= (month >= 1) & (month <= 12) & (day >= 1) & (hour < 24) & (minute < 60) & (second < 60)
    ok &= zulu if scale == "UTC" and require_z else np.ones_like(ok)
    if scale != "UTC":
        ok &= ~zulu
    # Second 60 was sent to the slow path above.
    months = (year - 1970) * 12 + np.clip(month, 1, 12) - 1
    first = months.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    number_of_day = first + day - 1
    ok &= day <= _last_days(months)
    total = (number_of_day * 86400 + hour * 3600 + minute * 60 + second) * NS + nanosecond
    if scale == "UTC":
        days, seconds, _ = _leaps()
        index = np.searchsorted(days, number_of_day, side="right") - 1
        ok &= index >= 0
        total = total + seconds[np.maximum(index, 0)] * NS
    else:
        total = total + _OFFSET_NS[scale]
    return np.where(ok, total, 0), ok


def _fill_day_of_year(texts: np.ndarray, scale: str, require_z: bool, out: np.ndarray, done: np.ndarray) -> None:
    """Fill in what reads YYYY-DDDThh:mm:ss[.f*][Z] by writing it as a calendar date first."""
    bytes_ = texts.view(np.uint8).reshape(len(texts), texts.dtype.itemsize)
    rows = np.flatnonzero(~done & (bytes_[:, 4] == 45) & np.isin(bytes_[:, 8], list(b"T ")))
    digit = bytes_[rows][:, [0, 1, 2, 3, 5, 6, 7]] - 48
    good = (digit <= 9).all(axis=1)
    rows, digit = rows[good], digit[good].astype(np.int64)
    year, day = digit[:, :4] @ [1000, 100, 10, 1], digit[:, 4:] @ [100, 10, 1]
    first = (year - 1970).astype("datetime64[Y]").astype("datetime64[D]")
    date = first + (day - 1)
    good = (day >= 1) & (date.astype("datetime64[Y]") == first.astype("datetime64[Y]")) & (year >= _YEARS[0])
    good &= year <= _YEARS[1]
    rows, date = rows[good], date[good]
    if not rows.size:
        return
    calendar = date.astype("S10").view(np.uint8).reshape(len(rows), 10)
    joined = np.ascontiguousarray(np.hstack([calendar, bytes_[rows][:, 8:]]))
    out[rows], done[rows] = _fixed_width(joined.view(f"S{joined.shape[1]}").ravel(), scale, require_z)


def _last_days(months: np.ndarray) -> np.ndarray:
    first = months.astype("datetime64[M]")
    return ((first + 1).astype("datetime64[D]") - first.astype("datetime64[D]")).astype(np.int64)


def utc_text(tai_ns: int, digits: int = 6) -> str:
    """Return UTC text ending in Z with so many decimals (truncated towards the past); second 60 is kept."""
    tai_ns = int(tai_ns)
    _, seconds, starts = _leaps()
    second, nano = divmod(tai_ns, NS)
    index = int(np.searchsorted(starts, second, side="right")) - 1
    if index < 0:
        raise ValueError("times before 1972-01-01 have no UTC here")
    utc = second - int(seconds[index])
    leap = index + 1 < len(starts) and second == int(starts[index + 1]) - 1 and seconds[index + 1] > seconds[index]
    if leap:
        utc -= 1
    day, rest = divmod(utc, 86400)
    date = str(np.datetime64(int(day), "D"))
    hour, rest = divmod(rest, 3600)
    minute, whole = divmod(rest, 60)
    fraction = f".{nano:09d}"[: digits + 1] if digits else ""
    return f"{date}T{hour:02d}:{minute:02d}:{60 if leap else whole:02d}{fraction}Z"


def tt_jd(tai_ns: int) -> tuple[float, float]:
    """Return TT as a two-part Julian date (midnight, fraction of day); resolution below 1e-6 s."""
    day, rest = divmod(int(tai_ns) + round(TT_MINUS_TAI_S * 1000) * 1_000_000, _DAY_NS)
    return 2440587.5 + day, rest / _DAY_NS


def utc_mjd(tai_ns: int) -> float:
    """Return UTC as modified Julian date (quasi-day: a leap second is squeezed into its day)."""
    second = int(tai_ns) / NS
    _, seconds, starts = _leaps()
    index = int(np.searchsorted(starts, second, side="right")) - 1
    if index < 0:
        raise ValueError("times before 1972-01-01 have no UTC here")
    return 40587.0 + (second - int(seconds[index])) / 86400.0
