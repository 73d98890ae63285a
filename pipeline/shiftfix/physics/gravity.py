"""Gravitational potential for clock rates: Earth monopole and J2, positive sign convention w = GM/r + ..."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.constants import EARTH_RADIUS_M, GM_EARTH_M3_S2, J2_1


def earth_potential(position_m: np.ndarray) -> np.ndarray:
    """Return w [m2/s2] at geocentric positions (..., 3); the celestial z axis stands for the figure axis.

    The pole of the GCRS lies within 0.15 deg of the figure axis in this century: below 1e-16 in w/c**2. Higher
    harmonics are below 3e-15 of c**2 in low orbits, tides below 1e-16 (IERS Conventions 2010, ch. 10).
    """
    x = np.asarray(position_m, float)
    square = np.einsum("...i,...i->...", x, x)
    r = np.sqrt(square)
    shape = 0.5 * J2_1 * EARTH_RADIUS_M**2 / square * (1.0 - 3.0 * x[..., 2] ** 2 / square)
    return GM_EARTH_M3_S2 / r * (1.0 + shape)


def earth_potential_rate(position_m: np.ndarray, velocity_m_s: np.ndarray) -> np.ndarray:
    """Return dw/dt [m2/s3] along a motion, flattening included; positions and velocities (..., 3)."""
    x, v = np.asarray(position_m, float), np.asarray(velocity_m_s, float)
    square = np.einsum("...i,...i->...", x, x)
    rising = np.einsum("...i,...i->...", x, v) / square
    flat = 0.5 * J2_1 * EARTH_RADIUS_M**2 / square
    height = x[..., 2] ** 2 / square
    tilting = x[..., 2] * v[..., 2] / square - height * rising
    return -GM_EARTH_M3_S2 / np.sqrt(square) * (rising * (1.0 + 3.0 * flat * (1.0 - 3.0 * height)) + 6.0 * flat * tilting)


def earth_potential_gradient(position_m: np.ndarray) -> np.ndarray:
    """Return the gradient of the monopole part of w [m/s2], (..., 3).

    Used in partial derivatives, where the J2 part (1e-3 of it) is below 1e-8 of the whole.
    """
    x = np.asarray(position_m, float)
    square = np.einsum("...i,...i->...", x, x)
    return -GM_EARTH_M3_S2 * x / (square * np.sqrt(square))[..., None]
