"""Solid-Earth tide: the IERS case, symmetries, size."""

import numpy as np

from shiftfix.physics.tides import solid_earth_tide

STATION = np.array([4075578.385, 931852.890, 4801570.154])
SUN = np.array([137859926952.015, 54228127881.4350, 23509422341.6960])
MOON = np.array([-179996231.920342, -312468450.131567, -169288918.592160])


def test_iers_case_within_what_is_left_out():
    """IERS Conventions 2010, software DEHANTTIDEINEL, header, 2009-04-13.

    We keep h2, l2, h3, l3 with nominal numbers. The routine adds the latitude dependence of h2 and l2, the
    out-of-phase terms of step 1 (together about a millimetre) and the frequency corrections of step 2 (the K1 band alone
    reaches 12 mm radially at mid latitude, ibid. table 7.3a, from memory): below 6 mm a component, 7.4 mm in all here.
    """
    expected = np.array([0.07700420357108125891, 0.06304056321824967613, 0.05516568152597246810])
    apart = solid_earth_tide(STATION, SUN, MOON) - expected
    assert np.abs(apart).max() < 6e-3 and np.linalg.norm(apart) < 8e-3
    assert np.linalg.norm(expected) > 0.1


def test_degree_two_is_the_same_for_the_opposite_station_and_turns_with_the_frame():
    zero_moon = MOON * 1e6
    here, there = solid_earth_tide(STATION, SUN, zero_moon), solid_earth_tide(-STATION, SUN, zero_moon)
    assert np.abs(here + there).max() < 1e-16
    turn = np.linalg.qr(np.random.default_rng(1).standard_normal((3, 3)))[0]
    turned = solid_earth_tide(turn @ STATION, turn @ SUN, turn @ MOON)
    assert np.abs(turned - turn @ solid_earth_tide(STATION, SUN, MOON)).max() < 1e-15


def test_size_under_the_moon_and_beside_it():
    """h2 GM'/GM a**4/d**3: 0.22 m up below the Moon, half of it down where it stands on the horizon (degree 2 and 3)."""
    moon, sun = np.array([3.844e8, 0.0, 0.0]), np.array([0.0, 0.0, 1e16])
    below = solid_earth_tide(np.array([6.378e6, 0.0, 0.0]), sun, moon)
    beside = solid_earth_tide(np.array([0.0, 6.378e6, 0.0]), sun, moon)
    assert abs(below[0] - 0.2193) < 3e-3 and abs(below[1]) < 1e-12
    assert abs(beside[1] / below[0] + 0.5) < 0.01


def test_many_stations_at_once():
    many = solid_earth_tide(np.tile(STATION, (4, 1)), np.tile(SUN, (4, 1)), np.tile(MOON, (4, 1)))
    assert many.shape == (4, 3) and (many == solid_earth_tide(STATION, SUN, MOON)).all()
