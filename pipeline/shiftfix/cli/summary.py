"""Summary of a solution for a terminal: at most 24 lines of 80 columns, from the document alone."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from typing import Any

_WIDTH = 80


def _size(value: float, unit: str = "m") -> str:
    if unit == "m" and abs(value) >= 1e4:
        return f"{value / 1e3:.4g} km"
    return f"{value:.{4 if abs(value) >= 1e3 else 3}g} {unit}"


def _wrapped(label: str, text: str, lines: int) -> list[str]:
    out = textwrap.wrap(f"{label}{text}", _WIDTH, subsequent_indent="  ")
    if len(out) > lines:
        out = out[:lines]
        out[-1] = out[-1][: _WIDTH - 4] + " ..."
    return out


def summary_lines(document: Mapping[str, Any]) -> list[str]:
    """Return the lines: verdict, position, velocity, rest frequency, alternatives, warnings, cautions."""
    lines = _wrapped("", f"{document['verdict'].upper()}: {document['verdict_text']}", 5)
    if document["title"]:
        lines.insert(0, document["title"][:_WIDTH])
    geodetic, state = document["geodetic"], document["state"]
    if state["position_m"]:
        lines.append(f"at {document['epoch_utc']}, motion {document['motion']}")
        if geodetic:
            e = geodetic["ellipse_95"]
            lines.append(
                f"position  {geodetic['latitude_deg']:.5f} deg, {geodetic['longitude_deg']:.5f} deg, "
                f"height {_size(geodetic['height_m'])}"
            )
            lines.append(
                f"  95 % ellipse {_size(e['semi_major_m'])} x {_size(e['semi_minor_m'])} (semi-axes), major axis at "
                f"{e['azimuth_deg']:.0f} deg"
            )
        total = document["budget"].get("total")
        speed = sum(v * v for v in state["velocity_m_s"]) ** 0.5
        if total:
            lines.append(
                f"  1 sigma {_size(total['position_m'])} and {_size(total['velocity_m_s'], 'm/s')} (root sum square of "
                f"components)"
            )
        if speed > 0:
            lines.append(f"speed     {speed:.4g} m/s in {document['frame']}")
        rest, sigma = document["rest_frequency_hz"], document["rest_frequency_sigma_hz"]
        lines.append(f"rest frequency  {rest:.4f} Hz +/- {sigma:.2g} Hz (1 sigma)")
        lines += _wrapped("  datum: ", document["frequency_datum"], 2)
    others = document["alternatives"]
    if document["odds"] is not None:
        text = (
            "no other solution fits"
            if not others
            else "; ".join(f"odds {o['odds']:.3f}, {_distance(o['state'], state)} away" for o in others[:3])
        )
        lines += _wrapped("other solutions: ", text, 2)
    ordered = [*document["warnings"], *document["findings"]]
    for text in ordered[:3]:
        lines += _wrapped("! ", text, 2)
    caution = document["cautions"][0] if document["cautions"] else ""
    return lines[:22] + _wrapped("caution: ", caution, 2)


def _distance(other: Mapping[str, Any], state: Mapping[str, Any]) -> str:
    square = sum((a - b) ** 2 for a, b in zip(other["position_m"], state["position_m"], strict=True))
    return _size(square**0.5)
