"""Angles as surveyors write them, and every way of writing that could mean two things."""

from __future__ import annotations

import pytest

from shiftfix_ingest.angles import angle_deg


@pytest.mark.parametrize(
    "text",
    [
        "-38.91 deg",
        "38.91 S",
        "38.91° S",
        "38 54.6 S",
        "38 54 36 S",
        "-38 54 36",
        "38°54'36\"S",
        "38d54m36s S",
        "38.91 deg S",
        "38:54:36 S",
        "38°54.6'S",
        "-2334.6 arcmin",
    ],
)
def test_ways_of_writing_one_latitude(text):
    assert angle_deg(text, "latitude") == pytest.approx(-38.91, abs=1e-12)


def test_hemispheres():
    assert angle_deg("23 7 12 W", "longitude") == pytest.approx(-23.12, abs=1e-12)
    assert angle_deg("23.12 E", "longitude") == 23.12
    assert angle_deg("5.5 N", "latitude") == 5.5
    assert angle_deg("-0 30", "latitude") == -0.5


@pytest.mark.parametrize(
    ("text", "axis", "words"),
    [
        ("38.91", "latitude", "bare number"),
        (38.91, "latitude", "bare number"),
        ("38.91 W", "latitude", "are latitude and longitude swapped?"),
        ("23.12 S", "longitude", "are latitude and longitude swapped?"),
        ("-38.91 S", "latitude", "sign and hemisphere together"),
        ("38 60 S", "latitude", "minutes below 60"),
        ("38 54 61 S", "latitude", "seconds below 60"),
        ("38.5 54 S", "latitude", "minutes below 60"),
        ("38 54.5 36 S", "latitude", "minutes below 60"),
        ("38.91 s", "latitude", "a quantity in s"),
        ("38,91 S", "latitude", "decimal comma"),
        ("38.91 m", "latitude", "a quantity in m"),
        ("", "latitude", "empty text"),
        (None, "latitude", "not a quantity"),
    ],
)
def test_what_could_mean_two_things_is_refused(text, axis, words):
    with pytest.raises(ValueError, match=words.replace("?", r"\?")):
        angle_deg(text, axis)
