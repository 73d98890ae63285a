"""Two-body motion: energy, group property, orbits of every kind; textbook cases stand in tests/reference."""

import numpy as np
import pytest

from shiftfix.physics.kepler import elements_from_state, propagate

GM = 3.986004415e14


def orbits(count, seed):
    """Ellipses to hyperbolas with perigee above 6500 km, at any place of the orbit within 60 000 km or 0.9 asymptote."""
    random = np.random.default_rng(seed)
    e = np.concatenate([[0.0, 1e-9, 0.999999, 1.0, 1.000001], random.uniform(0, 0.9, count), random.uniform(1.05, 4, count)])
    q = random.uniform(6.5e6, 2e7, e.size)
    limit = np.where(e < 0.95, np.pi, 0.8 * np.arccos(-1 / np.maximum(e, 1.0)))
    limit = np.where(np.abs(e - 1) < 0.05, 2.0, limit)
    nu = random.uniform(-1, 1, e.size) * limit
    p = q * (1 + e)
    r = p / (1 + e * np.cos(nu))
    x = r[:, None] * np.stack([np.cos(nu), np.sin(nu), 0 * nu], 1)
    v = np.sqrt(GM / p)[:, None] * np.stack([-np.sin(nu), e + np.cos(nu), 0 * nu], 1)
    turns = np.linalg.qr(random.standard_normal((e.size, 3, 3)))[0]
    turns *= np.sign(np.linalg.det(turns))[:, None, None]
    return np.einsum("nij,nj->ni", turns, x), np.einsum("nij,nj->ni", turns, v), e, q, nu


def invariants(x, v):
    radius = np.linalg.norm(x, axis=-1)
    h = np.cross(x, v)
    return np.sum(v * v, -1) / 2 - GM / radius, h, np.cross(v, h) / GM - x / radius[..., None]


@pytest.mark.parametrize("span", [-86400.0, -300.0, 60.0, 5400.0, 86400.0])
def test_energy_momentum_and_direction_of_perigee_are_kept(span):
    x, v, _, q, _ = orbits(200, 1)
    moved = propagate(x, v, span, GM)
    before, after = invariants(x, v), invariants(*moved)
    assert (np.abs(after[0] - before[0]) / (GM / q)).max() < 1e-11
    assert (np.linalg.norm(after[1] - before[1], axis=1) / np.linalg.norm(before[1], axis=1)).max() < 1e-11
    assert np.abs(after[2] - before[2]).max() < 1e-10


def test_two_steps_are_one_and_back_is_home():
    x, v, _, _, _ = orbits(200, 2)
    once = propagate(x, v, 9000.0, GM)
    twice = propagate(*propagate(x, v, 4000.0, GM), 5000.0, GM)
    home = propagate(*once, -9000.0, GM)
    for a, b, scale in ((once, twice, 1.0), (home, (x, v), 1.0)):
        assert (np.linalg.norm(a[0] - b[0], axis=1) / np.linalg.norm(b[0], axis=1)).max() < 1e-10 * scale
        assert (np.linalg.norm(a[1] - b[1], axis=1) / np.linalg.norm(b[1], axis=1)).max() < 1e-10 * scale


def test_time_along_the_orbit_against_the_classical_equations():
    """Kepler's equation of ellipses and hyperbolas: time from perigee to the anomaly."""
    x, v, e, q, nu = orbits(200, 3)
    kind = np.abs(e - 1) > 0.05
    x, v, e, q, nu = (a[kind] for a in (x, v, e, q, nu))
    a = q / np.abs(1 - e)
    half = np.sqrt(np.abs(1 - e) / (1 + e)) * np.tan(nu / 2)
    ellipse = e < 1
    big = 2 * np.where(ellipse, np.arctan(half), np.arctanh(np.where(ellipse, 0, half)))
    since = np.sqrt(a**3 / GM) * np.where(ellipse, big - e * np.sin(big), e * np.sinh(np.where(ellipse, 0, big)) - big)
    at_perigee = propagate(x, v, -since, GM)
    assert (np.abs(np.linalg.norm(at_perigee[0], axis=1) / q - 1)).max() < 1e-9
    assert (np.abs(np.sum(at_perigee[0] * at_perigee[1], axis=1)) / np.sqrt(GM * q)).max() < 1e-7


def test_derivative_is_the_velocity_and_shapes_broadcast():
    x, v, _, _, _ = orbits(3, 4)
    times = np.linspace(-1000, 5000, 7)
    position, velocity = propagate(x[:, None], v[:, None], times, GM)
    assert position.shape == velocity.shape == (len(x), 7, 3)
    ahead, behind = (propagate(x[:, None], v[:, None], times + h, GM)[0] for h in (0.5, -0.5))
    assert np.abs(ahead - behind - velocity).max() < 2e-3
    assert np.abs(propagate(x, v, 0.0, GM)[0] - x).max() == 0.0


def test_elements_of_plain_orbits():
    """Circular equatorial orbits keep the limits; the period is 2 pi sqrt(a**3/GM)."""
    r = 7e6
    speed = np.sqrt(GM / r)
    flat = elements_from_state(np.array([0.0, r, 0.0]), np.array([-speed, 0.0, 0.0]), GM)
    assert flat["semi_major_axis_m"] == pytest.approx(r) and flat["eccentricity_1"] < 1e-15
    assert flat["inclination_rad"] == 0.0 and flat["anomaly_rad"] == pytest.approx(np.pi / 2)
    polar = elements_from_state(np.array([r, 0.0, 0.0]), np.array([0.0, 0.0, 1.2 * speed]), GM)
    assert polar["inclination_rad"] == pytest.approx(np.pi / 2)
    assert polar["eccentricity_1"] == pytest.approx(0.44) and polar["anomaly_rad"] == pytest.approx(0.0)
    back = elements_from_state(np.array([r, 0.0, 0.0]), np.array([0.0, -speed, 0.0]), GM)
    assert back["inclination_rad"] == pytest.approx(np.pi)
