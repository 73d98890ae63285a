"""Quantities as text with units: `158.3 MHz +/- 2 kHz`, `10 ms`, `0.5 ppm`; a bare number where a unit is needed is an error."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass


@dataclass(frozen=True)
class Quantity:
    """A value with an optional 1-sigma, both in one stated SI unit."""

    value: float
    sigma: float | None = None


_UNITS: dict[str, dict[str, float]] = {
    "Hz": {"Hz": 1.0, "mHz": 1e-3, "kHz": 1e3, "MHz": 1e6, "GHz": 1e9},
    "Hz/s": {"Hz/s": 1.0, "mHz/s": 1e-3, "kHz/s": 1e3, "Hz/min": 1 / 60.0},
    "s": {"s": 1.0, "ms": 1e-3, "us": 1e-6, "µs": 1e-6, "ns": 1e-9, "min": 60.0, "h": 3600.0, "d": 86400.0},
    "m": {"m": 1.0, "km": 1e3, "cm": 1e-2, "mm": 1e-3},
    "m/s": {
        "m/s": 1.0,
        "km/s": 1e3,
        "mm/s": 1e-3,
        "km/h": 1 / 3.6,
        "kn": 1852.0 / 3600.0,
        "m/yr": 1 / 31557600.0,
        "mm/yr": 1e-3 / 31557600.0,
    },
    "m/s2": {"m/s2": 1.0, "mm/s2": 1e-3},
    "deg": {"deg": 1.0, "°": 1.0, "rad": 180.0 / math.pi, "arcmin": 1 / 60.0, "arcsec": 1 / 3600.0},
    "K": {"K": 1.0},
    "Pa": {"Pa": 1.0, "hPa": 100.0, "kPa": 1e3},
    "dB": {"dB": 1.0},
    "dBHz": {"dBHz": 1.0, "dB-Hz": 1.0},
    "1": {"": 1.0, "1": 1.0, "ppm": 1e-6, "ppb": 1e-9, "%": 1e-2},
    "1/s": {"1/s": 1.0, "/s": 1.0, "ppm/d": 1e-6 / 86400.0, "ppb/d": 1e-9 / 86400.0, "1/d": 1 / 86400.0},
}
"""Accepted spellings by SI unit, with their factors."""

UNITS = tuple(_UNITS)

_NUMBER = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_TERM = re.compile(rf"\s*({_NUMBER})\s*([^\d\s+±-]\S*|1/\S+|1)?\s*$")
_LONE_SIGMA = re.compile(r"^\s*(?:±|\+/-)")


def parse_quantity(text: object, unit: str, *, sigma_allowed: bool = False) -> Quantity:
    """Return a quantity in the SI unit `unit` from its text.

    Parameters
    ----------
    text : str
        Number and unit, and where allowed `+/-` or `±` with a 1-sigma that has its own unit or shares the value's; a
        text that begins with `±` is 0 with that 1-sigma. For unit `1` a plain number in quotes will do.
    unit : str
        One of `UNITS`.
    sigma_allowed : bool
        Whether a 1-sigma may stand there.

    Raises
    ------
    ValueError
        With what was found and what is allowed, in one line.
    """
    spellings = _UNITS[unit]
    allowed = ", ".join(s for s in spellings if s) or "a plain number in quotes"
    if isinstance(text, bool) or not isinstance(text, str):
        if isinstance(text, int | float) and not isinstance(text, bool):
            raise ValueError(f"bare number {text!r} where a unit is needed; write it as text with one of: {allowed}")
        raise ValueError(f"found {text!r}, which is not a quantity; allowed: text with one of: {allowed}")
    if not text.strip():
        raise ValueError(f"empty text; allowed: a number with one of: {allowed}")
    parts = re.split(r"±|\+/-", text)
    if len(parts) > 2:
        raise ValueError(f"found {text!r}, more than one +/-")
    if len(parts) == 2 and not sigma_allowed:
        raise ValueError(f"found {text!r}; a 1-sigma (+/-) is not allowed here")
    if len(parts) == 1:
        return Quantity(_term(parts[0], unit, text)[0])
    sigma, sigma_spelling = _term(parts[1], unit, text)
    if _LONE_SIGMA.match(text):
        value = 0.0
    elif sigma_spelling and re.fullmatch(rf"\s*{_NUMBER}\s*", parts[0]):
        value = float(parts[0]) * spellings[sigma_spelling]
    else:
        value, spelling = _term(parts[0], unit, text)
        if unit == "1" and not sigma_spelling and spelling:
            sigma *= spellings[spelling]
    if sigma <= 0:
        raise ValueError(f"found {text!r}; a 1-sigma must be greater than 0")
    return Quantity(value, sigma)


def _term(text: str, unit: str, whole: str) -> tuple[float, str]:
    spellings = _UNITS[unit]
    allowed = ", ".join(s for s in spellings if s)
    if re.search(r"\d,\d", text):
        raise ValueError(f"found {whole!r}; decimal comma or thousands separator: use a point, no separators")
    match = _TERM.fullmatch(text)
    if not match:
        raise ValueError(f"found {whole!r}, which is not a number with a unit; allowed units: {allowed}")
    number, spelling = float(match[1]), match[2] or ""
    if not math.isfinite(number):
        raise ValueError(f"found {whole!r}, which is not finite")
    if spelling in spellings:
        return number * spellings[spelling], spelling
    if not spelling:
        raise ValueError(f"bare number {whole!r} where a unit is needed; allowed units: {allowed}")
    for other, known in _UNITS.items():
        if spelling in known:
            raise ValueError(f"found {whole!r}, a quantity in {other}; needed is one in {unit} ({allowed})")
    close = [s for s in spellings if s.lower() == spelling.lower()]
    close.sort(key=lambda s: -sum(a == b for a, b in zip(s, spelling, strict=True)))
    hint = f"; did you mean {close[0]}?" if close else ""
    raise ValueError(f"found {whole!r} with the unknown unit {spelling!r}{hint}; allowed units: {allowed}")
