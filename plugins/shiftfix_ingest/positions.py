"""Node `ingest.positions`: sampled positions of movers as delimited text, to an ephemeris (ships, aircraft, satellites)."""

from __future__ import annotations

import io
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from shiftfix.api import (
    Ephemeris,
    InputError,
    Problem,
    Source,
    itrs_from_geodetic,
    param,
    parse_quantity,
    tai_ns_from_texts,
)
from shiftfix_ingest.source_files import SourceFile, binary_problem, open_sources

_GEODETIC = ("latitude", "longitude", "height")
_CARTESIAN = ("x", "y", "z")
_ROLES = ("time", "object", *_GEODETIC, *_CARTESIAN, "vx", "vy", "vz", "clock")
_UNIT = (
    {r: "m" for r in (*_CARTESIAN, "height")}
    | {r: "deg" for r in ("latitude", "longitude")}
    | {r: "m/s" for r in ("vx", "vy", "vz")}
    | {"clock": "s"}
)


@dataclass(frozen=True)
class PositionsParams:
    """Parameters of `ingest.positions`."""

    files: tuple = param("text files with a header line, plain or gzip", path="files")
    columns: dict = param(
        "what stands where: role = header name; roles time, object, latitude, longitude, height or x, y, z, vx, vy, vz, clock",
        default={},
    )
    units: dict = param("unit of a column by role; SI and degrees when absent", default={})
    time_scale: str = param("scale of the time column", default="", choices=("UTC", "TAI", "TT", "GPS"))
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
    separator: str = param("field separator", default=",")


def read_positions(inputs: Any, params: PositionsParams, context: Any) -> dict[str, Ephemeris]:
    """Return the ephemeris of all files, ordered by object and time.

    Raises
    ------
    InputError
        All problems at once, each with file and line.
    """
    where = f"nodes.{context.node}.params"
    problems = _declaration_problems(params, where)
    files, opening, _ = open_sources(params.files, context.display_path)
    problems += opening + [p for p in (binary_problem(f, "delimited text") for f in files) if p]
    if problems:
        raise InputError(problems)
    frames, sources = [], []
    for file in files:
        frame, trouble = _read(file, params)
        problems += trouble
        if frame is not None:
            frames.append(frame)
            sources.append(Source(file.name, file.sha256, len(frame), len(frame), 0))
    if problems:
        raise InputError(problems)
    rows = pd.concat(frames, ignore_index=True).sort_values(
        ["object_id", "time_tai_ns"], kind="stable", ignore_index=True
    )
    same = (rows["object_id"].to_numpy()[1:] == rows["object_id"].to_numpy()[:-1]) & (np.diff(rows["time_tai_ns"]) == 0)
    if same.any():
        k = int(np.flatnonzero(same)[0])
        raise InputError(
            Problem(files[0].name, f"two positions of {rows['object_id'][k]} at one time", remedy="keep one")
        )
    geodetic = "latitude" in params.columns
    return {
        "ephemeris": Ephemeris(
            rows=rows,
            frame="ITRS" if geodetic else params.frame,
            sources=tuple(sources),
            position_sigma_m=params.position_sigma,
            clock_excludes_periodic_relativity=params.clock_without_relativity,
        )
    }


def _declaration_problems(params: PositionsParams, where: str) -> list[Problem]:
    out = [
        Problem(f"{where}.columns.{r}", "unknown role of a column", found=r, allowed=", ".join(_ROLES))
        for r in params.columns
        if r not in _ROLES
    ]
    geodetic, cartesian = ([r for r in kind if r in params.columns] for kind in (_GEODETIC, _CARTESIAN))
    if (
        len(geodetic) != 3 * bool(geodetic)
        or len(cartesian) != 3 * bool(cartesian)
        or bool(geodetic) == bool(cartesian)
    ):
        out.append(
            Problem(
                f"{where}.columns",
                "a position is latitude, longitude and height, or x, y and z",
                found=", ".join(geodetic + cartesian),
            )
        )
    if "time" not in params.columns:
        out.append(Problem(f"{where}.columns", "the time column is not declared"))
    if not params.time_scale:
        out.append(Problem(f"{where}.time_scale", "time without scale", allowed="UTC, TAI, TT, GPS"))
    if "object" not in params.columns and not params.object:
        out.append(Problem(f"{where}.object", "no name of the mover: neither a column nor a value"))
    if geodetic and not params.height_kind:
        out.append(Problem(f"{where}.height_kind", "the kind of height is not said", allowed="ellipsoid, sea level"))
    if params.height_kind == "sea level" and params.undulation is None:
        out.append(Problem(f"{where}.undulation", "height above sea level without undulation"))
    for role, unit in params.units.items():
        try:
            parse_quantity(f"1 {unit}", _UNIT.get(role, "1"))
        except ValueError as error:
            out.append(Problem(f"{where}.units.{role}", str(error)))
    return out


def _read(file: SourceFile, params: PositionsParams) -> tuple[pd.DataFrame | None, list[Problem]]:
    text = file.data.decode("utf-8-sig", "replace")
    lines = [s for s in text.splitlines() if not s.startswith("#")]
    skipped = len(text.splitlines()) - len(lines)
    table = pd.read_csv(io.StringIO("\n".join(lines)), sep=params.separator, dtype=object, keep_default_na=False)
    missing = [c for c in params.columns.values() if c not in table]
    if missing:
        return None, [Problem(f"{file.name}:1", f"no column {missing[0]!r}", allowed=", ".join(table.columns))]
    if not len(table):
        return None, [Problem(file.name, "the file has no rows")]
    problems: list[Problem] = []
    times, trouble = tai_ns_from_texts(table[params.columns["time"]].to_numpy(object), params.time_scale)
    problems += [Problem(f"{file.name}:{k + 2 + skipped}", message) for k, message in trouble[:20]]
    values: dict[str, np.ndarray] = {}
    for role in _ROLES[2:]:
        if role not in params.columns:
            continue
        factor = parse_quantity(f"1 {params.units[role]}", _UNIT[role]).value if role in params.units else 1.0
        column = pd.to_numeric(table[params.columns[role]], errors="coerce").to_numpy(float) * factor
        bad = np.flatnonzero(~np.isfinite(column)) if role != "clock" else np.empty(0, int)
        problems += [
            Problem(
                f"{file.name}:{k + 2 + skipped}",
                f"{role} is not a finite number",
                found=str(table[params.columns[role]][k]),
            )
            for k in bad[:20]
        ]
        values[role] = column
    if problems:
        return None, problems
    if "latitude" in values:
        if np.abs(values["latitude"]).max() > 90:
            return None, [
                Problem(
                    file.name,
                    "latitude out of range",
                    allowed="-90 to 90 deg",
                    remedy="are latitude and longitude swapped?",
                )
            ]
        height = values["height"] + (params.undulation or 0.0)
        position = itrs_from_geodetic(np.radians(values["latitude"]), np.radians(values["longitude"]), height)
    else:
        position = np.column_stack([values[r] for r in _CARTESIAN])
    name = table[params.columns["object"]] if "object" in params.columns else params.object
    frame = pd.DataFrame(
        {"object_id": name, "time_tai_ns": times, "x_m": position[:, 0], "y_m": position[:, 1], "z_m": position[:, 2]}
    )
    for role in ("vx", "vy", "vz"):
        if role in values:
            frame[f"{role}_m_s"] = values[role]
    if "clock" in values:
        frame["clock_s"] = values["clock"]
    return frame, []
