"""Plausibility of a log as a whole: units that are wrong by powers of a thousand, counts that overlap, two receivers under one name.

A problem refuses the file; a note goes on to the report.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from shiftfix.api import Problem
from shiftfix_ingest.delimited_params import DelimitedParams

_POWERS = (
    (1e-3, "1000 times too small"),
    (1e-6, "10^6 times too small"),
    (1e3, "1000 times too large"),
    (1e6, "10^6 times too large"),
)
_STEPS = ("mHz", "Hz", "kHz", "MHz", "GHz")
_LARGEST_OFFSET = 1e-3  # of the nominal: 11 km/s and a bare crystal together stay below 1.4e-4
_LARGEST_SIGMA = 1e-3  # of the frequency: a voice receiver read by hand, 50 Hz at 145 MHz, is 3e-7
_OVERLAP = 1.5  # interval over spacing from which counts share more than edges
_ABSURD_OVERLAP = 100.0  # an interval of milliseconds taken for seconds gives 1000


def scale_problem(
    where: str, frequency_hz: np.ndarray, nominal_hz: np.ndarray, params: DelimitedParams
) -> Problem | None:
    """Return a problem when most frequencies lie a power of a thousand off the nominal one, or off the radio bands."""
    good = np.isfinite(frequency_hz)
    if not good.any():
        return None
    middle = float(np.median(np.abs(frequency_hz[good])))
    unit = str(params.units.get("frequency", "Hz"))
    known = good & np.isfinite(nominal_hz)
    if known.any():
        ratio = float(np.median(np.abs(frequency_hz[known]) / nominal_hz[known]))
        nominal = float(np.median(nominal_hz[known]))
        if 0.9 < ratio < 1.1:
            return None
        for power, words in _POWERS:
            if 0.9 < ratio / power < 1.1:
                return Problem(
                    where,
                    f"the frequencies are {words}{_likely(unit, power)}",
                    found=f"median {middle:.10g} Hz with the declared unit {unit}",
                    allowed=f"within 10 % of {nominal:.10g} Hz",
                    remedy="correct units.frequency",
                )
        return Problem(
            where,
            "the frequencies are not near the nominal frequency",
            found=f"median {middle:.10g} Hz",
            allowed=f"within 10 % of {nominal:.10g} Hz",
            remedy="correct the unit, the kind of frequency or the nominal frequency",
        )
    if not 3e3 <= middle <= 3e11:
        return Problem(
            where,
            "the frequencies are not radio frequencies",
            found=f"median {middle:.10g} Hz with the declared unit {unit}",
            allowed="3 kHz to 300 GHz",
            remedy="correct units.frequency",
        )
    return None


def _likely(unit: str, power: float) -> str:
    """Return a question that names the unit in which the column seems to be."""
    index = _STEPS.index(unit) - round(np.log10(power) / 3) if unit in _STEPS else -1
    return f": is the column in {_STEPS[index]}?" if 0 <= index < len(_STEPS) else ""


def off_scale(frequency_hz: np.ndarray, nominal_hz: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return which single rows are off: 10 % from the nominal, or without one 10^3 or 10^6 from the median; and the ratio."""
    with np.errstate(invalid="ignore", divide="ignore"):
        finite = np.isfinite(frequency_hz)
        known = np.isfinite(nominal_hz)
        middle = float(np.median(frequency_hz[finite])) if finite.any() else np.nan
        ratio = np.abs(frequency_hz) / np.where(known, nominal_hz, middle)
        off = known & finite & ~((ratio > 0.9) & (ratio < 1.1))
        for power, _ in _POWERS:
            off |= ~known & finite & (ratio / power > 0.9) & (ratio / power < 1.1)
    return off, ratio


def size_problems(
    where: str, offset_hz: np.ndarray | None, sigma_hz: np.ndarray, frequency_hz: np.ndarray, nominal_hz: np.ndarray
) -> list[Problem]:
    """Return problems of offsets and 1-sigmas that are too large to be in the declared unit."""
    out = []
    with np.errstate(invalid="ignore"):
        if offset_hz is not None and np.nanmedian(np.abs(offset_hz) / nominal_hz) > _LARGEST_OFFSET:
            out.append(
                Problem(
                    where,
                    "the offsets are too large for their unit",
                    found=f"median {np.nanmedian(np.abs(offset_hz)):.6g} Hz",
                    allowed=f"up to {_LARGEST_OFFSET:g} of the nominal frequency",
                    remedy='correct units.frequency; absolute frequencies need frequency_kind = "sky"',
                )
            )
        if np.nanmedian(sigma_hz / np.abs(frequency_hz)) > _LARGEST_SIGMA:
            out.append(
                Problem(
                    where,
                    "the 1-sigmas are too large for their unit",
                    found=f"median {np.nanmedian(sigma_hz):.6g} Hz",
                    allowed=f"up to {_LARGEST_SIGMA:g} of the frequency",
                    remedy="correct units.sigma or sigma",
                )
            )
    return out


def spacing_findings(where: str, rows: pd.DataFrame) -> tuple[list[Problem], list[str]]:
    """Return problems and notes about intervals that are longer than the time between rows of one station and emitter."""
    if len(rows) < 3 or not (rows["interval_s"] > 0).any():
        return [], []
    station = pd.factorize(rows["station_id"])[0]
    group = station.astype(np.int64) * (1 + rows["emitter_id"].nunique()) + pd.factorize(rows["emitter_id"])[0]
    times = rows["time_tai_ns"].to_numpy()
    order = np.lexsort((times, group))
    gap = np.diff(times[order]) * 1e-9
    inside = (np.diff(group[order]) == 0) & (gap > 0)
    if not inside.any():
        return [], []
    interval = rows["interval_s"].to_numpy()[order][1:][inside]
    ratio = float(np.median(interval / gap[inside]))
    found = f"intervals of {np.median(interval):.6g} s, rows every {np.median(gap[inside]):.6g} s"
    if ratio > _ABSURD_OVERLAP:
        return [
            Problem(
                where,
                "the count intervals are far longer than the time between rows",
                found=found,
                allowed=f"up to {_ABSURD_OVERLAP:g} times as long",
                remedy="correct units.interval or interval; several receivers need their own stations",
            )
        ], []
    if ratio > _OVERLAP:
        return [], [
            f"{where}: counts overlap ({found}): neighbouring rows are not independent, the formal error is too small"
        ]
    return [], []


def clash_note(rows: pd.DataFrame) -> list[str]:
    """Return a note when one station has two values of one emitter at one time."""
    keys = ["station_id", "emitter_id", "time_tai_ns", "interval_s"]
    twice = rows.duplicated(keys, keep=False).to_numpy()
    if not twice.any():
        return []
    first = rows[twice].iloc[0]
    return [
        f"{int(twice.sum())} rows share station, emitter and time with another row but differ in frequency (first at "
        f"{first['source']}:{first['row_number']}): two receivers under one station name, or two carriers under one emitter name?"
    ]
