"""Density of the upper atmosphere after Harris and Priester, for mean solar activity."""

from __future__ import annotations

import numpy as np

# Height [km], density at night and at the day bulge [g/km3], mean solar activity: A. C. Long et al., Goddard Trajectory
# Determination System, FDD/552-89/001 (1989); to 290 km compared with public listings, above it from memory.
_TABLE = np.array(
    [
        (100, 497400.0, 497400.0),
        (120, 24900.0, 24900.0),
        (130, 8377.0, 8710.0),
        (140, 3899.0, 4059.0),
        (150, 2122.0, 2215.0),
        (160, 1263.0, 1344.0),
        (170, 800.8, 875.8),
        (180, 528.3, 601.0),
        (190, 361.7, 429.7),
        (200, 255.7, 316.2),
        (210, 183.9, 239.6),
        (220, 134.1, 185.3),
        (230, 99.49, 145.5),
        (240, 74.88, 115.7),
        (250, 57.09, 93.08),
        (260, 44.03, 75.55),
        (270, 34.30, 61.82),
        (280, 26.97, 50.95),
        (290, 21.39, 42.26),
        (300, 17.08, 35.26),
        (320, 10.99, 25.11),
        (340, 7.214, 18.19),
        (360, 4.824, 13.37),
        (380, 3.274, 9.955),
        (400, 2.249, 7.492),
        (420, 1.558, 5.684),
        (440, 1.091, 4.355),
        (460, 0.7701, 3.362),
        (480, 0.5474, 2.612),
        (500, 0.3916, 2.042),
        (520, 0.2819, 1.605),
        (540, 0.2042, 1.267),
        (560, 0.1488, 1.005),
        (580, 0.1092, 0.7997),
        (600, 0.08070, 0.6390),
        (620, 0.06012, 0.5123),
        (640, 0.04519, 0.4121),
        (660, 0.03430, 0.3325),
        (680, 0.02632, 0.2691),
        (700, 0.02043, 0.2185),
        (720, 0.01607, 0.1779),
        (740, 0.01281, 0.1452),
        (760, 0.01036, 0.1190),
        (780, 0.008496, 0.09776),
        (800, 0.007069, 0.08059),
        (840, 0.004680, 0.05741),
        (880, 0.003200, 0.04210),
        (920, 0.002210, 0.03130),
        (960, 0.001560, 0.02360),
        (1000, 0.001150, 0.01810),
    ]
)
_HEIGHT_M = 1e3 * _TABLE[:, 0]
_LOG_DENSITY = np.log(1e-12 * _TABLE[:, 1:].T)
_SLOPE_1_M = np.diff(_LOG_DENSITY, axis=1) / np.diff(_HEIGHT_M)

TOP_M = 1.0e6
"""Height above which the density is taken as zero: below 2e-14 kg/m3, 2e-11 m/s2 on a usual satellite."""

BULGE_LAG_RAD = np.radians(30.0)
"""Right ascension by which the day bulge follows the Sun (common practice)."""


def density(
    height_m: np.ndarray, bulge_cosine: np.ndarray, exponent: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the density and its derivatives along the vertical and with the cosine of the bulge angle.

    The tabled densities are interpolated exponentially in height; below 100 km, where nothing orbits, the density stays
    that of 100 km.

    Parameters
    ----------
    height_m : ndarray (k,)
        Height above the ellipsoid [m].
    bulge_cosine : ndarray (k,)
        Cosine of the angle from the centre of the day bulge.
    exponent : float
        Power of cos(angle / 2): 2 for low inclinations to 6 for polar orbits.

    Returns
    -------
    density, per_height, per_cosine : ndarray (k,)
        [kg/m3], [kg/m4], [kg/m3].
    """
    height = np.maximum(height_m, _HEIGHT_M[0])
    interval = np.clip(np.searchsorted(_HEIGHT_M, height, side="right") - 1, 0, _HEIGHT_M.size - 2)
    slope = _SLOPE_1_M[:, interval]
    night, day = np.exp(_LOG_DENSITY[:, interval] + slope * (height - _HEIGHT_M[interval]))
    half = np.clip(0.5 + 0.5 * bulge_cosine, 0.0, 1.0)
    power = half ** (0.5 * exponent - 1.0)
    share = power * half
    inside = height_m < TOP_M
    return (
        inside * (night + (day - night) * share),
        (inside & (height_m > _HEIGHT_M[0])) * (slope[0] * night * (1.0 - share) + slope[1] * day * share),
        inside * (day - night) * (0.25 * exponent) * power,
    )


def bulge_direction(sun: np.ndarray) -> np.ndarray:
    """Return unit vectors to the centre of the day bulge, from the geocentric Sun (k, 3): turned east by the lag."""
    cosine, sine = np.cos(BULGE_LAG_RAD), np.sin(BULGE_LAG_RAD)
    x, y, z = sun.T
    turned = np.stack([cosine * x - sine * y, sine * x + cosine * y, z], axis=-1)
    return turned / np.linalg.norm(turned, axis=-1, keepdims=True)
