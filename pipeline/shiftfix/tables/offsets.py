"""OffsetTable: history of station offsets with their uncertainty, as a prior for the fix."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from shiftfix.tables.schema import Column, Table


@dataclass(frozen=True, eq=False, kw_only=True)
class OffsetTable(Table):
    """Mean fractional offset of each station's reference over intervals.

    Consecutive rows of one `phase_arc_id` are differences of one clock-phase history: their errors share the end
    epochs, with the 1-sigma `phase_sigma_s` of the clock phase at each end (white from epoch to epoch).

    Parameters
    ----------
    datum : str
        What defines frequency for these offsets.
    findings : tuple of str
        What the calibration saw (rejected rows, non-white residuals, rate of the reference).
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("station_id", "text", "station"),
        Column("time_tai_ns", "int", "middle of the interval"),
        Column("interval_s", "float", "length of the interval", minimum=0.0),
        Column("offset_1", "float", "mean fractional offset"),
        Column("offset_sigma_1", "float", "1-sigma that is independent from row to row", minimum=0.0),
        Column("common_sigma_1", "float", "1-sigma that all rows of the station share", default=0.0, minimum=0.0),
        Column("phase_sigma_s", "float", "1-sigma of the clock phase at the ends", default=0.0, minimum=0.0),
        Column("phase_arc_id", "text", "unbroken clock-phase history", default=""),
        Column("time_offset_start_s", "float", "time tag minus true time at the start", default=0.0),
        Column("time_offset_stop_s", "float", "time tag minus true time at the end", default=0.0),
        Column(
            "zenith_correction_m",
            "float",
            "zenith tropospheric delay minus that of the standard atmosphere",
            default=0.0,
        ),
        Column("known_emitters_1", "int", "number of known emitters used", default=0),
    )
    datum: str = ""
    findings: tuple[str, ...] = ()
