"""Receiver chain: from a tone behind converters and a dial back to the frequency at the antenna (sky level).

The chain is taken as exact: all its oscillators hang on the station's one reference, so that what that reference is off by is
the station offset, received = true x (1 + offset), whatever the chain.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np

from shiftfix.api import parse_quantity

SIDES = ("upper", "lower")
_FIELDS = ("lo", "side", "name")


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
    if isinstance(chain, str | Mapping) or not isinstance(chain, Iterable):
        raise ValueError(
            f'found {chain!r}; allowed: a list of converters such as [{{ lo = "137 MHz", side = "upper" }}]'
        )
    sign, constant = 1.0, 0.0
    for number, stage in enumerate(chain, 1):
        if not isinstance(stage, Mapping) or set(stage) - set(_FIELDS) or "lo" not in stage:
            found = sorted(stage) if isinstance(stage, Mapping) else stage
            raise ValueError(f"converter {number}: found {found!r}; allowed: {', '.join(_FIELDS)}; lo is required")
        side = stage.get("side", "upper")
        if side not in SIDES:
            raise ValueError(f"converter {number}: found side {side!r}; allowed: upper, lower")
        try:
            lo = parse_quantity(stage["lo"], "Hz").value
        except ValueError as error:
            raise ValueError(f"converter {number}: lo: {error}") from None
        if lo <= 0.0:
            raise ValueError(
                f"converter {number}: found lo {stage['lo']!r}; an oscillator's frequency is greater than 0"
            )
        # After this stage: out = s (in - lo), so in = s out + lo; unwinding from the antenna outwards.
        constant += sign * lo
        sign *= 1.0 if side == "upper" else -1.0
    return sign, constant


def sky_frequency(
    tone_hz: np.ndarray, sign: Any, constant_hz: Any, dial_hz: Any = 0.0, sideband: str = "upper"
) -> np.ndarray:
    """Return the frequency at the antenna [Hz] of a tone behind a dial behind a chain.

    Parameters
    ----------
    tone_hz : ndarray, shape (n,)
    sign, constant_hz : float or ndarray, shape (n,)
        Of the chain before the dial, as `chain_terms` gives them; 1 and 0 without one.
    dial_hz : float or ndarray, shape (n,)
        Frequency that the receiver was tuned to (of the suppressed carrier), 0 without a dial.
    sideband : {"upper", "lower"}
        Whether the signal lies above or below the dial.
    """
    return constant_hz + sign * (dial_hz + (1.0 if sideband == "upper" else -1.0) * tone_hz)
