"""Harris-Priester density: the table, its interpolation, its derivatives."""

import numpy as np
import pytest

from shiftfix.physics.motion.atmosphere import bulge_direction, density


@pytest.mark.parametrize(
    "height_km, night_g_km3, day_g_km3",
    # Long et al. 1989 as printed in the sources: below 300 km published, above from memory.
    [(200, 255.7, 316.2), (290, 21.39, 42.26), (400, 2.249, 7.492), (500, 0.3916, 2.042), (800, 0.007069, 0.08059)],
)
def test_tabled_densities(height_km, night_g_km3, day_g_km3):
    at = np.array([1e3 * height_km])
    assert density(at, np.array([-1.0]), 4.0)[0] == pytest.approx(1e-12 * night_g_km3, rel=1e-12)
    assert density(at, np.array([1.0]), 4.0)[0] == pytest.approx(1e-12 * day_g_km3, rel=1e-12)


def test_between_rows_and_between_night_and_day():
    at = np.array([410e3])
    night, day = np.sqrt(2.249 * 1.558), np.sqrt(7.492 * 5.684)  # half-way in height: geometric mean
    for exponent in (2.0, 4.0, 6.0):
        angle = np.radians(50.0)
        expected = night + (day - night) * np.cos(angle / 2) ** exponent
        assert density(at, np.array([np.cos(angle)]), exponent)[0] == pytest.approx(1e-12 * expected, rel=1e-12)


def test_derivatives():
    height, cosine = np.array([153e3, 415e3, 777e3]), np.array([0.2, -0.5, 0.9])
    _, per_height, per_cosine = density(height, cosine, 3.0)
    up = density(height + 1.0, cosine, 3.0)[0] - density(height - 1.0, cosine, 3.0)[0]
    toward = density(height, cosine + 1e-5, 3.0)[0] - density(height, cosine - 1e-5, 3.0)[0]
    assert per_height == pytest.approx(up / 2.0, rel=1e-7)
    assert per_cosine == pytest.approx(toward / 2e-5, rel=1e-7)


def test_nothing_above_the_table_and_finite_below_it():
    values = np.array(density(np.array([-5e6, 0.0, 9e4, 1.2e6]), np.full(4, 0.3), 4.0))
    assert np.isfinite(values).all()
    assert (values[:, 3] == 0.0).all()
    assert values[1, 0] == 0.0  # constant where nothing orbits


def test_the_bulge_follows_the_sun_by_thirty_degrees():
    sun = 1.5e11 * np.array([[np.cos(0.4) * np.cos(1.1), np.cos(0.4) * np.sin(1.1), np.sin(0.4)]])
    bulge = bulge_direction(sun)[0]
    assert np.arctan2(bulge[1], bulge[0]) == pytest.approx(1.1 + np.pi / 6)
    assert bulge[2] == pytest.approx(np.sin(0.4))
