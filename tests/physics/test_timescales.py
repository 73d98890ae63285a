"""Times at the rim: leap seconds, GPS weeks, day of year, agreement with ERFA, messages, many texts at once."""

import erfa
import numpy as np
import pytest

from shiftfix.physics.timescales import (
    NS,
    tai_minus_utc_s,
    tai_ns_from_calendar,
    tai_ns_from_gps,
    tai_ns_from_posix,
    tai_ns_from_texts,
    tai_ns_from_utc,
    tt_jd,
    utc_mjd,
    utc_text,
)


def erfa_tai_ns(year, month, day, hour, minute, second):
    """TAI by ERFA from UTC calendar fields, as integer nanoseconds."""
    jd1, jd2 = erfa.utctai(*erfa.dtf2d("UTC", year, month, day, hour, minute, second))
    whole = round(float(jd1) - 2440587.5)
    return whole * 86400 * NS + round((float(jd1) - 2440587.5 - whole + float(jd2)) * 86400 * NS)


def test_leap_second_both_ways():
    """2016-12-31T23:59:60.5Z lies half a second before 2017 (IERS Bulletin C 52)."""
    inside, after = tai_ns_from_utc("2016-12-31T23:59:60.5Z"), tai_ns_from_utc("2017-01-01T00:00:00Z")
    assert after - inside == NS // 2
    assert inside - tai_ns_from_utc("2016-12-31T23:59:59Z") == 3 * NS // 2
    assert utc_text(inside) == "2016-12-31T23:59:60.500000Z"
    assert utc_text(after) == "2017-01-01T00:00:00.000000Z"
    assert utc_text(after - NS - 1, 9) == "2016-12-31T23:59:59.999999999Z"
    assert utc_text(inside, 0) == "2016-12-31T23:59:60Z"


@pytest.mark.parametrize("text", ["2016-12-30T23:59:60Z", "2017-12-31T23:59:60Z", "2016-12-31T22:59:60Z", "2016-12-31T23:59:61Z"])
def test_second_60_elsewhere_is_refused(text):
    with pytest.raises(ValueError, match=r"second 60 exists only|no such time"):
        tai_ns_from_utc(text)
    values, problems = tai_ns_from_texts([text, "2026-03-01T12:00:00Z"])
    assert values[0] == 0 and [index for index, _ in problems] == [0]


def test_against_erfa_since_1972_to_a_nanosecond():
    random = np.random.default_rng(1)
    first = np.datetime64("1972-01-01")
    for day in random.integers(0, 20150, 3000):
        date = str(first + int(day))
        hour, minute = int(random.integers(24)), int(random.integers(60))
        nano = int(random.integers(60 * NS))
        text = f"{date}T{hour:02d}:{minute:02d}:{nano // NS:02d}.{nano % NS:09d}Z"
        year, month, number = (int(a) for a in date.split("-"))
        ours = tai_ns_from_utc(text)
        assert abs(ours - erfa_tai_ns(year, month, number, hour, minute, nano / NS)) <= 1
        assert utc_text(ours, 9) == text


def test_every_leap_second_against_erfa():
    for row in erfa.leap_seconds.get():
        if row["year"] > 1972:
            year, month = int(row["year"]), int(row["month"])
            last = str(np.datetime64(f"{year:04d}-{month:02d}-01") - 1)
            fields = [int(a) for a in last.split("-")]
            assert tai_ns_from_utc(f"{last}T23:59:60.25Z") == erfa_tai_ns(*fields, 23, 59, 60.25)


def test_day_of_year():
    assert tai_ns_from_utc("2024-060T12:00:00Z") == tai_ns_from_utc("2024-02-29T12:00:00Z")
    assert tai_ns_from_utc("2026-365T23:59:59.5Z") == tai_ns_from_utc("2026-12-31T23:59:59.5Z")
    assert tai_ns_from_utc("2016-366T23:59:60Z") == tai_ns_from_utc("2016-12-31T23:59:60Z")
    for text in ("2026-366T00:00:00Z", "2026-000T00:00:00Z"):
        with pytest.raises(ValueError, match="2026 has 365 days"):
            tai_ns_from_utc(text)


def test_gps_weeks():
    """Week 0 begins 1980-01-06 UTC; week 2408 on 2026-03-01, 18 s before UTC midnight (IS-GPS-200, from memory)."""
    assert tai_ns_from_gps(0, 0.0) == tai_ns_from_utc("1980-01-06T00:00:00Z")
    assert tai_ns_from_gps(2408, 18.25) == tai_ns_from_utc("2026-03-01T00:00:00.25Z")
    assert tai_ns_from_gps(2408, 18.25) == tai_ns_from_calendar(2026, 3, 1, 0, 0, 18.25, "GPS")
    assert tai_ns_from_gps(2407, 604800.0) == tai_ns_from_gps(2408, 0.0)


