"""Unbroken phase records: where a receiver's carrier phase starts anew, and why.

Arrays are grids (e, s) of epochs by satellites, NaN where nothing was observed; phases and codes are range-like metres.
A slip is looked for in three ways; what escapes all of them are slips whose effect on L1 - L2 is below 4 cm and on
phase minus code below 4 m (or below 6 times the noise at that place): a cycle on both frequencies at once is 5.4 cm
and is seen, 5 on L1 with 4 on L2 (2.5 cm) or 9 with 7 (0.3 cm) are not, unless the receiver flags them. With one
frequency, slips below 4 m (21 cycles) escape.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shiftfix.api import SPEED_OF_LIGHT_M_S

REASONS = (
    "",
    "first of an arc",
    "first of an arc after a gap",
    "loss of lock",
    "half-cycle ambiguity changed",
    "power failure",
    "millisecond clock reset",
    "cycle slip: phase minus code",
    "cycle slip: L1 minus L2",
    "another signal is tracked",
)
START, GAP, LOCK, HALF, POWER, RESET, CODE_SLIP, BAND_SLIP, SIGNAL = range(1, 10)

MILLISECOND_M = SPEED_OF_LIGHT_M_S * 1e-3
_SAME_JUMP_M = 2e3  # satellites share a reset to this: 30 s times the change of range rate between neighbours
_CODE_SLIP_M = 4.0
_BAND_SLIP_M = 0.04
_TIMES_NOISE = 6.0
_MAX_GAP = 1.5  # of the recording interval


@dataclass
class PhaseGrid:
    """What one station observed.

    Parameters
    ----------
    time_tai_ns : ndarray (e,)
        Ascending tags.
    interval_s : float
        Recording interval.
    phase_m, code_m : list of ndarray (e, s)
        One a band.
    lost, half : ndarray (e, s) of bool
        Loss-of-lock bit and half-cycle bit, of either band.
    power_failure : ndarray (e,) of bool
    signal : ndarray (e, s) of int
        Number of the set of signals in use.
    """

    time_tai_ns: np.ndarray
    interval_s: float
    phase_m: list[np.ndarray]
    code_m: list[np.ndarray]
    lost: np.ndarray
    half: np.ndarray
    power_failure: np.ndarray
    signal: np.ndarray


def recording_interval_s(time_tai_ns: np.ndarray) -> float:
    """Return the commonest spacing of the tags [s], rounded to 1 ms (0 for a single epoch)."""
    if len(time_tai_ns) < 2:
        return 0.0
    spacing = np.round(np.diff(time_tai_ns) * 1e-6).astype(np.int64)
    values, counts = np.unique(spacing, return_counts=True)
    return float(values[np.argmax(counts)]) * 1e-3


def millisecond_resets(grid: PhaseGrid) -> np.ndarray:
    """Return, for each epoch, whether the receiver clock was reset by whole milliseconds since the epoch before.

    Seen in the phase, in the code or in the tags alone: at least half of the satellites jump by the same amount, at
    least half a millisecond of light, against the rate of the neighbouring steps.
    """
    step_s, adjacent = _steps(grid)
    out = np.zeros(len(grid.time_tai_ns), bool)
    out[1:] = adjacent & (np.abs(step_s - grid.interval_s) > 0.5e-3)
    for values in (grid.phase_m[0], grid.code_m[0]):
        rate = np.diff(values, axis=0) / step_s[:, None]
        rate[~adjacent] = np.nan
        jump = (rate - _neighbours(rate)) * step_s[:, None]
        common = _median(jump, 1)
        together = np.abs(jump - common[:, None]) < _SAME_JUMP_M
        share = together.sum(1) / np.maximum(np.isfinite(jump).sum(1), 1)
        whole = np.round(common / MILLISECOND_M)
        near = np.abs(common - whole * MILLISECOND_M) < _SAME_JUMP_M
        with np.errstate(invalid="ignore"):
            out[1:] |= (np.abs(whole) >= 1) & near & (share >= 0.5)
    return out


def phase_arcs(grid: PhaseGrid, usable: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the number of the unbroken record of every observation, and why that record began (index of `REASONS`).

    Parameters
    ----------
    grid : PhaseGrid
    usable : ndarray (e, s) of bool
        Observations that may be part of a record.

    Returns
    -------
    arc, began : ndarray (e, s) of int
        0 where not usable.
    """
    step_s, adjacent = _steps(grid)
    epochs, satellites = usable.shape
    why = np.zeros((epochs, satellites), np.int8)
    if not epochs:
        return why.astype(int), why
    before = np.vstack([np.zeros((1, satellites), bool), usable[:-1]])
    near = np.concatenate([[False], adjacent])[:, None]

    def mark(where: np.ndarray, reason: int) -> None:
        why[(why == 0) & where] = reason

    mark(~(before & near), GAP)
    mark(np.broadcast_to(millisecond_resets(grid)[:, None], why.shape), RESET)
    mark(np.broadcast_to(grid.power_failure[:, None], why.shape), POWER)
    mark(grid.lost, LOCK)
    mark(np.vstack([np.zeros((1, satellites), bool), grid.half[1:] != grid.half[:-1]]), HALF)
    mark(np.vstack([np.zeros((1, satellites), bool), grid.signal[1:] != grid.signal[:-1]]), SIGNAL)
    usual = usable & (why == 0)
    mark(code_slips(grid, usual), CODE_SLIP)
    if len(grid.phase_m) > 1:
        mark(band_slips(grid, usual & (why == 0)), BAND_SLIP)
    why[~usable] = 0
    seen_before = np.cumsum(usable, axis=0) - usable > 0
    why[(why == GAP) & ~seen_before] = START
    arc = np.where(usable, np.cumsum(why > 0, axis=0), 0)
    return arc, _carried(why)


