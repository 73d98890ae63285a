"""Angles as surveyors write them: `-38.91 deg`, `38.91 S`, `38 54.6 S`, `38°54'36" S`."""

from __future__ import annotations

import re

from shiftfix.api import parse_quantity

AXES = {"latitude": "NS", "longitude": "EW"}
_N = r"(\d+(?:\.\d*)?)"
_ANGLE = re.compile(
    # The parts need a mark or a blank between them, or `38.91 m` would be 38.9 deg and 1 minute.
    rf"([+-]?)\s*{_N}(?:(?:\s*(?:°|deg|d|:)\s*|\s+){_N}(?:(?:\s*(?:'|′|m|:)\s*|\s+){_N}\s*(?:\"|″|''|s)?|\s*(?:'|′|m)?))?"
    r"\s*(?:°|deg)?\s*([NSEW]?)"
)


def angle_deg(text: object, axis: str) -> float:
    """Return an angle in degrees, north and east positive.

    Parameters
    ----------
    text : str
        Degrees with unit or hemisphere; or degrees and minutes, or degrees, minutes and seconds, with sign or hemisphere.
    axis : {"latitude", "longitude"}

    Raises
    ------
    ValueError
        Bare numbers, minutes from 60 on, sign and hemisphere together, a hemisphere of the other axis.
    """
    match = _ANGLE.fullmatch(text.strip()) if isinstance(text, str) else None
    if not match or not (match[3] or match[5]):
        return parse_quantity(text, "deg").value
    sign, degrees, minutes, seconds, hemisphere = match.groups()
    if hemisphere and hemisphere not in AXES[axis]:
        other = next(a for a in AXES if a != axis)
        raise ValueError(f"found {text!r}: {hemisphere} belongs to a {other}; are latitude and longitude swapped?")
    if sign and hemisphere:
        raise ValueError(f"found {text!r}: sign and hemisphere together; keep one")
    parts = [p for p in (degrees, minutes, seconds) if p]
    if any("." in p for p in parts[:-1]) or any(float(p) >= 60.0 for p in parts[1:]):
        raise ValueError(f"found {text!r}: not degrees, minutes below 60 and seconds below 60")
    value = sum(float(p) / 60.0**k for k, p in enumerate(parts))
    return -value if sign == "-" or hemisphere in ("S", "W") else value
