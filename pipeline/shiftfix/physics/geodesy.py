"""Geodetic and Cartesian coordinates on the WGS84 ellipsoid, local axes, elevation and azimuth."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.constants import WGS84_A_M, WGS84_E2, WGS84_F


def prime_vertical_radius(latitude_rad: np.ndarray) -> np.ndarray:
    """Return the radius of curvature in the prime vertical [m]."""
    return WGS84_A_M / np.sqrt(1.0 - WGS84_E2 * np.sin(latitude_rad) ** 2)


def meridian_radius(latitude_rad: np.ndarray) -> np.ndarray:
    """Return the radius of curvature in the meridian [m]."""
    return WGS84_A_M * (1.0 - WGS84_E2) / (1.0 - WGS84_E2 * np.sin(latitude_rad) ** 2) ** 1.5


def itrs_from_geodetic(latitude_rad: np.ndarray, longitude_rad: np.ndarray, height_m: np.ndarray) -> np.ndarray:
    """Return ITRS Cartesian coordinates [m], shape (..., 3), of geodetic ones on WGS84."""
    latitude, longitude, height = np.broadcast_arrays(latitude_rad, longitude_rad, height_m)
    n = prime_vertical_radius(latitude)
    cosine = (n + height) * np.cos(latitude)
    return np.stack(
        [cosine * np.cos(longitude), cosine * np.sin(longitude), (n * (1.0 - WGS84_E2) + height) * np.sin(latitude)], axis=-1
    )


def geodetic_from_itrs(position_itrs_m: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return latitude [rad], longitude [rad] and ellipsoidal height [m] of ITRS positions, shape (..., 3).

    Notes
    -----
    Bowring's (1985) start and two Newton-like corrections of the reduced latitude: below 1e-9 m of height and 1e-15 rad
    from 100 km under the ellipsoid to 1e8 m above it. At the Earth's centre the latitude is arbitrary.
    """
    x, y, z = np.moveaxis(np.asarray(position_itrs_m, float), -1, 0)
    p = np.hypot(x, y)
    longitude = np.arctan2(y, x)
    b = WGS84_A_M * (1.0 - WGS84_F)
    second = WGS84_E2 / (1.0 - WGS84_E2)
    beta = np.arctan2(z * (1.0 + second * b / np.maximum(np.hypot(p, z), 1.0)), p * (1.0 - WGS84_F))
    for _ in range(3):
        latitude = np.arctan2(z + second * b * np.sin(beta) ** 3, p - WGS84_E2 * WGS84_A_M * np.cos(beta) ** 3)
        beta = np.arctan2((1.0 - WGS84_F) * np.sin(latitude), np.cos(latitude))
    sine, cosine = np.sin(latitude), np.cos(latitude)
    # Projection on the normal: good at the poles and at the equator alike.
    n = prime_vertical_radius(latitude)
    height = p * cosine + z * sine - n * (1.0 - WGS84_E2 * sine**2)
    return latitude, longitude, height


def enu_axes(latitude_rad: float, longitude_rad: float) -> np.ndarray:
    """Return east, north and up unit vectors as rows, shape (..., 3, 3), ITRS."""
    latitude, longitude = np.broadcast_arrays(latitude_rad, longitude_rad)
    sf, cf, sl, cl = np.sin(latitude), np.cos(latitude), np.sin(longitude), np.cos(longitude)
    zero = np.zeros_like(sf)
    rows = [np.stack([-sl, cl, zero], -1), np.stack([-sf * cl, -sf * sl, cf], -1), np.stack([cf * cl, cf * sl, sf], -1)]
    return np.stack(rows, -2)


def elevation_azimuth(receiver_itrs_m: np.ndarray, target_itrs_m: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return geometric elevation and azimuth (clockwise from north) [rad] of targets (n, 3) at one receiver (3,)."""
    latitude, longitude, _ = geodetic_from_itrs(receiver_itrs_m)
    local = (np.asarray(target_itrs_m) - receiver_itrs_m) @ enu_axes(latitude, longitude).T
    east, north, up = np.moveaxis(local, -1, 0)
    return np.arctan2(up, np.hypot(east, north)), np.arctan2(east, north) % (2 * np.pi)