def test_scales_from_calendar():
    utc = tai_ns_from_calendar(2026, 3, 1, 12, 0, 0)
    assert tai_ns_from_calendar(2026, 3, 1, 12, 0, 37, "TAI") == utc
    assert tai_ns_from_calendar(2026, 3, 1, 12, 1, 9.184, "TT") == utc
    assert tai_ns_from_calendar(2026, 3, 1, 12, 0, 18, "GPS") == utc
    with pytest.raises(ValueError, match="unknown time scale 'UT1'; allowed: UTC, TAI, TT, GPS"):
        tai_ns_from_calendar(2026, 3, 1, 12, 0, 0, "UT1")
    for fields in ((2026, 2, 29, 0, 0, 0), (2026, 13, 1, 0, 0, 0), (2026, 1, 1, 24, 0, 0), (1900, 2, 29, 0, 0, 0)):
        with pytest.raises(ValueError, match="no such"):
            tai_ns_from_calendar(*fields)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("01.03.2026 12:00:00", "day-first or month-first"),
        ("3/1/2026 12:00:00Z", "day-first or month-first"),
        ("2026-03-01T12:00:00", "must end in Z"),
        ("2026-03-01T12:00:00+02:00", "offsets from UTC are not accepted"),
        ("2026-03-01T12:00Z", "seconds are missing"),
        ("1772366400.5", "bare count"),
        ("2026-03-01T12:00:00,5Z", "decimal comma"),
        ("2026-02-30T12:00:00Z", "no such date: 2026-02-30"),
        ("2026-03-01T12:60:00Z", "no such time of day"),
        ("2026-03-01T12:00:00.Z", "not a time"),
        ("yesterday", "not a time"),
        ("1970-01-01T00:00:00Z", "before 1972"),
    ],
)
def test_messages_one_by_one_and_many(text, message):
    with pytest.raises(ValueError, match=message):
        tai_ns_from_utc(text)
    values, problems = tai_ns_from_texts(["2026-03-01T12:00:00Z", text, "2026-03-01T12:00:01Z"])
    assert [index for index, _ in problems] == [1] and message.split()[0] in problems[0][1]
    assert values[1] == 0 and values[2] - values[0] == NS


def test_many_texts_are_the_same_as_one_by_one():
    random = np.random.default_rng(2)
    texts = ["2016-12-31T23:59:60.5Z", "2024-060T12:00:00Z", "2026-03-01 12:00:00.123456789123Z", " 2026-03-01T12:00:00 Z "]
    for _ in range(400):
        day = str(np.datetime64("1972-01-01") + int(random.integers(20000)))
        nano = int(random.integers(NS))
        digits = int(random.integers(0, 13))
        fraction = "." + f"{nano:09d}000"[:digits] if digits else ""
        texts.append(f"{day}T{random.integers(24):02d}:{random.integers(60):02d}:{random.integers(60):02d}{fraction}Z")
    values, problems = tai_ns_from_texts(texts)
    assert not problems
    assert values.tolist() == [tai_ns_from_utc(t) for t in texts]
    # Without Z, in GPS time; as an array of bytes-like width; none at all
    plain = [t[:-1] for t in texts[4:]]
    gps, problems = tai_ns_from_texts(np.array(plain), "GPS")
    assert not problems and gps[3] == tai_ns_from_texts(plain[3:4], "GPS")[0][0]
    second = [tai_ns_from_texts([t], "GPS")[0][0] - tai_ns_from_texts([t], "TAI")[0][0] for t in plain[:5]]
    assert second == [19 * NS] * 5
    assert tai_ns_from_texts([])[0].shape == (0,)
    for text in ("2026-03-01T12:00:00.", "2026-03-01T12:00:00Z"):
        assert tai_ns_from_texts([text], "GPS")[1]


def test_plain_texts_never_take_the_slow_way(monkeypatch):
    """The column-wise parser alone: what it leaves out costs 10 us a row."""
    from shiftfix.physics import timescales

    texts = ["1972-01-01T00:00:00Z", "2026-12-31T23:59:59.999999999Z", "2000-02-29 01:02:03.5Z", "1999-10-31T12:34:56.000000000000Z"]
    expected = [tai_ns_from_utc(t) for t in texts]
    monkeypatch.setattr(timescales, "_parse", None)
    for given in (texts, np.array(texts), np.array(texts, dtype=object), np.array(texts, dtype="S")[::1]):
        values, problems = tai_ns_from_texts(given)
        assert values.tolist() == expected and not problems


@pytest.mark.parametrize("column", range(19))
def test_every_column_of_a_text_is_looked_at(column):
    good = "2026-03-01T12:00:00.5Z"
    for symbol in "/:x-":
        text = good[:column] + symbol + good[column + 1 :]
        if text != good:
            values, problems = tai_ns_from_texts([good, text])
            assert [index for index, _ in problems] == [1] and values[1] == 0, text