def code_slips(grid: PhaseGrid, usual: np.ndarray) -> np.ndarray:
    """Return where phase minus code jumps to another level since the epoch before.

    The step must exceed 4 m and 6 times the noise of the ten steps about it, and so must, but for a quarter, the
    difference of the medians of three epochs before and after: a single wrong code range is not a slip.
    """
    out = np.zeros(usual.shape, bool)
    for phase, code in zip(grid.phase_m, grid.code_m, strict=True):
        step = np.where(usual[1:], np.diff(phase - code, axis=0), np.nan)
        before = [_shifted(step, -1), _shifted(step, -2)]
        after = [_shifted(step, 1), _shifted(step, 2)]
        zero = np.zeros_like(step)
        level = step + _median(np.stack([zero, after[0], after[0] + after[1]]), 0)
        level -= _median(np.stack([zero, -before[0], -before[0] - before[1]]), 0)
        noise = 1.4826 * np.nan_to_num(_median(np.abs(_window(step, 5)), 0))
        limit = np.maximum(_CODE_SLIP_M, _TIMES_NOISE * noise)
        with np.errstate(invalid="ignore"):
            out[1:] |= (np.abs(step) > limit) & (np.abs(level) > 0.75 * limit)
    return out


def band_slips(grid: PhaseGrid, usual: np.ndarray) -> np.ndarray:
    """Return where L1 - L2 jumps against the neighbouring steps: by 4 cm and 6 times their noise."""
    step_s, _ = _steps(grid)
    rate = np.where(usual[1:], np.diff(grid.phase_m[0] - grid.phase_m[1], axis=0), np.nan) / step_s[:, None]
    off = (rate - _neighbours(rate)) * step_s[:, None]
    noise = 1.4826 * np.nan_to_num(_median(np.abs(_window(off, 5)), 0))
    out = np.zeros(usual.shape, bool)
    with np.errstate(invalid="ignore"):
        out[1:] = np.abs(off) > np.maximum(_BAND_SLIP_M, _TIMES_NOISE * noise)
    return out


def _steps(grid: PhaseGrid) -> tuple[np.ndarray, np.ndarray]:
    """Return the time between consecutive epochs [s] and whether no epoch is missing between them."""
    step_s = np.diff(grid.time_tai_ns) * 1e-9
    return step_s, (step_s < _MAX_GAP * grid.interval_s) & (step_s > grid.interval_s / _MAX_GAP)


def _neighbours(rate: np.ndarray) -> np.ndarray:
    """Return the median of the two steps before and the two after each step."""
    return _median(_window(rate, 2), 0)


def _window(values: np.ndarray, reach: int) -> np.ndarray:
    """Return the neighbours of each row, `reach` before and after it, without itself, along a new first axis."""
    return np.stack([_shifted(values, k) for k in range(-reach, reach + 1) if k])


def _shifted(values: np.ndarray, by: int) -> np.ndarray:
    """Return the rows `by` later, NaN past the ends."""
    out = np.full_like(values, np.nan)
    n = len(values)
    if abs(by) < n:
        out[max(-by, 0) : n - max(by, 0)] = values[max(by, 0) : n + min(by, 0)]
    return out


def _median(values: np.ndarray, axis: int) -> np.ndarray:
    """Return the median of the finite values; NaN where there are none."""
    import warnings

    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)
        return np.nanmedian(values, axis=axis)


def _carried(why: np.ndarray) -> np.ndarray:
    """Return, for each observation, the reason with which its record began."""
    row = np.where(why > 0, np.arange(len(why))[:, None], 0)
    return np.take_along_axis(why, np.maximum.accumulate(row, axis=0), axis=0)
