"""Nodes `ingest.stations` and `ingest.emitters`: the station book and the book of known emitters."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from shiftfix.api import EmitterTable, InputError, Source, StationTable, TomlSyntaxError, param
from shiftfix_ingest.book_reader import BookReader
from shiftfix_ingest.source_files import binary_problem, open_sources
from shiftfix_ingest.station_book import station_row


@dataclass(frozen=True)
class BookParams:
    """Parameters of `ingest.stations` and `ingest.emitters`."""

    file: Path = param("the book, a TOML file", path="file")


def _open(params: BookParams, context) -> tuple[BookReader, Source]:
    from shiftfix.api import parse_located_toml

    files, problems, _ = open_sources(params.file, context.display_path)
    problems += [p for p in (binary_problem(f, "a TOML file") for f in files) if p]
    if problems:
        raise InputError(problems)
    file = files[0]
    try:
        document = parse_located_toml(file.data, file.name)
    except TomlSyntaxError as error:
        raise InputError(error.problem) from error
    return BookReader(document, file.name), Source(file.name, file.sha256, 0, 0, 0)


def read_stations(inputs, params: BookParams, context) -> dict:
    """Return the station table of a station book; moving stations take their track from the ephemeris inputs.

    Raises
    ------
    InputError
        With all problems of the book: missing datum or undulation, clashing ids, units, unknown fields.
    """
    book, source = _open(params, context)
    tracks, twice = {}, set()
    for ephemeris in inputs.get("ephemeris") or ():
        for name in dict.fromkeys(ephemeris.array("object_id").astype(str)):
            twice |= {name} & set(tracks)
            tracks[name] = ephemeris.with_rows(
                ephemeris.rows[ephemeris.array("object_id").astype(str) == name].reset_index(drop=True)
            )
    rows, moving = [], {}
    seen: dict[str, list[tuple[tuple, dict]]] = {}
    for path, name, body in book.entries("stations"):
        row = station_row(book, path, name, body)
        track = row.pop("track", None)
        if isinstance(track, str):
            if track not in tracks:
                book.add(
                    (*path, "track"),
                    "no connected ephemeris holds this track",
                    found=repr(track),
                    allowed=", ".join(tracks) or "none is connected",
                    remedy="connect the ephemeris to inputs.ephemeris",
                )
                continue
            if track in twice:
                book.add(
                    (*path, "track"),
                    "several connected ephemerides hold this track",
                    found=repr(track),
                    remedy="read its files in one node, or connect one of them",
                )
            moving[name] = tracks[track]
        for other_path, other in seen.setdefault(name, []):
            if track is not None or name in moving:
                book.add(
                    path,
                    f"station id {name!r} is used at {book.where(*other_path)} too, and one of the two moves",
                    remedy="give the moving station its own id",
                )
            elif (
                row["valid_from_tai_ns"] < other["valid_until_tai_ns"]
                and other["valid_from_tai_ns"] < row["valid_until_tai_ns"]
            ):
                book.add(
                    path,
                    f"station id {name!r} clashes with the entry at {book.where(*other_path)}",
                    remedy="give each station its own id, or validity dates that do not overlap",
                )
        seen[name].append((path, row))
        rows.append(row)
    if book.problems:
        raise InputError(book.problems)
    if book.remarks:
        context.logger.warning(
            "%s: no clock class and no time_bias with 1-sigma for %s: their time tags are taken as exact",
            source.name,
            ", ".join(book.remarks),
        )
    table = pd.DataFrame(rows).fillna({"chain_sign_1": 0.0, "chain_constant_hz": 0.0})
    return {"stations": StationTable(rows=table, ephemerides=moving, sources=(source,))}


def read_emitters(inputs, params: BookParams, context) -> dict:
    """Return the table of known emitters: rest frequency with its 1-sigma, and a place unless an ephemeris has it."""
    book, source = _open(params, context)
    fields = (
        "latitude",
        "longitude",
        "height",
        "height_kind",
        "undulation",
        "datum",
        "x",
        "y",
        "z",
        "frame",
        "antenna_up",
        "antenna_east",
        "antenna_north",
        "rest_frequency",
        "note",
    )
    rows: list[dict] = []
    for path, name, body in book.entries("emitters"):
        book.known(path, body, fields)
        if name in [r["emitter_id"] for r in rows]:
            book.add(path, f"emitter id {name!r} occurs twice", remedy="give each emitter its own id")
        value, sigma = book.quantity(path, body, "rest_frequency", "Hz", sigma=True)
        if "rest_frequency" not in body:
            book.add(path, "rest_frequency is missing", allowed='rest_frequency = "98.1 MHz +/- 1 mHz"')
        elif value is not None and not 3e3 <= value <= 3e11:
            book.add(
                (*path, "rest_frequency"),
                "not a radio frequency",
                found=repr(body["rest_frequency"]),
                allowed="3 kHz to 300 GHz",
            )
        row = {"emitter_id": name, "rest_frequency_hz": value, "rest_frequency_sigma_hz": sigma or 0.0}
        if any(f in body for f in ("latitude", "longitude", "x", "y", "z")):
            position = book.place(path, body)
            if position is None:
                continue
            row |= dict(zip(("x_m", "y_m", "z_m"), map(float, position), strict=True))
        rows.append(row)
    if book.problems:
        raise InputError(book.problems)
    return {"emitters": EmitterTable(rows=pd.DataFrame(rows), sources=(source,))}
