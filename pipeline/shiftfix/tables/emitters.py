"""EmitterTable: emitters whose motion and rest frequency are known, to calibrate stations with."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from shiftfix.tables.schema import Column, Table


@dataclass(frozen=True, eq=False, kw_only=True)
class EmitterTable(Table):
    """Known emitters, one row an emitter; x, y, z are NaN for one whose motion stands in an ephemeris.

    Parameters
    ----------
    sources : tuple
        Files read, as in FrequencyTable.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("emitter_id", "text", "name of the emitter, as in the frequency table"),
        Column("rest_frequency_hz", "float", "rest frequency in its own frame", minimum=0.0, strict_minimum=True),
        Column("rest_frequency_sigma_hz", "float", "its 1-sigma", minimum=0.0),
        Column("x_m", "float", "ITRS x", default=float("nan"), nullable=True),
        Column("y_m", "float", "ITRS y", default=float("nan"), nullable=True),
        Column("z_m", "float", "ITRS z", default=float("nan"), nullable=True),
    )
    sources: tuple = ()
