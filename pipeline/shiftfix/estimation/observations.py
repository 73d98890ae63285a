"""Observations of one arc as arrays: what the observation equation and the noise model need of a frequency table.

All times are seconds of TT past the arc epoch, at reception, corrected for the known part of the time-tag error;
the observable is z = ln(received frequency / reference frequency).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np


@dataclass(frozen=True, eq=False)
class Observations:
    """Rows of one arc.

    Parameters
    ----------
    station : ndarray of int, shape (n,)
        Index of the receiver.
    start_s, stop_s : ndarray, shape (n,)
        Ends of the count interval; equal for an instantaneous value.
    z : ndarray, shape (n,)
        ln(received / `reference_hz`), less the part of the station offset that was calibrated.
    sigma : ndarray, shape (n,)
        1-sigma of z that belongs to this row.
    chained : ndarray of bool, shape (n,)
        Whether the row continues the phase record of the row before it (same station, adjoining interval).
    reference_hz : float
        Frequency that makes the logarithm small.
    zenith_correction_m : ndarray, shape (n,)
        Correction of the zenith tropospheric delay of the standard atmosphere, from calibration.
    group : ndarray of int, shape (n,)
        Index of the arc or pass, for piecewise models.
    """

    station: np.ndarray
    start_s: np.ndarray
    stop_s: np.ndarray
    z: np.ndarray
    sigma: np.ndarray
    chained: np.ndarray
    reference_hz: float
    zenith_correction_m: np.ndarray
    group: np.ndarray

    def __len__(self) -> int:
        return len(self.z)

    @property
    def middle_s(self) -> np.ndarray:
        """Middle of the interval [s]."""
        return 0.5 * (self.start_s + self.stop_s)

    @property
    def interval_s(self) -> np.ndarray:
        """Length of the interval [s], 0 for instantaneous values."""
        return self.stop_s - self.start_s

    def select(self, rows: np.ndarray) -> Observations:
        """Return the rows of a mask or index; a row whose predecessor is left out starts a new chain."""
        index = np.flatnonzero(rows) if np.asarray(rows).dtype == bool else np.asarray(rows)
        kept = np.zeros(len(self) + 1, bool)
        kept[index + 1] = True
        chained = self.chained[index] & kept[index]
        if len(index) > 1:
            chained[1:] &= np.diff(index) == 1
        return replace(
            self,
            station=self.station[index],
            start_s=self.start_s[index],
            stop_s=self.stop_s[index],
            z=self.z[index],
            sigma=self.sigma[index],
            chained=chained,
            zenith_correction_m=self.zenith_correction_m[index],
            group=self.group[index],
        )


def observations(
    *,
    station: np.ndarray,
    middle_s: np.ndarray,
    interval_s: np.ndarray,
    received_hz: np.ndarray,
    sigma_hz: np.ndarray,
    reference_hz: float,
    phase_arc: np.ndarray | None = None,
    calibrated_offset: np.ndarray | float = 0.0,
    zenith_correction_m: np.ndarray | float = 0.0,
    start_correction_s: np.ndarray | float = 0.0,
    stop_correction_s: np.ndarray | float = 0.0,
    group: np.ndarray | None = None,
) -> tuple[Observations, np.ndarray]:
    """Return observations ordered by station, phase record and time, with the order that was applied.

    Parameters
    ----------
    station : ndarray of int, shape (n,)
    middle_s, interval_s : ndarray, shape (n,)
        Middle and length of the count intervals as tagged [s past the arc epoch].
    received_hz, sigma_hz : ndarray, shape (n,)
    reference_hz : float
    phase_arc : ndarray of str, shape (n,), optional
        Rows with the same non-empty text are counts of one unbroken phase record.
    calibrated_offset : ndarray or float
        Fractional offset of the station that is known and is taken off z.
    start_correction_s, stop_correction_s : ndarray or float
        Tag minus true time at the ends of the interval.
    group : ndarray of int, optional

    Returns
    -------
    Observations, ndarray of int
        Row i of the observations is row order[i] of the arguments.
    """
    n = len(station)
    arcs = np.full(n, "") if phase_arc is None else np.asarray(phase_arc, str)
    order = np.lexsort((middle_s, arcs, station))
    take = lambda a: np.broadcast_to(np.asarray(a, float), (n,))[order]  # noqa: E731
    middle, interval = take(middle_s), take(interval_s)
    start_tag, stop_tag = middle - 0.5 * interval, middle + 0.5 * interval
    received = take(received_hz)
    station, arcs = np.asarray(station)[order], arcs[order]
    chained = np.zeros(n, bool)
    if n > 1:
        # Intervals adjoin when the gap is below a microsecond: a clock reset or a lost count is far larger.
        adjoin = np.abs(start_tag[1:] - stop_tag[:-1]) < 1e-6
        chained[1:] = adjoin & (arcs[1:] == arcs[:-1]) & (arcs[1:] != "") & (station[1:] == station[:-1])
        chained[1:] &= interval[1:] > 0
    out = Observations(
        station=station.astype(np.int64),
        start_s=start_tag - take(start_correction_s),
        stop_s=stop_tag - take(stop_correction_s),
        z=np.log1p((received - reference_hz) / reference_hz) - take(calibrated_offset),
        sigma=take(sigma_hz) / received,
        chained=chained,
        reference_hz=float(reference_hz),
        zenith_correction_m=take(zenith_correction_m),
        group=np.zeros(n, np.int64) if group is None else np.asarray(group, np.int64)[order],
    )
    return out, order
