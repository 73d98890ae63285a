"""Which observation codes of a RINEX file are used: preference lists by system and band, overridable by name."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shiftfix.api import Problem
from shiftfix_ingest.rinex_text import ObservationFile

BANDS: dict[str, dict[str, float]] = {
    "G": {"1": 1575.42e6, "2": 1227.60e6},
    "E": {"1": 1575.42e6, "5": 1176.45e6},
}
"""Nominal carrier frequencies [Hz] by system: first the band that is reported, then the one it is combined with.

Source: RINEX 3.04, tables of frequency bands (IS-GPS-200; Galileo OS SIS ICD)."""

_ATTRIBUTES = {("G", "1"): "CWPYXSLMN", ("G", "2"): "WPYDCLXSMN", ("E", "1"): "CXBAZ", ("E", "5"): "QXI"}
_ENOUGH = 0.95  # of the best coverage: among codes that have this, the first of the list is used


def choose(
    file: ObservationFile, system: str, mine: np.ndarray, band: str, kind: str, wanted: Sequence[str]
) -> str | None:
    """Return the code of one kind (L phase, C code, D Doppler, S strength) that is used for a band, None without one.

    Parameters
    ----------
    file : ObservationFile
    system : str
    mine : ndarray of bool
        Records of that system.
    band : str
    kind : {"L", "C", "D", "S"}
    wanted : sequence of str
        Codes named by the user, first choice first.
    """
    present = file.header.codes_of(system)
    kinds = ("P", "C") if kind == "C" and file.header.version < 3 else (kind,)
    if file.header.version < 3:
        listed = [k + band for k in kinds]
    else:
        listed = [kind + band + a for a in _ATTRIBUTES[system, band]]
        # The code range of the same signal as the phase comes first, for the user's choice of phase as well.
        listed = [kind + w[1:] for w in wanted if w[0] == "L" and w[1:2] == band] + listed
    named = [w for w in wanted if w[0] in kinds and w[1:2] == band and w in present]
    if named:
        return named[0]
    count = {
        c: int(np.isfinite(file.values[c][mine]).sum())
        for c in dict.fromkeys(listed)
        if c in present and c in file.values
    }
    best = max(count.values(), default=0)
    return next((c for c, n in count.items() if n and n >= _ENOUGH * best), None)


def unknown_signals(files: Sequence[ObservationFile], wanted: Sequence[str]) -> list[Problem]:
    """Return a problem for each code named by the user that no file has."""
    known = sorted({c for f in files for codes in f.header.codes.values() for c in codes})
    return [
        Problem("params.signals", "no file has this observation code", found=w, allowed=", ".join(known))
        for w in wanted
        if w not in known
    ]
