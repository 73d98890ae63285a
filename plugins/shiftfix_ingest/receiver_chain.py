"""Receiver chain: from a tone behind converters back to the frequency at the antenna (sky level)."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from shiftfix.api import parse_quantity

SIDES = ("upper", "lower")


def chain_terms(chain: Iterable[Mapping[str, Any]]) -> tuple[float, float]:
    """Return sign and constant of a chain: sky = sign x tone + constant [Hz].

    Parameters
    ----------
    chain : iterable of mapping
        Converters from antenna to tone. `lo` is the oscillator's frequency; with `side` upper the signal lies above it
        (signal - lo comes out: low-side injection, upper sideband), with lower it lies below (lo - signal comes out:
        high-side injection, lower sideband, an inverted spectrum).

    Raises
    ------
    ValueError
        Unknown keys, missing lo, unknown side, wrong unit.
    """
    sign, constant = 1.0, 0.0
    for number, stage in enumerate(chain, 1):
        unknown = set(stage) - {"lo", "side", "name"}
        if unknown or "lo" not in stage:
            raise ValueError(f"converter {number}: found {sorted(stage)}; allowed: lo, side, name; lo is required")
        side = stage.get("side", "upper")
        if side not in SIDES:
            raise ValueError(f"converter {number}: found side {side!r}; allowed: upper, lower")
        lo = parse_quantity(stage["lo"], "Hz").value
        # After this stage: out = s (in - lo), so in = s out + lo; unwinding from the antenna outwards.
        flip = 1.0 if side == "upper" else -1.0
        constant += sign * lo
        sign *= flip
    return sign, constant
