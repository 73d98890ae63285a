"""Numbers as a person reads them: as many digits as the error allows, always with the unit."""

from __future__ import annotations

import math


def length_text(value_m: float | None) -> str:
    """Return a length with its unit: `519.6 km`, `7944 m`, `68.9 m`, `< 1 mm`; `not known` without a value."""
    if value_m is None or not math.isfinite(value_m):
        return "not known"
    size = abs(value_m)
    if size >= 1e4:
        return f"{value_m / 1e3:.4g} km" if size < 1e9 else f"{value_m / 1e3:.3g} km"
    if size >= 1e3:
        return f"{value_m:.0f} m"
    if 0.0 < size < 1e-3:
        return "< 1 mm"
    return f"{value_m:.3g} m"


def value_text(value: float, sigma: float | None, most: int = 6) -> str:
    """Return a number with two significant digits of its 1-sigma; `0` when it is nothing but rounding beside it.

    Parameters
    ----------
    value : float
    sigma : float or None
        Without one, or with one of 0, the number has `most` decimals.
    most : int
        Largest number of decimals; below its reach six significant digits with exponent are given.
    """
    if sigma is None or not math.isfinite(sigma) or sigma <= 0.0:
        return f"{value:.{most}f}"
    if abs(value) < 1e-3 * sigma:
        return "0"
    decimals = 1 - math.floor(math.log10(sigma))
    if decimals > most or decimals < -4:
        return f"{value:.6g}"
    text = f"{value:.{max(decimals, 0)}f}"
    return text if float(text) else "0"


def measured_text(value: float | None, sigma: float | None, unit: str, most: int = 6) -> str:
    """Return `value unit +/- sigma unit (1 sigma)` as `value_text` gives it; `not known` without a value."""
    if value is None or not math.isfinite(value):
        return "not known"
    fine = sigma is not None and sigma < 10.0**-most
    text = f"{value:.{most}f}" if fine else value_text(value, sigma, most)
    if sigma is None or not math.isfinite(sigma):
        return f"{text} {unit}"
    return f"{text} {unit} +/- {sigma_text(sigma)} {unit} (1 sigma)"


def sigma_text(sigma: float) -> str:
    """Return a 1-sigma: two significant digits, whole numbers from 100 on."""
    return f"{sigma:.0f}" if 100.0 <= sigma < 1e7 else f"{sigma:.2g}"


def odds_text(odds: float) -> str:
    """Return odds (a probability) with three decimals; never a 0 or 1 that is not one."""
    if 0.0 < odds < 0.001:
        return "below 0.001"
    return "above 0.999" if 0.9995 <= odds < 1.0 else f"{odds:.3f}"


def place_text(latitude_deg: float, longitude_deg: float, semi_major_m: float | None = None) -> str:
    """Return latitude and longitude with decimals that resolve a tenth of the error (1e-5 deg is 1.1 m)."""
    if semi_major_m and math.isfinite(semi_major_m):
        decimals = min(max(math.ceil(-math.log10(max(semi_major_m, 1e-3) / 111e3)) + 1, 2), 7)
    else:
        decimals = 5
    return f"latitude {latitude_deg:.{decimals}f} deg, longitude {longitude_deg:.{decimals}f} deg"
