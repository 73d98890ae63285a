"""Text to numbers and times: nearest doubles, whole nanoseconds, and a reason for whatever is neither."""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.api import tai_ns_from_utc
from shiftfix_ingest.text_values import numbers, times, why_no_number


def array(*texts):
    return np.array(texts, dtype=object)


def test_numbers_are_the_nearest_doubles():
    """The decimal texts of random doubles come back bit by bit, alone and beside a field that is no number."""
    random = np.random.default_rng(3)
    values = random.uniform(1, 9, 5000) * 10.0 ** random.integers(-12, 12, 5000)
    texts = array(*(repr(float(v)) for v in values))
    assert np.array_equal(numbers(texts), values)
    assert np.array_equal(numbers(array(*texts, "x"))[:-1], values)
    commas = array(*(t.replace(".", ",") for t in texts))
    assert np.array_equal(numbers(commas, ","), values)


@pytest.mark.parametrize("text", ["", "x", "1_000", "1,5", "0x10", "1 000", "--5", "1e", "nan", "5 Hz"])
def test_what_is_no_number(text):
    assert np.isnan(numbers(array("7.5", text))[1]) and numbers(array("7.5", text))[0] == 7.5


def test_the_reason_names_the_remedy():
    assert why_no_number("") == "is empty"
    assert 'say decimal = ","' in why_no_number("1,5")
    assert "has a point" in why_no_number("1.5", ",") and np.isnan(numbers(array("1.5"), ",")[0])
    assert why_no_number("abc") == why_no_number("abc", ",") == "is not a finite number: 'abc'"


def test_posix_counts_skip_leap_seconds():
    """1483228799 is the last whole second of 2016 before its leap second, 1483228800 the first of 2017 (POSIX.1, 4.16)."""
    out, reasons = times({"time": array("1483228799.5", "1483228800.25")}, time_format="posix", scale="UTC")
    assert not reasons
    assert out.tolist() == [tai_ns_from_utc("2016-12-31T23:59:59.5Z"), tai_ns_from_utc("2017-01-01T00:00:00.25Z")]
    assert out[1] - out[0] == 1_750_000_000
    milli, _ = times({"time": array("1483228800250")}, time_format="posix", scale="UTC", unit="ms")
    assert milli[0] == out[1]


def test_counts_keep_every_nanosecond():
    """A double of 1.77e9 s has steps of 240 ns; the text has none."""
    out, _ = times({"time": array("1772366400.123456789", "1772366400.123456788")}, time_format="posix", scale="UTC")
    assert out[0] - out[1] == 1 and out[0] % 10**9 == 123456789


def test_gps_weeks():
    """Second 43200 of week 2408 is 2026-03-01T12:00:00 GPS, 18 s ahead of UTC (week 0 began 1980-01-06)."""
    columns = {"week": array("2408", "2408.5", "2408", "-1", "x"), "time": array("43200.5", "0", "604800", "5", "7")}
    out, reasons = times(columns, time_format="gps", scale="GPS")
    assert out[0] == tai_ns_from_utc("2026-03-01T11:59:42.5Z")
    assert sorted(reasons) == [1, 2, 3, 4] and (out[1:] == 0).all()
    assert "week '2408.5'" in reasons[1] and "'604800'" in reasons[2]


def test_date_and_time_in_two_columns():
    columns = {"date": array("2026-03-01", "2026-060"), "time": array("12:00:00.5Z", "12:00:00.5Z")}
    out, reasons = times(columns, time_format="iso", scale="UTC")
    assert not reasons and out[0] == out[1] == tai_ns_from_utc("2026-03-01T12:00:00.5Z")


def test_utc_without_z_must_be_asked_for():
    columns = {"time": array("2026-03-01T12:00:00.5")}
    assert "must end in Z" in times(columns, time_format="iso", scale="UTC")[1][0]
    out, reasons = times(columns, time_format="iso", scale="UTC", require_z=False)
    assert not reasons and out[0] == tai_ns_from_utc("2026-03-01T12:00:00.5Z")


def test_the_leap_second_itself_is_read():
    """2016-12-31T23:59:60.5Z (IERS Bulletin C 52) lies half a second before 2017."""
    out, _ = times({"time": array("2016-12-31T23:59:60.5Z", "2017-01-01T00:00:00Z")}, time_format="iso", scale="UTC")
    assert out[1] - out[0] == 500_000_000


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "time is empty"),
        ("inf", "not a finite number"),
        ("1e300", "too large for a count"),
        ("9500000000", "too large for a count"),
        ("1e999999999", "not a finite number"),
        ("63071999", "before 1972"),
        ("12:00:00", "not a finite number"),
    ],
)
def test_counts_that_are_no_times(text, words):
    out, reasons = times({"time": array("1772366400", text)}, time_format="posix", scale="UTC")
    assert words in reasons[1] and out[1] == 0 and out[0] > 0
