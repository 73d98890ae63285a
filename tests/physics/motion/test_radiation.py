"""Light and shadow, and the pull of Sun and Moon."""

import erfa
import numpy as np
import pytest

from shiftfix.physics.constants import AU_M
from shiftfix.physics.motion.bodies import SunMoon, tidal_acceleration
from shiftfix.physics.motion.radiation import lit_fraction, radiation_acceleration

SUN = AU_M * np.array([1.0, 0.0, 0.0])


def seen_by_counting(position, sun):
    """Share of points of the Sun's disc from which the line to the satellite clears the sphere of the Earth."""
    k = np.arange(40000)
    radius, angle = 6.957e8 * np.sqrt((k + 0.5) / k.size), k * 2.399963229728653
    points = sun + np.outer(radius * np.cos(angle), [0, 1, 0]) + np.outer(radius * np.sin(angle), [0, 0, 1])
    line = points - position
    along = np.clip(-(line @ position) / np.sum(line * line, axis=1), 0.0, 1.0)
    nearest = np.linalg.norm(position + along[:, None] * line, axis=1)
    return np.mean(nearest > 6378137.0)


@pytest.mark.parametrize("depth_m, height_m", [(-2.0e4, 7e6), (3e3, 7e6), (1.5e4, 7e6), (6e4, 26.6e6), (-5e4, 42.2e6)])
def test_penumbra_against_counted_rays(depth_m, height_m):
    across = 6378137.0 - depth_m
    position = np.array([-np.sqrt(height_m**2 - across**2), 0.6 * across, 0.8 * across])
    # The straight limb: up to 1.5 % at 42 000 km, 0.1 % low.
    assert lit_fraction(position, SUN) == pytest.approx(seen_by_counting(position, SUN), abs=0.016)


def test_full_light_and_full_shadow():
    assert lit_fraction(np.array([-7e6, 1e5, 2e5]), SUN) == 0.0
    assert lit_fraction(np.array([7e6, 1e5, 2e5]), SUN) == 1.0
    assert lit_fraction(np.array([-7e6, 6.5e6, 0.0]), SUN) == 1.0


def test_radiation_pushes_away_from_the_sun_and_falls_with_the_square():
    near = radiation_acceleration(np.array([[1e7, 2e7, 0.0]]), SUN[None], 1e-7)[0]
    assert near[0] == pytest.approx(-1e-7, rel=2e-4)
    far = radiation_acceleration(-SUN[None], SUN[None], 1e-7)[0]
    assert np.linalg.norm(far) == pytest.approx(2.5e-8, rel=1e-12)


def test_tidal_acceleration_and_gradient():
    """The pull of the Moon at 26 600 km is 5e-6 m/s2 at most (textbook: of the order of 5e-6 at this height)."""
    moon = np.array([[3.0e8, -2.0e8, 1.1e8]])
    at = np.array([[2.1e7, 1.2e7, -0.9e7]])
    acceleration, gradient = tidal_acceleration(at, moon, 4.9028e12)
    to_moon = moon[0] - at[0]
    expected = 4.9028e12 * (to_moon / np.linalg.norm(to_moon) ** 3 - moon[0] / np.linalg.norm(moon[0]) ** 3)
    assert acceleration[0] == pytest.approx(expected, rel=1e-12)
    assert np.linalg.norm(acceleration) < 1e-5
    for axis in range(3):
        shift = 1e3 * np.eye(3)[axis]
        up = tidal_acceleration(at + shift, moon, 4.9028e12)[0] - tidal_acceleration(at - shift, moon, 4.9028e12)[0]
        assert gradient[0, :, axis] == pytest.approx(up[0] / 2e3, rel=1e-6, abs=1e-20)


def test_splined_bodies_are_those_of_the_series(epoch_tai_ns):
    bodies = SunMoon(epoch_tai_ns, (-4000.0, 90000.0))
    times = np.array([-3999.0, 0.0, 12345.6, 89999.0])
    sun, moon = bodies.positions(times)
    fraction = (epoch_tai_ns / 1e9 + 32.184 + times) / 86400.0
    earth, _ = erfa.epv00(2440587.5, fraction)
    assert np.abs(sun + AU_M * earth["p"]).max() < 1.0
    assert np.abs(moon - AU_M * erfa.moon98(2440587.5, fraction)["p"]).max() < 0.5
    # 2021-01-01: near perihelion (2021-01-02, 0.983257 au: almanac, from memory).
    assert np.linalg.norm(sun[1]) / AU_M == pytest.approx(0.98326, abs=2e-5)
