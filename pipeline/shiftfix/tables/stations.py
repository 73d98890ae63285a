"""StationTable: where each station was, what its oscillator and clock are worth, and for how long that holds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from shiftfix.tables.ephemeris import Ephemeris
from shiftfix.tables.schema import Column, Table


@dataclass(frozen=True, eq=False, kw_only=True)
class StationTable(Table):
    """Stations, one row a station and validity span.

    Positions are ITRS Cartesian of the antenna reference point at `position_epoch_tai_ns`; a station with an entry in
    `ephemerides` moves, and its x, y, z are NaN. `offset_1` is the fractional frequency offset of the station's
    reference: received = true x (1 + offset). A time tag reads `true time + bias`.

    Parameters
    ----------
    ephemerides : mapping of station_id to Ephemeris
        Motion of moving stations.
    sources : tuple
        Files read, as in FrequencyTable.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("station_id", "text", "name of the station"),
        Column("x_m", "float", "ITRS x", nullable=True),
        Column("y_m", "float", "ITRS y", nullable=True),
        Column("z_m", "float", "ITRS z", nullable=True),
        Column("vx_m_s", "float", "ITRS velocity x (plate motion)", default=0.0),
        Column("vy_m_s", "float", "ITRS velocity y", default=0.0),
        Column("vz_m_s", "float", "ITRS velocity z", default=0.0),
        Column("position_epoch_tai_ns", "int", "epoch of the position", default=0),
        Column("position_sigma_m", "float", "1-sigma of each coordinate", default=1.0, minimum=0.0),
        Column("reference_class", "text", "class of the frequency reference", default="unknown"),
        Column("offset_1", "float", "prior of the fractional offset", default=0.0),
        Column(
            "offset_sigma_1",
            "float",
            "its 1-sigma; inf means unknown",
            default=float("inf"),
            nullable=True,
            minimum=0.0,
        ),
        Column("drift_1_s", "float", "prior of the drift of the offset", default=0.0),
        Column("drift_sigma_1_s", "float", "its 1-sigma", default=0.0, nullable=True, minimum=0.0),
        Column("clock_class", "text", "class of the time tags", default="unknown"),
        Column("time_bias_s", "float", "prior of the time-tag bias", default=0.0),
        Column("time_sigma_s", "float", "its 1-sigma", default=0.0, minimum=0.0),
        Column("chain_sign_1", "float", "receiver chain: sky = sign x tone + constant; 0 without one", default=0.0),
        Column("chain_constant_hz", "float", "constant of the receiver chain", default=0.0),
        Column("valid_from_tai_ns", "int", "first time of validity", default=-(2**62)),
        Column("valid_until_tai_ns", "int", "last time of validity", default=2**62),
    )
    ephemerides: Mapping[str, Ephemeris] = field(default_factory=dict)
    sources: tuple = ()