def test_every_month_has_its_own_length():
    for month, last in enumerate((31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31), start=1):
        good, bad = (f"2026-{month:02d}-{day:02d}T00:00:00Z" for day in (last, last + 1))
        assert tai_ns_from_texts([good])[0][0] == tai_ns_from_utc(good) == erfa_tai_ns(2026, month, last, 0, 0, 0)
        assert len(tai_ns_from_texts([bad])[1]) == 1
        with pytest.raises(ValueError, match="no such date"):
            tai_ns_from_utc(bad)


def test_the_first_seconds_of_1972():
    """63072010 s of TAI: 730 days and TAI - UTC = 10 s (IERS Bulletin C)."""
    first = 63072010 * NS
    assert tai_ns_from_utc("1972-01-01T00:00:00Z") == first and utc_text(first, 0) == "1972-01-01T00:00:00Z"
    assert utc_mjd(first) == 41317.0
    for call in (utc_text, utc_mjd):
        with pytest.raises(ValueError, match="before 1972"):
            call(first - NS)


def test_julian_dates_against_erfa():
    for text in ("1972-07-01T00:00:00Z", "2004-04-06T07:51:28.386009Z", "2026-03-01T12:00:00Z"):
        tai = tai_ns_from_utc(text)
        fields = [int(text[a:b]) for a, b in ((0, 4), (5, 7), (8, 10), (11, 13), (14, 16))]
        utc = erfa.dtf2d("UTC", *fields, float(text[17:-1]))
        tt = erfa.taitt(*erfa.utctai(*utc))
        ours = tt_jd(tai)
        assert abs((ours[0] - tt[0]) + (ours[1] - tt[1])) * 86400 < 1e-9
        assert abs(utc_mjd(tai) - (utc[0] - 2400000.5) - utc[1]) * 86400 < 1e-6


def test_before_1972_is_refused():
    for call in (lambda: tai_minus_utc_s(729), lambda: utc_text(0), lambda: utc_mjd(0)):
        with pytest.raises(ValueError, match="before 1972"):
            call()


def test_posix_counts_utc_days_of_86400_seconds():
    """1483228800 is 2017-01-01T00:00:00Z, one POSIX second after 23:59:59Z but two seconds later (POSIX.1, 4.16)."""
    out = tai_ns_from_posix(np.array([1483228799, 1483228800, 63072000]) * NS)
    assert out[0] == tai_ns_from_utc("2016-12-31T23:59:59Z") and out[1] - out[0] == 2 * NS
    assert out[2] == tai_ns_from_utc("1972-01-01T00:00:00Z")
    with pytest.raises(ValueError, match="before 1972"):
        tai_ns_from_posix(np.array([63071999 * NS]))


@pytest.mark.parametrize("scale", ["UTC", "TAI"])
def test_years_beyond_the_reach_of_nanoseconds_are_refused(scale):
    """int64 nanoseconds since 1970 end in 2262; a year 9999 must not come back as another century."""
    mark = "Z" if scale == "UTC" else ""
    texts = [f"{year}-03-01T12:00:00{mark}" for year in (2200, 2201, 9999, 1899)]
    values, problems = tai_ns_from_texts(texts, scale)
    assert values[0] == tai_ns_from_calendar(2200, 3, 1, 12, 0, 0, scale) and (values[1:] == 0).all()
    assert [index for index, _ in problems] == [1, 2, 3]
    assert all("out of range; allowed: 1900 to 2200" in message for _, message in problems)


def test_many_days_of_year_are_the_same_as_one_by_one(monkeypatch):
    """Every day of 2015 to 2017, and days that the year does not have; only what is no time takes the slow way."""
    from shiftfix.physics import timescales

    texts = [f"{y}-{d:03d}T{d % 24:02d}:{d % 60:02d}:07.{d:03d}Z" for y in (2015, 2016, 2017) for d in range(1, 367)]
    wanted = [tai_ns_from_utc(t) if t[:8] not in ("2015-366", "2017-366") else 0 for t in texts]
    spring = tai_ns_from_utc("2016-03-01T00:00:00Z")
    asked = []
    slow = timescales._parse
    monkeypatch.setattr(timescales, "_parse", lambda *a: asked.append(a[0]) or slow(*a))
    values, problems = tai_ns_from_texts([*texts, "2016-000T00:00:00Z", "2016-12aT00:00:00Z", "2016-03-01T00:00:00Z"])
    assert values[:-3].tolist() == wanted and values[-1] == spring
    assert [index for index, _ in problems] == [365, 1097, 1098, 1099]
    assert len(asked) == 4
