"""Editing of rows: gross outliers before a fit, robust weights and three-state flags after it; all reversible."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shiftfix.estimation.observations import Observations

NEGLIGIBLE_WEIGHT = 1e-12
"""Weight of a rejected row: its variance grows a million-million-fold, which equals leaving it out."""


@dataclass(frozen=True)
class Gates:
    """Limits in units of the robust spread of the normalised residuals.

    Parameters
    ----------
    downweight_1, reject_1 : float
        Beyond the first a row loses weight (Huber 1964), beyond the second it is rejected.
    keep_all : bool
        Give every row its full weight.
    """

    downweight_1: float = 3.0
    reject_1: float = 6.0
    keep_all: bool = False


def gross_outliers(rows: Observations, half_width: int = 6, factor: float = 12.0) -> np.ndarray:
    """Return a mask of rows that lie far off the running median of their own station.

    A running median over 2 x half_width + 1 rows follows any smooth Doppler curve; rows farther than `factor` times the
    median deviation of their neighbourhood are gross (a smooth curve with white noise exceeds 12 in less than 1e-9 of
    cases). Stations with fewer than 2 x half_width + 1 rows are left alone.
    """
    out = np.zeros(len(rows), bool)
    width = 2 * half_width + 1
    for s in np.unique(rows.station):
        index = np.flatnonzero(rows.station == s)
        if index.size < width:
            continue
        order = index[np.argsort(rows.middle_s[index], kind="stable")]
        t, z = rows.middle_s[order], rows.z[order]
        windows = np.lib.stride_tricks.sliding_window_view(np.arange(order.size), width)
        windows = np.vstack([np.repeat(windows[:1], half_width, 0), windows, np.repeat(windows[-1:], half_width, 0)])
        # The local line through the medians of both halves takes the slope out, so that steep parts are not cut.
        tw, zw = t[windows], z[windows]
        left, right = slice(0, half_width), slice(half_width + 1, width)
        dt = _medians(tw[:, right]) - _medians(tw[:, left])
        slope = (_medians(zw[:, right]) - _medians(zw[:, left])) / np.where(dt > 0, dt, 1.0)
        level = zw - slope[:, None] * (tw - t[:, None])
        centre = _medians(level)
        spread = 1.4826 * _medians(np.abs(level - centre[:, None]))
        out[order] = np.abs(z - centre) > factor * np.maximum(spread, 3.0 * rows.sigma[order])
    return out


def _medians(rows: np.ndarray) -> np.ndarray:
    """Return the median of each short row; sorting beats the general median by far here."""
    ordered = np.sort(rows, axis=1)
    half = rows.shape[1] // 2
    return ordered[:, half] if rows.shape[1] % 2 else 0.5 * (ordered[:, half - 1] + ordered[:, half])


def robust_spread(normalised: np.ndarray) -> float:
    """Return 1.4826 x median |normalised residual|: 1 for Gaussian noise of the stated size."""
    return float(1.4826 * np.median(np.abs(normalised))) if normalised.size else 1.0


def robust_weights(normalised: np.ndarray, gates: Gates, station: np.ndarray | None = None) -> np.ndarray:
    """Return weights in (0, 1] from residuals in units of their 1-sigma; rejected rows get NEGLIGIBLE_WEIGHT.

    The gates widen with the robust spread of the station when it exceeds 1, so that a too small stated sigma does not
    reject good rows, and a poor station's noise does not hide a good one's outliers.
    """
    if gates.keep_all:
        return np.ones_like(normalised)
    size = np.abs(normalised)
    for s in np.unique(station) if station is not None else (None,):
        mine = slice(None) if s is None else station == s
        size[mine] = size[mine] / max(robust_spread(normalised[mine]), 1.0)
    weights = np.minimum(1.0, gates.downweight_1 / np.maximum(size, 1e-300))
    return np.where(size > gates.reject_1, NEGLIGIBLE_WEIGHT, weights)
