"""Tropospheric delay of a standard atmosphere, with the mapping functions of Niell (1996, JGR 101 B2, 3227)."""

from __future__ import annotations

import numpy as np

_LATITUDES = np.radians([15.0, 30.0, 45.0, 60.0, 75.0])
_HYDROSTATIC = np.array(
    [
        [1.2769934e-3, 1.2683230e-3, 1.2465397e-3, 1.2196049e-3, 1.2045996e-3],
        [2.9153695e-3, 2.9152299e-3, 2.9288445e-3, 2.9022565e-3, 2.9024912e-3],
        [62.610505e-3, 62.837393e-3, 63.721774e-3, 63.824265e-3, 64.258455e-3],
    ]
)
_AMPLITUDE = np.array(
    [
        [0.0, 1.2709626e-5, 2.6523662e-5, 3.4000452e-5, 4.1202191e-5],
        [0.0, 2.1414979e-5, 3.0160779e-5, 7.2562722e-5, 11.723375e-5],
        [0.0, 9.0128400e-5, 4.3497037e-5, 84.795348e-5, 170.37206e-5],
    ]
)
_HEIGHT = np.array([2.53e-5, 5.49e-3, 1.14e-3])
_WET = np.array(
    [
        [5.8021897e-4, 5.6794847e-4, 5.8118019e-4, 5.9727542e-4, 6.1641693e-4],
        [1.4275268e-3, 1.5138625e-3, 1.4572752e-3, 1.5007428e-3, 1.7599082e-3],
        [4.3472961e-2, 4.6729510e-2, 4.3908931e-2, 4.4626982e-2, 5.4736038e-2],
    ]
)


def _fraction(sine: np.ndarray, a: float, b: float, c: float) -> np.ndarray:
    """Return Marini's continued fraction, 1 at the zenith."""
    return (1.0 + a / (1.0 + b / (1.0 + c))) / (sine + a / (sine + b / (sine + c)))


def niell_hydrostatic(elevation_rad: np.ndarray, latitude_rad: float, height_m: float, day_of_year: float) -> np.ndarray:
    """Return the hydrostatic mapping factor of the delay at elevations above 3 deg."""
    size = abs(latitude_rad)
    # Day 28 is the coldest of the north; the south is half a year later.
    phase = (day_of_year - 28.0) / 365.25 + (0.5 if latitude_rad < 0 else 0.0)
    season = np.cos(2.0 * np.pi * phase)
    a, b, c = (
        np.interp(size, _LATITUDES, mean) - np.interp(size, _LATITUDES, swing) * season
        for mean, swing in zip(_HYDROSTATIC, _AMPLITUDE, strict=True)
    )
    sine = np.sin(elevation_rad)
    correction = (1.0 / sine - _fraction(sine, *_HEIGHT)) * height_m * 1e-3
    return _fraction(sine, a, b, c) + correction


def niell_wet(elevation_rad: np.ndarray, latitude_rad: float) -> np.ndarray:
    """Return the wet mapping factor of the delay at elevations above 3 deg."""
    a, b, c = (np.interp(abs(latitude_rad), _LATITUDES, row) for row in _WET)
    return _fraction(np.sin(elevation_rad), a, b, c)


def zenith_hydrostatic_delay(pressure_pa: float, latitude_rad: float, height_m: float) -> float:
    """Return the hydrostatic zenith delay [m] (Saastamoinen 1972, in the form of Davis et al. 1985)."""
    return 0.0022768 * pressure_pa * 1e-2 / (1.0 - 0.00266 * np.cos(2.0 * latitude_rad) - 0.00028 * height_m * 1e-3)


def zenith_wet_delay(temperature_k: float, vapour_pressure_pa: float) -> float:
    """Return the wet zenith delay [m] (Saastamoinen 1972)."""
    return 0.002277 * (1255.0 / temperature_k + 0.05) * vapour_pressure_pa * 1e-2


def standard_atmosphere(height_m: float) -> tuple[float, float, float]:
    """Return pressure [Pa], temperature [K] and vapour pressure [Pa] of a standard atmosphere.

    ISO 2533 below 11 km (extended isothermally), with 50 % relative humidity at the ground decaying with 2 km scale
    height. The real zenith delay differs by some centimetres hydrostatic and up to 0.2 m wet.
    """
    height = float(np.clip(height_m, -500.0, 80e3))
    if height < 11e3:
        temperature = 288.15 - 0.0065 * height
        pressure = 101325.0 * (temperature / 288.15) ** 5.25588
    else:
        temperature = 216.65
        pressure = 22632.0 * float(np.exp(-(height - 11e3) / 6341.6))
    return pressure, temperature, 0.5 * 1704.0 * float(np.exp(-height / 2000.0))


def slant_delay(elevation_rad: np.ndarray, latitude_rad: float, height_m: float, day_of_year: float = 28.0) -> np.ndarray:
    """Return the delay of the standard atmosphere at elevations above 3 deg [m]."""
    pressure, temperature, vapour = standard_atmosphere(height_m)
    hydrostatic = zenith_hydrostatic_delay(pressure, latitude_rad, height_m)
    wet = zenith_wet_delay(temperature, vapour)
    return hydrostatic * niell_hydrostatic(elevation_rad, latitude_rad, height_m, day_of_year) + wet * niell_wet(
        elevation_rad, latitude_rad
    )
