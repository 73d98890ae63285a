"""Node `ingest.positions`: sampled positions of movers as delimited text, to an ephemeris (ships, aircraft, satellites).

A wrong position bends a path, so that every unusable row refuses the file.
"""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import Ephemeris, InputError, Problem, Source, itrs_from_geodetic, param, parse_quantity
from shiftfix_ingest.source_files import SourceFile, open_sources, repeat_problems
from shiftfix_ingest.text_table import TextTable, read_text_table
from shiftfix_ingest.text_values import TIME_UNITS, numbers, times, why_no_number

_GEODETIC = ("latitude", "longitude", "height")
_CARTESIAN = ("x", "y", "z")
_TIME = ("time", "date", "week")
_ROLES = (*_TIME, "object", *_GEODETIC, *_CARTESIAN, "vx", "vy", "vz", "clock")
_UNIT = (
    {r: "m" for r in (*_CARTESIAN, "height")}
    | {r: "deg" for r in ("latitude", "longitude")}
    | {r: "m/s" for r in ("vx", "vy", "vz")}
    | {"clock": "s"}
)
_BOUNDS = {"latitude": (-90.0, 90.0, "deg"), "longitude": (-180.0, 360.0, "deg"), "height": (-500.0, 5e7, "m")}
_FASTEST_M_S = 12_000.0  # above escape velocity at the surface
_SHOWN = 20


@dataclass(frozen=True)
class PositionsParams:
    """Parameters of `ingest.positions`."""

    files: tuple = param("text files, plain or gzip", path="files")
    columns: dict = param("what stands where: role = header name, or number; roles " + ", ".join(_ROLES), default={})
    units: dict = param("unit of a column by role; SI and degrees when absent", default={})
    time_scale: str = param("scale of the time column", default="", choices=("UTC", "TAI", "TT", "GPS"))
    time_format: str = param(
        "iso: calendar or day-of-year text; gps: week and count of the week; posix: count since 1970 without leap seconds",
        default="iso",
        choices=("iso", "gps", "posix"),
    )
    unmarked_utc: bool = param(
        "whether UTC times may lack their Z, because the logger is known to write UTC", default=False
    )
    object: str = param("name of the mover where no column has it", default="")
    frame: str = param("frame of x, y, z", default="ITRS", choices=("ITRS", "GCRS"))
    height_kind: str = param("of the height column", default="", choices=("ellipsoid", "sea level"))
    undulation: float | None = param(
        "geoid above the ellipsoid, for heights above sea level", default=None, unit="m", minimum=-120.0, maximum=120.0
    )
    position_sigma: float = param("1-sigma of each coordinate", default=10.0, unit="m", minimum=0.0)
    clock_without_relativity: bool = param(
        "whether the clock column lacks the periodic relativistic term", default=True
    )
    separator: str = param(
        "field separator: one character, or `whitespace`; empty: found from the first line", default=""
    )
    decimal: str = param("decimal mark", default=".", choices=(".", ","))
    comment: str = param("lines that begin with it are left out", default="#")
    header: bool = param("whether the first line names the columns", default=True)
    skip: int = param("lines before the header that are left out", default=0, minimum=0)
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


def read_positions(inputs: Any, params: PositionsParams, context: Any) -> dict[str, Ephemeris]:
    """Return the ephemeris of all files, ordered by object and time.

    Raises
    ------
    InputError
        All problems at once, each with file and line.
    """
    problems = _declaration_problems(params, f"nodes.{context.node}.params")
    files, opening, notes = open_sources(params.files, context.display_path)
    problems += opening + repeat_problems(notes, params.on_repeat)
    if any(p.where.startswith("nodes.") for p in problems):
        raise InputError(problems)
    frames, sources = [], []
    for file in files:
        context.check_cancelled()
        frame, trouble = _read(file, params)
        problems += trouble
        if frame is not None:
            frames.append(frame)
            sources.append(Source(file.name, file.sha256, len(frame), len(frame), 0))
    rows = pd.concat(frames, ignore_index=True) if frames else pd.DataFrame()
    if len(rows):
        rows = rows.sort_values(["object_id", "time_tai_ns"], kind="stable", ignore_index=True)
        problems += _path_problems(rows, "latitude" in params.columns or params.frame == "ITRS")
    if problems:
        raise InputError(problems)
    for note in notes:
        context.logger.warning(note)
    return {
        "ephemeris": Ephemeris(
            rows=rows.drop(columns=["source", "row_number"]),
            frame="ITRS" if "latitude" in params.columns else params.frame,
            sources=tuple(sources),
            position_sigma_m=params.position_sigma,
            clock_excludes_periodic_relativity=params.clock_without_relativity,
        )
    }


