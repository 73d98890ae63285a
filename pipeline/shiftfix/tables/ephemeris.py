"""Ephemeris: sampled positions of moving stations and known emitters."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from shiftfix.errors import Problem, SchemaError
from shiftfix.tables.schema import Column, Table

FRAMES = ("ITRS", "GCRS")


@dataclass(frozen=True, eq=False, kw_only=True)
class Ephemeris(Table):
    """Sampled states of one or more objects, strictly increasing in time within an object.

    Parameters
    ----------
    frame : {"ITRS", "GCRS"}
        Frame of position and velocity; an ITRS velocity is relative to the rotating frame.
    clock_excludes_periodic_relativity : bool
        Whether `clock_s` lacks the periodic term -2 r.v/c**2 (SP3 convention).
    sources : tuple
        Files read, as in FrequencyTable.
    position_sigma_m : float
        1-sigma of each coordinate, 0 when unknown.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("object_id", "text", "satellite, ship or aircraft"),
        Column("time_tai_ns", "int", "epoch, ns of TAI since 1970"),
        Column("x_m", "float", "position x"),
        Column("y_m", "float", "position y"),
        Column("z_m", "float", "position z"),
        Column("vx_m_s", "float", "velocity x, NaN when not given", default=float("nan"), nullable=True),
        Column("vy_m_s", "float", "velocity y", default=float("nan"), nullable=True),
        Column("vz_m_s", "float", "velocity z", default=float("nan"), nullable=True),
        Column("clock_s", "float", "clock minus system time, NaN when absent", default=float("nan"), nullable=True),
        Column("segment_1", "int", "segment number; no interpolation across segments", default=0),
    )
    frame: str = "ITRS"
    clock_excludes_periodic_relativity: bool = True
    sources: tuple = ()
    position_sigma_m: float = 0.0

    def __post_init__(self) -> None:
        super().__post_init__()
        if self.frame not in FRAMES:
            raise SchemaError(Problem("Ephemeris.frame", "unknown frame", found=self.frame, allowed=", ".join(FRAMES)))
