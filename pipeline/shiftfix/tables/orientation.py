"""EarthOrientation: polar motion, UT1 and celestial pole offsets with their span, from a bundled or given table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from shiftfix.tables.schema import Column, Table


@dataclass(frozen=True, eq=False, kw_only=True)
class EarthOrientation(Table):
    """Daily Earth-orientation values (IERS).

    Parameters
    ----------
    name : str
        Name and version of the table, for provenance.
    last_observed_mjd : float
        Last day with observed, not predicted, values.
    leap_seconds_hold_until_mjd : float
        Day until which no leap second beyond the known ones can come; 0 when not stated.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("mjd_utc_1", "float", "modified Julian date, UTC, 0 h"),
        Column("ut1_minus_tai_s", "float", "UT1 - TAI, continuous across leap seconds"),
        Column("xp_rad", "float", "pole x"),
        Column("yp_rad", "float", "pole y"),
        Column("dx_rad", "float", "celestial pole offset dX"),
        Column("dy_rad", "float", "celestial pole offset dY"),
    )
    name: str = ""
    last_observed_mjd: float = 0.0
    leap_seconds_hold_until_mjd: float = 0.0
