"""Summary of a solution for a terminal: at most 24 lines of 80 columns, from the document alone."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Mapping
from typing import Any

from shiftfix.tables.readings import length_text, measured_text, odds_text, place_text

_WIDTH = 80
_LINES = 24


def _wrapped(label: str, text: str, lines: int) -> list[str]:
    """Return text wrapped under its label; where lines are left out, `...` says so."""
    out = textwrap.wrap(f"{label}{text}", _WIDTH, subsequent_indent="  ", break_on_hyphens=False)
    if len(out) > lines:
        out = out[:lines]
        out[-1] = out[-1][: _WIDTH - 4].rstrip() + " ..."
    return out


def summary_lines(document: Mapping[str, Any]) -> list[str]:
    """Return the lines: verdict, position, velocity, rest frequency, other solutions, three warnings, cautions.

    The most urgent caution stands there in full, of the other cautions of a class the first sentence; when room is
    short, warnings give way to them.
    """
    cautions = _cautions(document["cautions"])
    lines = _wrapped("", document["title"], 1) if document["title"] else []
    refused = document["state"]["position_m"] is None
    lines += _wrapped("", f"{document['verdict'].upper()}: {document['verdict_text']}", 6 if refused else 4)
    if document["remedy"]:
        lines += _wrapped("would help: ", document["remedy"], 2)
    if not refused:
        lines += _where(document)
        lines.append(
            "rest frequency  " + measured_text(document["rest_frequency_hz"], document["rest_frequency_sigma_hz"], "Hz")
        )
        lines += _wrapped("  datum: ", document["frequency_datum"], 2)
        lines += _others(document)
    for text in document["warnings"][:3]:
        lines += _wrapped("! ", text, 2)
    more = len(document["warnings"]) - 3
    if more > 0:
        lines.append(f"! {more} more in solution.json")
    return lines[: _LINES - 1 - len(cautions)] + cautions


def _where(document: Mapping[str, Any]) -> list[str]:
    geodetic, state = document["geodetic"], document["state"]
    lines = [f"at {document['epoch_utc']} (UTC), motion {document['motion']}"]
    if geodetic:
        e = geodetic["ellipse_95"]
        place = place_text(geodetic["latitude_deg"], geodetic["longitude_deg"], e["semi_major_m"])
        height = measured_text(geodetic["height_m"], geodetic.get("height_sigma_m"), "m", 1)
        lines += [f"position  {place}", f"  height {height} above the WGS84 ellipsoid"]
        lines += _wrapped(
            "  95 % ellipse ",
            f"{length_text(e['semi_major_m'])} x {length_text(e['semi_minor_m'])} (semi-axes), major axis at "
            f"{e['azimuth_deg']:.0f} deg",
            2,
        )
    else:
        place = ", ".join(length_text(x) for x in state["position_m"])
        lines += _wrapped("position  ", f"({place}) in {document['frame']}", 2)
    total = document["budget"].get("total")
    if total:
        lines += _wrapped(
            "  1 sigma ",
            f"{length_text(total['position_m'])} and {total['velocity_m_s']:.3g} m/s (root sum square of components)",
            2,
        )
    speed = sum(v * v for v in state["velocity_m_s"]) ** 0.5
    if geodetic and geodetic.get("speed_m_s"):
        lines.append(f"speed     {geodetic['speed_m_s']:.4g} m/s over ground, course {geodetic['course_deg']:.0f} deg")
    elif speed > 0:
        lines.append(f"speed     {speed:.4g} m/s in {document['frame']}")
    return lines


def _others(document: Mapping[str, Any]) -> list[str]:
    others, state = document["alternatives"], document["state"]
    if document["odds"] is None:
        return []
    if not others:
        return ["other solutions: no other solution fits"]
    out = [f"other solutions (odds of the one above {odds_text(document['odds'])}):"]
    for other in others[:3]:
        square = sum((a - b) ** 2 for a, b in zip(other["state"]["position_m"], state["position_m"], strict=True))
        place = other.get("geodetic")
        where = place_text(place["latitude_deg"], place["longitude_deg"], 1e3) + ", " if place else ""
        out += _wrapped("  ", f"odds {odds_text(other['odds'])}: {where}{length_text(square**0.5)} away", 1)
    if len(others) > 3:
        out.append(f"  and {len(others) - 3} more in solution.json")
    return out


def _cautions(texts: list[str]) -> list[str]:
    """Return the most urgent caution in full, of further ones that name a class the first sentence."""
    out = _wrapped("caution: ", texts[0], 8) if texts else []
    for text in texts[1:]:
        if re.match(r"[A-Z][A-Z ]+: ", text):
            out += _wrapped("caution: ", text.split(". ")[0].rstrip(".") + ".", 2)
    return out
