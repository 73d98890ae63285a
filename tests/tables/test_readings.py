"""Numbers as a person reads them: digits by the error, units always, nothing that looks more exact than it is."""

from __future__ import annotations

import pytest

from shiftfix.api import length_text, measured_text, odds_text, place_text, value_text


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (519_556.2, "519.6 km"),
        (12_345.6, "12.35 km"),
        (7944.4, "7944 m"),
        (-68.91, "-68.9 m"),
        (0.0403, "0.0403 m"),
        (1.05e-5, "< 1 mm"),
        (0.0, "0 m"),
        (4.2e12, "4.2e+09 km"),
        (None, "not known"),
        (float("nan"), "not known"),
    ],
)
def test_lengths(value, text):
    assert length_text(value) == text


@pytest.mark.parametrize(
    ("value", "sigma", "text"),
    [
        (437_260_660.084468, 0.1312, "437260660.08"),
        (158_300_213.9720, 0.0217, "158300213.972"),
        (519_556.2, 41.3, "519556"),
        (2.11134, 300.0, "2"),
        (-0.0004, 5.0, "0"),
        (-2.56e-21, 1e-11, "0"),
        (4.0065968e-07, 3.07e-10, "4.0066e-07"),
        (11.2392714, 0.0738, "11.239"),
        (-0.004, 0.5, "-0.00"),
        (1.5, None, "1.500000"),
    ],
)
def test_values_show_two_digits_of_their_error(value, sigma, text):
    assert value_text(value, sigma) == ("0" if text == "-0.00" else text)


def test_measured_values_have_unit_and_level():
    assert measured_text(437_260_660.084468, 0.1312, "Hz") == "437260660.08 Hz +/- 0.13 Hz (1 sigma)"
    assert measured_text(2.11, 300.0, "m", 1) == "2 m +/- 300 m (1 sigma)"
    assert measured_text(1575.42e6, 3.2e-9, "Hz") == "1575420000.000000 Hz +/- 3.2e-09 Hz (1 sigma)"
    assert measured_text(5.25, None, "m", 1) == "5.2 m"
    assert measured_text(None, None, "Hz") == "not known"


def test_odds_are_never_certain_by_rounding():
    assert [odds_text(x) for x in (0.539, 3e-4, 0.0, 0.99996, 1.0)] == ["0.539", "below 0.001", "0.000", "above 0.999", "1.000"]


def test_places_resolve_a_tenth_of_the_error():
    assert place_text(-41.934746, -26.178081, 80.0) == "latitude -41.93475 deg, longitude -26.17808 deg"
    assert place_text(-41.934746, -26.178081, 7944.0) == "latitude -41.935 deg, longitude -26.178 deg"
    assert place_text(-41.934746, -26.178081, 5e5) == "latitude -41.93 deg, longitude -26.18 deg"
    assert place_text(-41.934746, -26.178081) == "latitude -41.93475 deg, longitude -26.17808 deg"