def _declaration_problems(params: PositionsParams, where: str) -> list[Problem]:
    out = []
    for role in params.columns:
        if role not in _ROLES:
            close = difflib.get_close_matches(role, _ROLES, 1)
            remedy = f"did you mean {close[0]}?" if close else ""
            out.append(Problem(f"{where}.columns.{role}", "unknown role of a column", role, ", ".join(_ROLES), remedy))
    geodetic, cartesian = ([r for r in kind if r in params.columns] for kind in (_GEODETIC, _CARTESIAN))
    if (len(geodetic), len(cartesian)) not in ((3, 0), (0, 3)):
        out.append(
            Problem(
                f"{where}.columns",
                "a position is latitude, longitude and height, or x, y and z",
                found=", ".join(geodetic + cartesian),
            )
        )
    if "time" not in params.columns:
        out.append(
            Problem(f"{where}.columns", "the time column is not declared", allowed='columns = { time = "NAME" }')
        )
    if not params.time_scale:
        out.append(Problem(f"{where}.time_scale", "time without scale", allowed="UTC, TAI, TT, GPS"))
    wanted = {"gps": "GPS", "posix": "UTC"}.get(params.time_format, params.time_scale)
    if params.time_scale and params.time_scale != wanted:
        out.append(
            Problem(f"{where}.time_scale", f"not the scale of {params.time_format} times", params.time_scale, wanted)
        )
    if (params.time_format == "gps") != ("week" in params.columns):
        out.append(Problem(f"{where}.columns.week", 'a week column and time_format = "gps" go together'))
    if "object" not in params.columns and not params.object:
        out.append(
            Problem(
                f"{where}.object",
                "no name of the mover: neither a column nor a value",
                remedy='object = "NAME" or columns.object',
            )
        )
    if geodetic and not params.height_kind:
        out.append(Problem(f"{where}.height_kind", "the kind of height is not said", allowed="ellipsoid, sea level"))
    if params.height_kind == "sea level" and params.undulation is None:
        out.append(
            Problem(
                f"{where}.undulation",
                "height above sea level without undulation",
                remedy='add undulation = "... m" (geoid above ellipsoid)',
            )
        )
    if params.height_kind == "ellipsoid" and params.undulation is not None:
        out.append(Problem(f"{where}.undulation", "an undulation beside a height above the ellipsoid"))
    for role, unit in params.units.items():
        try:
            if role == "time" and params.time_format != "iso":
                if unit not in TIME_UNITS:
                    raise ValueError(f"found {unit!r}; allowed: {', '.join(TIME_UNITS)}")
            elif role not in _UNIT or role not in params.columns:
                raise ValueError(f"found {role!r}, a column without unit or not declared; allowed: {', '.join(_UNIT)}")
            else:
                parse_quantity(f"1 {unit}", _UNIT[role])
        except ValueError as error:
            out.append(Problem(f"{where}.units.{role}", str(error)))
    return out


