"""Potential of the Earth: sizes, gradient against differences, agreement with the force field."""

import numpy as np
import pytest

from shiftfix.physics.constants import GM_EARTH_M3_S2, SPEED_OF_LIGHT_M_S, W0_M2_S2
from shiftfix.physics.geodesy import itrs_from_geodetic
from shiftfix.physics.gravity import earth_potential, earth_potential_gradient, earth_potential_rate

OMEGA = 7.292115e-5


def test_geopotential_on_the_ellipsoid_is_that_of_the_geoid():
    """w + rotation is W0 = 62636856.0 m2/s2 (IERS Conventions 2010, table 1.1); J4 makes 2.5e-6 of it."""
    position = itrs_from_geodetic(np.radians(np.arange(-90.0, 91.0, 15.0)), 0.3, 0.0)
    total = earth_potential(position) + 0.5 * OMEGA**2 * (position[:, 0] ** 2 + position[:, 1] ** 2)
    assert np.abs(total / W0_M2_S2 - 1).max() < 3e-6
    assert np.abs(total - W0_M2_S2).max() / SPEED_OF_LIGHT_M_S**2 < 2e-15


def test_gradient_of_the_monopole_and_the_size_of_what_it_leaves_out():
    random = np.random.default_rng(1)
    x = random.standard_normal((50, 3))
    x = x / np.linalg.norm(x, axis=1)[:, None] * random.uniform(6.4e6, 4.2e7, 50)[:, None]
    h = 1.0
    rate = np.stack([(earth_potential(x + h * a) - earth_potential(x - h * a)) / (2 * h) for a in np.eye(3)], axis=1)
    size = np.linalg.norm(rate, axis=1)
    assert (np.linalg.norm(rate - earth_potential_gradient(x), axis=1) / size).max() < 5e-3
    far = x * 30.0
    assert earth_potential_gradient(far) == pytest.approx(
        -GM_EARTH_M3_S2 * far / np.linalg.norm(far, axis=1)[:, None] ** 3, rel=1e-14
    )


def test_rate_along_a_motion_has_the_flattening():
    """Richardson differences over 1 and 2 s; the flattening alone makes 1e-3 of the rate."""
    random = np.random.default_rng(2)
    x, v = random.standard_normal((2, 50, 3))
    x = x / np.linalg.norm(x, axis=1)[:, None] * random.uniform(6.4e6, 4.2e7, 50)[:, None]
    v = v / np.linalg.norm(v, axis=1)[:, None] * 5e3
    near, far = ((earth_potential(x + h * v) - earth_potential(x - h * v)) / (2.0 * h) for h in (1.0, 2.0))
    size = 5e3 * GM_EARTH_M3_S2 / np.sum(x * x, axis=1)
    # Rounding of w (1e-8 m2/s2) over 1 s
    assert (np.abs(earth_potential_rate(x, v) - (4.0 * near - far) / 3.0) / size).max() < 1e-10
    assert (np.abs(earth_potential_rate(x, v) - np.sum(earth_potential_gradient(x) * v, axis=1)) / size).max() > 5e-4


def test_flattening_lowers_the_potential_at_the_poles():
    pole, equator = earth_potential(np.array([[0.0, 0.0, 7e6], [7e6, 0.0, 0.0]]))
    monopole = GM_EARTH_M3_S2 / 7e6
    assert pole < monopole < equator
    assert (pole - monopole) / (equator - monopole) == pytest.approx(-2.0, rel=1e-9)


def test_any_leading_axes():
    assert earth_potential(np.ones((2, 5, 3)) * 7e6).shape == (2, 5)
    assert earth_potential_gradient(np.ones((2, 5, 3)) * 7e6).shape == (2, 5, 3)
    assert earth_potential_rate(np.ones((2, 5, 3)) * 7e6, np.ones(3)).shape == (2, 5)
    assert np.ndim(earth_potential(np.array([7e6, 0.0, 0.0]))) == 0
