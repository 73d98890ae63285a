"""From the columns of station, ephemeris and orientation tables to receivers, paths and the Earth frame of an arc.

Tables are taken by their columns (`array`), so that this room does not depend on the tables themselves.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable
from typing import Any

import numpy as np

from shiftfix.errors import CoverageError, InputError, Problem
from shiftfix.estimation.receivers import Receiver, ShiftedPath, ground_receiver
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.motion.bodies import SunMoon
from shiftfix.physics.motion.sampled import SampledPath
from shiftfix.physics.timescales import utc_text

_COLUMNS = ("mjd_utc_1", "ut1_minus_tai_s", "xp_rad", "yp_rad", "dx_rad", "dy_rad")


def earth_frame(
    epoch_tai_ns: int, span_s: tuple[float, float], orientation: Any, degraded: bool = False
) -> tuple[EarthFrame, list[str]]:
    """Return the Earth frame of an arc and what the report must say about it.

    Parameters
    ----------
    epoch_tai_ns : int
    span_s : tuple of float
        [s past the epoch].
    orientation : EarthOrientation
    degraded : bool
        Whether to do without the table.

    Raises
    ------
    CoverageError
        When the span lies outside the table.
    """
    if degraded:
        frame = EarthFrame.without_orientation(epoch_tai_ns, span_s)
        return frame, [
            f"no Earth orientation is used: UT1 = UTC (within 0.9 s) and no polar motion; positions are uncertain by up to "
            f"{frame.bound_m:.0f} m in longitude, which the error includes"
        ]
    try:
        frame = EarthFrame.from_orientation(epoch_tai_ns, span_s, *(orientation.array(c) for c in _COLUMNS))
    except ValueError as error:
        raise CoverageError(
            Problem(
                f"Earth orientation ({orientation.name})",
                "the arc lies outside the table",
                found=str(error).replace("\n", "; "),
                allowed=f"times of the table; observed values end at MJD {orientation.last_observed_mjd:.0f}",
                remedy='give a newer table, or earth_orientation = "degraded" for a wider error',
            )
        ) from error
    mjd = float(orientation.array("mjd_utc_1")[-1])
    notes = []
    last = 40587.0 + (epoch_tai_ns * 1e-9 + span_s[1] - 37.0) / 86400.0
    if orientation.leap_seconds_hold_until_mjd and last > orientation.leap_seconds_hold_until_mjd:
        notes.append(
            f"leap seconds are known until MJD {orientation.leap_seconds_hold_until_mjd:.0f} only; UTC after it may be a second off: "
            "update the package astropy-iers-data"
        )
    if last > orientation.last_observed_mjd:
        notes.append(
            f"Earth orientation is predicted, not observed, after MJD {orientation.last_observed_mjd:.0f} (table ends at {mjd:.0f})"
        )
    return frame, notes


def station_entries(
    stations: Any, names: tuple[str, ...], station_ids: np.ndarray, times: np.ndarray, where: Callable[[int], str]
) -> dict[str, int]:
    """Return the row of the station table that is valid for each station over its data.

    Parameters
    ----------
    stations : StationTable
    names : tuple of str
    station_ids, times : ndarray, shape (n,)
        Of the data rows; times in nanoseconds of TAI.
    where : callable
        `where(row)`: file and line of a data row.

    Raises
    ------
    InputError
        With every station that has no valid entry.
    """
    known = stations.array("station_id").astype(str)
    problems, entries = [], {}
    for name in names:
        rows = np.flatnonzero(known == name)
        if not rows.size:
            close = difflib.get_close_matches(name, known, 1)
            problems.append(
                Problem(
                    where(int(np.flatnonzero(station_ids == name)[0])),
                    f"station '{name}' is not in the station book",
                    allowed=", ".join(known),
                    remedy=f"did you mean {close[0]}?" if close else "add it to the station book",
                )
            )
            continue
        mine = times[station_ids == name]
        first, last = stations.array("valid_from_tai_ns"), stations.array("valid_until_tai_ns")
        valid = [int(r) for r in rows if first[r] <= mine.min() and mine.max() <= last[r]]
        if not valid:
            problems.append(
                Problem(
                    f"station {name}",
                    "no entry of the station book is valid over the whole arc",
                    found=f"{utc_text(int(mine.min()))} to {utc_text(int(mine.max()))}",
                    remedy="split the arc where the station changed, or extend valid_from / valid_until",
                )
            )
            continue
        entries[name] = valid[0]
    if problems:
        raise InputError(problems)
    return entries


def station_receiver(stations: Any, row: int, frame: EarthFrame, epoch_tai_ns: int) -> Receiver:
    """Return the receiver of one row of a station table."""
    name = str(stations.array("station_id")[row])

    def value(column: str) -> float:
        return float(stations.array(column)[row])

    def prior(column: str) -> float:
        return value(column) if np.isfinite(value(column)) else float("inf")

    priors = dict(
        offset=value("offset_1"),
        offset_sigma=prior("offset_sigma_1"),
        drift_per_s=value("drift_1_s"),
        drift_sigma_per_s=value("drift_sigma_1_s"),
        time_bias_s=value("time_bias_s"),
        time_sigma_s=value("time_sigma_s"),
        position_sigma_m=value("position_sigma_m"),
    )
    if name in stations.ephemerides:
        path = sampled_path(stations.ephemerides[name], name, frame, epoch_tai_ns)
        return Receiver(name, path, moving=True, shifted=lambda delta: ShiftedPath(path, delta), **priors)
    position = np.array([value("x_m"), value("y_m"), value("z_m")])
    velocity = np.array([value("vx_m_s"), value("vy_m_s"), value("vz_m_s")])
    if velocity.any():
        position = position + velocity * (epoch_tai_ns - int(stations.array("position_epoch_tai_ns")[row])) * 1e-9
    return ground_receiver(name, frame, position, velocity, SunMoon(epoch_tai_ns, frame.span_s), **priors)


def sampled_path(ephemeris: Any, name: str, frame: EarthFrame, epoch_tai_ns: int) -> SampledPath:
    """Return the interpolated path of one object of an ephemeris, times in seconds past the epoch."""
    objects = ephemeris.array("object_id").astype(str)
    mine = np.flatnonzero(objects == name) if name in objects else np.arange(len(objects))
    times = (ephemeris.array("time_tai_ns")[mine] - epoch_tai_ns) * 1e-9
    position = np.column_stack([ephemeris.array(c)[mine] for c in ("x_m", "y_m", "z_m")])
    velocity = np.column_stack([ephemeris.array(c)[mine] for c in ("vx_m_s", "vy_m_s", "vz_m_s")])
    return SampledPath(
        times,
        position,
        velocity if np.isfinite(velocity).all() else None,
        frame if ephemeris.frame == "ITRS" else None,
        segment=ephemeris.array("segment_1")[mine],
        name=name,
    )
