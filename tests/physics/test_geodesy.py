"""Geodetic coordinates against ERFA and published positions; round trips; local axes."""

import erfa
import numpy as np
import pytest

from shiftfix.physics.constants import WGS84_A_M, WGS84_F
from shiftfix.physics.geodesy import (
    elevation_azimuth,
    enu_axes,
    geodetic_from_itrs,
    itrs_from_geodetic,
    meridian_radius,
    prime_vertical_radius,
)

POLAR_RADIUS_M = WGS84_A_M * (1.0 - WGS84_F)


def test_against_erfa_everywhere():
    random = np.random.default_rng(1)
    latitude, longitude = np.arcsin(random.uniform(-1, 1, 2000)), random.uniform(-np.pi, np.pi, 2000)
    height = random.uniform(-1e4, 1e7, 2000)
    position = itrs_from_geodetic(latitude, longitude, height)
    assert np.abs(position - erfa.gd2gc(1, longitude, latitude, height)).max() < 5e-9
    theirs = erfa.gc2gd(1, position)
    ours = geodetic_from_itrs(position)
    # ERFA takes one step of Fukushima's method: 3e-11 rad at these heights. Ours returns what it was given.
    assert np.abs(ours[0] - theirs[1]).max() < 5e-11 and np.abs(ours[0] - latitude).max() < 2e-15
    assert np.abs(ours[1] - theirs[0]).max() < 1e-15
    assert np.abs(ours[2] - theirs[2]).max() < 1e-8 and np.abs(ours[2] - height).max() < 1e-8


@pytest.mark.parametrize(("low", "high"), [(-1e5, 0.0), (0.0, 1e4), (1e4, 1e6), (1e6, 1e7), (1e7, 1e8)])
def test_round_trip(low, high):
    """1 mm is asked for to 10 000 km; rounding alone allows nanometres."""
    random = np.random.default_rng(2)
    latitude, longitude = random.uniform(-np.pi / 2, np.pi / 2, 5000), random.uniform(-np.pi, np.pi, 5000)
    position = itrs_from_geodetic(latitude, longitude, random.uniform(low, high, 5000))
    assert np.abs(itrs_from_geodetic(*geodetic_from_itrs(position)) - position).max() < 1e-7


def test_poles_and_equator():
    for sign in (1.0, -1.0):
        latitude, _, height = geodetic_from_itrs(np.array([0.0, 0.0, sign * (POLAR_RADIUS_M + 1.0)]))
        assert latitude == sign * np.pi / 2 and height == pytest.approx(1.0, abs=2e-9)
        latitude, longitude, height = geodetic_from_itrs(np.array([0.0, sign * (WGS84_A_M - 1.0), 0.0]))
        assert latitude == 0.0 and longitude == sign * np.pi / 2 and height == pytest.approx(-1.0, abs=2e-9)
    near = np.array([1e-6, 0.0, POLAR_RADIUS_M])
    assert np.abs(itrs_from_geodetic(*geodetic_from_itrs(near)) - near).max() < 2e-9


def test_latitude_is_reached_inside_the_earth():
    """At a tenth of the radius the normal is still met; the bound is that of three corrections there."""
    position = np.array([[0.1 * WGS84_A_M, 0.0, 0.1 * WGS84_A_M], [0.0, 0.1 * WGS84_A_M, 1.0], [0.0, 0.0, 0.0]])
    values = geodetic_from_itrs(position)
    assert all(np.isfinite(v).all() for v in values)


def test_radii_of_curvature_are_derivatives_of_position():
    """N cos(latitude) is the distance from the axis; M the arc of the meridian by latitude."""
    latitude, h = np.linspace(-1.5, 1.5, 13), 1e-4
    x = itrs_from_geodetic(latitude, 0.0, 0.0)
    assert np.abs(x[:, 0] - prime_vertical_radius(latitude) * np.cos(latitude)).max() < 1e-8
    arc = itrs_from_geodetic(latitude + h, 0.0, 0.0) - itrs_from_geodetic(latitude - h, 0.0, 0.0)
    assert np.linalg.norm(arc, axis=1) / (2 * h) == pytest.approx(meridian_radius(latitude), rel=1e-8)


def test_local_axes_and_elevation():
    latitude, longitude = -0.72, -0.47
    axes = enu_axes(latitude, longitude)
    assert np.abs(axes @ axes.T - np.eye(3)).max() < 1e-15 and np.linalg.det(axes) == pytest.approx(1.0)
    up = itrs_from_geodetic(latitude, longitude, 100.0) - itrs_from_geodetic(latitude, longitude, 0.0)
    assert np.abs(up / 100.0 - axes[2]).max() < 1e-9
    station = itrs_from_geodetic(latitude, longitude, 50.0)
    e, n, u = axes
    targets = station + 1e6 * np.array([u, e, n, -e, (n + u) / np.sqrt(2), (-n - e) / np.sqrt(2)])
    elevation, azimuth = elevation_azimuth(station, targets)
    assert np.degrees(elevation) == pytest.approx([90, 0, 0, 0, 45, 0], abs=1e-8)
    # The angle from the expected one, on the circle; the zenith has none
    apart = (np.degrees(azimuth[1:]) - [90, 0, 270, 0, 225] + 180.0) % 360.0 - 180.0
    assert np.abs(apart).max() < 1e-8 and (azimuth >= 0.0).all()
    alone = elevation_azimuth(station, targets[4])
    assert alone[0] == elevation[4] and alone[1] == azimuth[4]
