"""Quantities: what is accepted, and fifty seeded unit mistakes that are caught before anything is solved."""

from __future__ import annotations

import pytest

from shiftfix.api import parse_quantity

GOOD = [
    ("437.2625 MHz", "Hz", 437.2625e6, None),
    ("158.3 MHz +/- 2 kHz", "Hz", 158.3e6, 2e3),
    ("158.3 +/- 0.1 MHz", "Hz", 158.3e6, 1e5),
    ("±0.5 ppm", "1", 0.0, 0.5e-6),
    ("3e-8 +/- 1e-8", "1", 3e-8, 1e-8),
    ("0.4 ppm ± 0.1", "1", 0.4e-6, 0.1e-6),
    ("10 ms", "s", 0.01, None),
    ("-38.91 deg", "deg", -38.91, None),
    ("12 kn", "m/s", 12 * 1852 / 3600, None),
    ("1e-11 1/s", "1/s", 1e-11, None),
    ("0 m", "m", 0.0, None),
    ("2 µs", "s", 2e-6, None),
    ("7%", "1", 0.07, None),
    ("1013.25 hPa", "Pa", 101325.0, None),
]

MISTAKES = [
    (437.2625e6, "Hz"),
    (5, "s"),
    (True, "Hz"),
    (None, "Hz"),
    (["5 Hz"], "Hz"),
    ("", "Hz"),
    ("437262500", "Hz"),
    ("MHz", "Hz"),
    ("5 m", "Hz"),
    ("5 MHZ", "Hz"),
    ("5 mhz", "Hz"),
    ("5 Mhz", "Hz"),
    ("5 khz", "Hz"),
    ("5 s", "Hz"),
    ("5 kHz/s", "Hz"),
    ("437,2625 MHz", "Hz"),
    ("1,000 Hz", "Hz"),
    ("5 Hz Hz", "Hz"),
    ("five Hz", "Hz"),
    ("5e Hz", "Hz"),
    ("0x10 Hz", "Hz"),
    ("nan Hz", "Hz"),
    ("inf Hz", "Hz"),
    ("5 Hz +/- 0 Hz", "Hz"),
    ("5 Hz +/- -1 Hz", "Hz"),
    ("5 Hz +/- 1 m", "Hz"),
    ("5 Hz +/-", "Hz"),
    ("5 Hz +/- 1 Hz +/- 1 Hz", "Hz"),
    ("10", "s"),
    ("10 sec", "s"),
    ("10 S", "s"),
    ("10 M", "m"),
    ("10 metres", "m"),
    ("10 ft", "m"),
    ("10 nm", "m"),
    ("10 km/s", "m"),
    ("10 m", "m/s"),
    ("10 kmh", "m/s"),
    ("10 knots", "m/s"),
    ("38 N", "deg"),
    ("38° 12'", "deg"),
    ("38 12", "deg"),
    ("0.5 ppm", "Hz"),
    ("0.5 PPM", "1"),
    ("3 dB", "1"),
    ("3 Hz", "1"),
    ("20 C", "K"),
    ("1013 mbar", "Pa"),
    ("1e-11", "1/s"),
    ("1e-11 1/day", "1/s"),
    ("40 dB", "dBHz"),
]


@pytest.mark.parametrize(("text", "unit", "value", "sigma"), GOOD)
def test_value_and_sigma_in_si(text, unit, value, sigma):
    found = parse_quantity(text, unit, sigma_allowed=True)
    assert found.value == pytest.approx(value, rel=1e-15)
    assert found.sigma == (None if sigma is None else pytest.approx(sigma, rel=1e-12))


@pytest.mark.parametrize(("text", "unit"), MISTAKES)
def test_mistake_is_refused_with_what_is_allowed(text, unit):
    with pytest.raises(ValueError) as caught:
        parse_quantity(text, unit, sigma_allowed=True)
    message = str(caught.value)
    assert "\n" not in message and len(message) > 15


def test_there_are_fifty_mistakes_and_sigma_must_be_allowed():
    assert len(MISTAKES) >= 50
    with pytest.raises(ValueError, match="not allowed here"):
        parse_quantity("5 Hz +/- 1 Hz", "Hz")
    with pytest.raises(ValueError, match="did you mean MHz"):
        parse_quantity("5 MHZ", "Hz")
    with pytest.raises(ValueError, match="a quantity in m; needed is one in Hz"):
        parse_quantity("5 km", "Hz")