def _read(file: SourceFile, params: PositionsParams) -> tuple[pd.DataFrame | None, list[Problem]]:
    table, problem = read_text_table(
        file,
        separator=params.separator,
        comment=params.comment,
        header=params.header,
        skip=params.skip,
        decimal=params.decimal,
    )
    if table is None:
        return None, [problem]
    where, problems = table.place(params.columns)
    if problems:
        return None, problems
    time_ns, reasons = times(
        {role: table.column(where[role]) for role in _TIME if role in where},
        time_format=params.time_format,
        scale=params.time_scale,
        unit=params.units.get("time", "s"),
        require_z=not params.unmarked_utc,
        decimal=params.decimal,
    )
    bad = {int(table.numbers[k]): reason for k, reason in reasons.items()} | dict(table.ragged)
    values = {role: _column(table, where[role], role, params, bad) for role in _UNIT if role in where}
    name = table.column(where["object"]) if "object" in where else np.full(len(table.numbers), params.object, object)
    for k in np.flatnonzero(name == ""):
        bad.setdefault(int(table.numbers[k]), "object is empty")
    if bad:
        lines = sorted(bad)
        out = [Problem(f"{file.name}:{n}", bad[n], found=table.lines[n - 1][:120]) for n in lines[:_SHOWN]]
        if len(lines) > _SHOWN:
            out.append(Problem(file.name, f"{len(lines) - _SHOWN} more unusable rows"))
        return None, out
    if "latitude" in values:
        height = values["height"] + (params.undulation or 0.0)
        position = itrs_from_geodetic(np.radians(values["latitude"]), np.radians(values["longitude"]), height)
    else:
        position = np.column_stack([values[r] for r in _CARTESIAN])
    rows = {"object_id": name, "time_tai_ns": time_ns, "source": file.name, "row_number": table.numbers}
    rows |= dict(zip(("x_m", "y_m", "z_m"), position.T, strict=True))
    rows |= {f"{r}_m_s": values[r] for r in ("vx", "vy", "vz") if r in values}
    if "clock" in values:
        rows["clock_s"] = values["clock"]
    return pd.DataFrame(rows), []


def _column(table: TextTable, index: int, role: str, params: PositionsParams, bad: dict[int, str]) -> np.ndarray:
    """Return a column in SI or degrees; reasons for unusable fields go into `bad` by line number."""
    text = table.column(index)
    factor = parse_quantity(f"1 {params.units[role]}", _UNIT[role]).value if role in params.units else 1.0
    out = numbers(text, params.decimal) * factor
    for k in np.flatnonzero(~np.isfinite(out) & ~((role == "clock") & (text == ""))):
        bad.setdefault(int(table.numbers[k]), f"{role} {why_no_number(text[k], params.decimal)}")
    if role in _BOUNDS:
        low, high, unit = _BOUNDS[role]
        hint = "; are latitude and longitude swapped?" if role == "latitude" else ""
        for k in np.flatnonzero((out < low) | (out > high)):
            bad.setdefault(
                int(table.numbers[k]), f"{role} out of range: {out[k]:g} {unit}, not {low:g} to {high:g}{hint}"
            )
    return out


def _path_problems(rows: pd.DataFrame, earth_fixed: bool) -> list[Problem]:
    """Return problems of paths: two positions at one time, and jumps that no mover makes near the ground."""
    where = (rows["source"] + ":" + rows["row_number"].astype(str)).to_numpy()
    name = rows["object_id"].to_numpy()
    same = name[1:] == name[:-1]
    gap = np.diff(rows["time_tai_ns"].to_numpy()) * 1e-9
    out = [
        Problem(
            where[k + 1], f"two positions of {name[k]} at one time", found=f"the other at {where[k]}", remedy="keep one"
        )
        for k in np.flatnonzero(same & (gap == 0))[:_SHOWN]
    ]
    position = rows[["x_m", "y_m", "z_m"]].to_numpy()
    low = np.linalg.norm(position, axis=1) < 6.5e6
    step = np.linalg.norm(np.diff(position, axis=0), axis=1)
    jump = same & (gap > 0) & low[1:] & low[:-1] & earth_fixed & (step > _FASTEST_M_S * np.maximum(gap, 1e-9))
    out += [
        Problem(
            where[k + 1],
            f"{name[k]} jumps",
            found=f"{step[k] / 1e3:.4g} km in {gap[k]:g} s since {where[k]}",
            allowed=f"up to {_FASTEST_M_S / 1e3:g} km/s",
            remedy="check digits, signs and times of both rows",
        )
        for k in np.flatnonzero(jump)[:_SHOWN]
    ]
    return out
