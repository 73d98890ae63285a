"""Quantities as text with units: `158.3 MHz +/- 2 kHz`, `10 ms`, `0.5 ppm`; a bare number where a unit is needed is an error."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Quantity:
    """A value with an optional 1-sigma, both in one stated SI unit."""

    value: float
    sigma: float | None = None
