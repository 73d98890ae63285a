"""Pressure of sunlight on a sphere, with the Earth's shadow."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.constants import AU_M, WGS84_A_M

SUN_RADIUS_M = 6.957e8
"""Nominal solar radius, IAU 2015 resolution B3."""

SHADOW_RADIUS_M = WGS84_A_M
"""Radius of the Earth that throws the shadow: the equatorial one of WGS84. The flattening moves an edge by up to 21 km,
the atmosphere by some 20 km: up to 5 s of a LEO pass through the edge, 5e-7 m/s for the nominal acceleration."""


def limb_angle(position: np.ndarray, sun: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the angle from the Earth's limb up to the Sun's centre [rad], and the Sun's radius [rad].

    Parameters
    ----------
    position, sun : ndarray (..., 3)
        Satellite and Sun, geocentric [m].
    """
    to_sun = sun - position
    distance = np.sqrt(np.einsum("...i,...i->...", to_sun, to_sun))
    radius = np.sqrt(np.einsum("...i,...i->...", position, position))
    cosine = -np.einsum("...i,...i->...", position, to_sun) / (radius * distance)
    separation = np.arccos(np.clip(cosine, -1.0, 1.0))
    return separation - np.arcsin(np.minimum(SHADOW_RADIUS_M / radius, 1.0)), SUN_RADIUS_M / distance


def lit_fraction(position: np.ndarray, sun: np.ndarray) -> np.ndarray:
    """Return the part of the Sun's disc that is seen, 0 to 1.

    The Earth's limb is taken as straight where it crosses the Sun's disc: exact at both ends of the penumbra, wrong by
    up to 1.5 % of the disc inside it at geostationary height, 0.1 % in LEO.

    Parameters
    ----------
    position, sun : ndarray (..., 3)
        Satellite and Sun, geocentric [m].
    """
    angle, sun_radius = limb_angle(position, sun)
    x = np.clip(angle / sun_radius, -1.0, 1.0)
    return 1.0 - (np.arccos(x) - x * np.sqrt(1.0 - x * x)) / np.pi


def radiation_acceleration(position: np.ndarray, sun: np.ndarray, reference_m_s2: float) -> np.ndarray:
    """Return the acceleration (k, 3) [m/s2] in full light, `reference_m_s2` being its size at 1 au from the Sun."""
    away = position - sun
    square = np.einsum("ki,ki->k", away, away)
    return away * (reference_m_s2 * AU_M**2 / (square * np.sqrt(square)))[:, None]
