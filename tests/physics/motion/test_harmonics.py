"""The Earth's field against finite differences of its potential, written with Legendre functions of scipy."""

from math import factorial

import numpy as np
import pytest
from scipy.special import lpmv

from shiftfix.physics.motion.harmonics import EGM2008_COEFFICIENTS, EarthField, earth_field

GM, RADIUS = 3.986004415e14, 6378136.3


def potential(position, degree, zonal_degree):
    """Return the potential [m2/s2] at positions (..., 3) by the textbook series in latitude and longitude."""
    radius = np.linalg.norm(position, axis=-1)
    sine = position[..., 2] / radius
    longitude = np.arctan2(position[..., 1], position[..., 0])
    total = np.ones_like(radius)
    for n, m, c, s in EGM2008_COEFFICIENTS:
        if n <= degree or (m == 0 and n <= zonal_degree):
            norm = np.sqrt((2 - (m == 0)) * (2 * n + 1) * factorial(n - m) / factorial(n + m))
            legendre = (-1) ** m * lpmv(m, n, sine)  # without the Condon-Shortley sign
            angle = m * longitude
            total = total + norm * (RADIUS / radius) ** n * legendre * (c * np.cos(angle) + s * np.sin(angle))
    return GM / radius * total


POINTS = np.array(
    [
        [6.6e6, 1.3e6, -2.1e6],
        [-1.2e6, 4.4e6, 5.9e6],
        [2.6e6, -2.2e7, 1.4e7],
        [-6.9e6, -8.0e5, 3.0e5],
        [3.0e2, -2.0e2, 7.1e6],  # within 400 m of the axis
        [5.0e6, 5.0e6, -1.0e6],
    ]
)


@pytest.mark.parametrize("degree, zonal_degree", [(0, 0), (0, 2), (2, 4), (3, 6), (4, 6)])
def test_attraction_is_the_gradient_of_the_potential(degree, zonal_degree):
    acceleration, _ = EarthField(degree, zonal_degree).attraction(POINTS)
    # Five-point stencil: rounding 6e7 * 1e-16 / 500 m = 1e-11 m/s2 dominates.
    step = 500.0
    for axis in range(3):
        shift = step * np.eye(3)[axis]
        values = [potential(POINTS + k * shift, degree, zonal_degree) for k in (-2, -1, 1, 2)]
        numeric = (values[0] - 8 * values[1] + 8 * values[2] - values[3]) / (12 * step)
        assert np.abs(acceleration[:, axis] - numeric).max() < 5e-10


def test_gradient_is_the_derivative_of_the_attraction():
    field = EarthField(4, 6)
    _, gradient = field.attraction(POINTS)
    step = 20.0
    for axis in range(3):
        shift = step * np.eye(3)[axis]
        numeric = (field.attraction(POINTS + shift)[0] - field.attraction(POINTS - shift)[0]) / (2 * step)
        assert np.abs(gradient[:, :, axis] - numeric).max() < 1e-15 / step * 20 + 1e-16 + 3e-11 * 3e-6
    assert np.abs(np.trace(gradient, axis1=1, axis2=2)).max() < 1e-20  # Laplace's equation
    assert np.array_equal(gradient, gradient.transpose(0, 2, 1))


def test_published_coefficients():
    """EGM2008 tide-free: J2 1.0826261739e-3 from C20, triaxiality of the equator (Pavlis et al. 2012)."""
    by_order = {(n, m): (c, s) for n, m, c, s in EGM2008_COEFFICIENTS}
    assert -np.sqrt(5.0) * by_order[2, 0][0] == pytest.approx(1.0826261739e-3, abs=1e-13)
    assert by_order[2, 2] == (0.2439383573283130e-5, -0.1400273703859340e-5)
    assert by_order[3, 0][0] == 0.957161207093473e-6
    assert by_order[4, 0][0] == pytest.approx(0.539965866638991e-6, abs=1e-21)
    # J5 and J6 are from memory: -2.28e-7 and 5.41e-7 in every model since the 1970s.
    assert -np.sqrt(11.0) * by_order[5, 0][0] == pytest.approx(-2.28e-7, abs=1e-9)
    assert -np.sqrt(13.0) * by_order[6, 0][0] == pytest.approx(5.41e-7, abs=1e-9)


def test_degrees_out_of_range_are_refused_and_fields_are_shared():
    with pytest.raises(ValueError, match=r"allowed 0\.\.4 and 0\.\.6"):
        EarthField(5, 6)
    assert earth_field(4, 6) is earth_field(4, 6)
    assert earth_field(4, 0).needs_rotation and not earth_field(0, 6).needs_rotation
