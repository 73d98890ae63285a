"""Displacement of ground stations by the solid-Earth tide of Sun and Moon."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.constants import EARTH_RADIUS_M, GM_EARTH_M3_S2, GM_MOON_M3_S2, GM_SUN_M3_S2

LOVE_H2, SHIDA_L2 = 0.6078, 0.0847  # nominal degree-2 numbers, IERS Conventions 2010, table 7.2
LOVE_H3, SHIDA_L3 = 0.292, 0.015  # degree 3, Moon only


def solid_earth_tide(station_m: np.ndarray, sun_m: np.ndarray, moon_m: np.ndarray) -> np.ndarray:
    """Return the displacement [m] of stations, all vectors in one geocentric frame, shapes (..., 3).

    Notes
    -----
    Degree 2 of both bodies and degree 3 of the Moon with nominal numbers (IERS Conventions 2010, eq. 7.5 and 7.6), of up
    to 0.4 m. Left out: latitude dependence, phase lags and frequency corrections (step 1 remainder and step 2), together
    below 15 mm and slower than the arcs that are solved here. The permanent part is kept, as in ITRF.
    """
    size = np.sqrt(np.einsum("...i,...i->...", station_m, station_m))
    up = station_m / size[..., None]
    out = np.zeros(np.broadcast_shapes(station_m.shape, sun_m.shape))
    for body, gm, third in ((sun_m, GM_SUN_M3_S2, False), (moon_m, GM_MOON_M3_S2, True)):
        distance = np.sqrt(np.einsum("...i,...i->...", body, body))
        toward = body / distance[..., None]
        c = np.einsum("...i,...i->...", toward, up)[..., None]
        aside = toward - c * up
        ratio = (gm / GM_EARTH_M3_S2 * EARTH_RADIUS_M * (EARTH_RADIUS_M / distance) ** 3)[..., None]
        out = out + ratio * (LOVE_H2 * up * (1.5 * c**2 - 0.5) + 3.0 * SHIDA_L2 * c * aside)
        if third:
            ratio = ratio * (EARTH_RADIUS_M / distance)[..., None]
            out = out + ratio * (
                LOVE_H3 * up * (2.5 * c**3 - 1.5 * c) + SHIDA_L3 * (7.5 * c**2 - 1.5) * aside
            )
    return out
