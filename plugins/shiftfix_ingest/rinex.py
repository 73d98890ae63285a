"""RINEX observation files to received frequencies: differences of carrier phase (means) or Doppler (instantaneous).

Phase: between consecutive epochs of one unbroken record the mean received frequency is f0 (1 - dL / (c dt)), L the
phase in metres (it grows with range), dt the difference of the tags. Doppler: f0 + D, D positive for approach. Times
stay what the receiver wrote: true time = tag - clock offset; the code ranges at both ends travel along, so that the
offset can be found later. What counts as read is one record (one satellite at one epoch) of a satellite, time and
spacing that the parameters ask for; a record that makes no row is a reject, the first one of each unbroken record
included.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import PurePath
from typing import Any

import numpy as np

from shiftfix.api import (
    FrequencyTable,
    InputError,
    Problem,
    Reject,
    Source,
    param,
    tai_ns_from_utc,
)
from shiftfix_ingest.rinex_grid import station_grid
from shiftfix_ingest.rinex_rows import Taken, take
from shiftfix_ingest.rinex_signals import BANDS, unknown_signals
from shiftfix_ingest.rinex_text import ObservationFile, parse_observations
from shiftfix_ingest.source_files import SourceFile, binary_problem, head_text, open_sources, repeat_problems

_SAME_PLACE_M = 1000.0


@dataclass(frozen=True)
class RinexParams:
    """Parameters of `ingest.rinex`."""

    files: tuple = param("observation files, RINEX 2 to 4, plain, gzip or Hatanaka-compressed", path="files")
    stations: Mapping[str, str] = param(
        "station of a file by file name; default: first four letters of MARKER NAME", default={}
    )
    satellites: tuple[str, ...] = param("satellites to read, as in G17; empty means all of GPS", default=())
    exclude_satellites: tuple[str, ...] = param("satellites to leave out", default=())
    observable: str = param("what gives the frequency", default="phase", choices=("phase", "doppler"))
    combination: str = param(
        "one band, or two combined so that the ionosphere cancels",
        default="single",
        choices=("single", "ionosphere_free"),
    )
    signals: tuple[str, ...] = param("observation codes to prefer, as in L1C, L2W, C2W", default=())
    doppler_sign: str = param("sign of the Doppler in the files", default="rinex", choices=("rinex", "reversed"))
    phase_sigma: float = param(
        "1-sigma of one phase of one band; tripled for the combination", default=0.003, unit="m", minimum=1e-6
    )
    doppler_sigma: float = param(
        "1-sigma of one Doppler of one band; tripled for the combination", default=0.1, unit="Hz", minimum=1e-6
    )
    interval: float = param("spacing of the epochs to use; 0 s means as recorded", default=0.0, unit="s", minimum=0.0)
    minimum_cn0: float = param("weaker signals are left out; 0 means none", default=0.0, unit="dBHz", minimum=0.0)
    start: str = param("UTC from which records are read, as in 2026-03-01T06:00:00Z; empty: all", default="")
    stop: str = param("UTC until which records are read; empty: all", default="")
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


def recognise(path: Any, first_bytes: bytes) -> bool:
    """Return whether the first line is that of a RINEX observation file, plain or Hatanaka-compressed."""
    text = head_text(first_bytes)
    if text[60:80].strip() == "CRINEX VERS   / TYPE":
        return True
    return text[60:80].strip() == "RINEX VERSION / TYPE" and text[20:21].upper() == "O"


def read_rinex(inputs: Any, params: RinexParams, context: Any) -> dict[str, FrequencyTable]:
    """Return received frequencies of all files.

    Raises
    ------
    InputError
        Files that are missing, empty, binary, truncated, of another kind or version, that lack the observable, or that
        belong to different stations of one name: all at once, with file and line.
    """
    sources, problems, notes = open_sources(params.files, context.display_path)
    span, bad = _span(params)
    problems += repeat_problems(notes, params.on_repeat) + bad + _satellite_problems(params)
    files: list[ObservationFile] = []
    for source in sources:
        context.check_cancelled()
        file, bad = _observations(source)
        problems += bad
        if not bad:
            files.append(file)
    by_station, bad = _stations(files, params.stations)
    problems += bad
    if not problems:
        problems += unknown_signals(files, params.signals)
    parts: list[tuple[str, Sequence[ObservationFile], Taken]] = []
    for station, mine in by_station.items():
        grid, bad = station_grid(
            mine,
            combined=params.combination == "ionosphere_free",
            observable=params.observable,
            signals=params.signals,
            reversed_doppler=params.doppler_sign == "reversed",
        )
        problems += bad
        notes += grid.notes
        if not problems:
            parts.append((station, mine, take(station, grid, mine, params, span)))
    if problems:
        raise InputError(problems)
    table = _table(parts, params, tuple(notes))
    for text in notes:
        context.logger.warning("%s", text)
    return {"frequencies": table}


def _observations(source: SourceFile) -> tuple[ObservationFile, list[Problem]]:
    """Return the observations of a file, after undoing the Hatanaka compression where there is one."""
    data = source.data
    packed = data.startswith(b"\x1f\x9d")  # Unix compress
    if not packed:
        binary = binary_problem(source, "a RINEX text file")
        if binary:
            return ObservationFile(source, None), [binary]
    if packed or data[60:80].strip() == b"CRINEX VERS   / TYPE":
        import hatanaka

        try:
            data = hatanaka.decompress(data)
        except (hatanaka.HatanakaException, ValueError) as error:
            return ObservationFile(source, None), [
                Problem(
                    source.name,
                    "the compressed file is truncated or damaged",
                    found=str(error).strip()[:200],
                    remedy="fetch it again",
                )
            ]
        source = SourceFile(source.path, source.name, source.sha256, data)
    return parse_observations(source)


def _span(params: RinexParams) -> tuple[tuple[int, int], list[Problem]]:
    limits, problems = [-(2**62), 2**62], []
    for k, name in enumerate(("start", "stop")):
        text = getattr(params, name)
        if text:
            try:
                limits[k] = tai_ns_from_utc(text)
            except ValueError as error:
                problems.append(Problem(f"params.{name}", str(error)))
    return (limits[0], limits[1]), problems


def _satellite_problems(params: RinexParams) -> list[Problem]:
    return [
        Problem(
            f"params.{field_}",
            "not a satellite that can be read",
            found=s,
            allowed="G01 to G32 (GPS), E01 to E36 (Galileo)",
        )
        for field_ in ("satellites", "exclude_satellites")
        for s in getattr(params, field_)
        if not (len(s) == 3 and s[0] in BANDS and s[1:].isdigit())
    ]


def _stations(
    files: Sequence[ObservationFile], names: Mapping[str, str]
) -> tuple[dict[str, list[ObservationFile]], list[Problem]]:
    """Return the files by station, in the order of their first epochs, and what is wrong with the names."""
    out: dict[str, list[ObservationFile]] = {}
    problems: list[Problem] = []
    present = {PurePath(f.source.name).name for f in files}
    for key in names:
        if files and key not in present and key not in {f.source.name for f in files}:
            problems.append(
                Problem("params.stations", "no such file is read", found=key, allowed=", ".join(sorted(present)))
            )
    for file in sorted(files, key=lambda f: int(f.epoch_tai_ns[0])):
        short = PurePath(file.source.name).name
        station = names.get(short) or names.get(file.source.name) or file.header.marker[:4].upper().strip()
        where = f"{file.source.name}:{file.header.lines}"
        if not station:
            problems.append(
                Problem(where, "no MARKER NAME", remedy=f'name the station: params.stations = {{ "{short}" = "ABCD" }}')
            )
            continue
        for other in out.get(station, [])[:1]:
            a, b = other.header.position_m, file.header.position_m
            if a and b and np.linalg.norm(np.subtract(a, b)) > _SAME_PLACE_M:
                problems.append(
                    Problem(
                        where,
                        f"station id {station} clashes",
                        found=f"{np.linalg.norm(np.subtract(a, b)) / 1e3:.1f} km from the "
                        f"station of that name in {other.source.name}",
                        remedy="give one of them another id in params.stations",
                    )
                )
        out.setdefault(station, []).append(file)
    return out, problems


def _table(parts, params: RinexParams, notes: tuple[str, ...]) -> FrequencyTable:
    """Return the table of all stations; read = accepted + rejected for each file."""
    import pandas as pd

    frames, rejects, sources = [], [], []
    for _, files, taken in parts:
        labels = np.array([f.source.name for f in files], object)
        columns = dict(taken.columns)
        number = columns.pop("file")
        frames.append(pd.DataFrame({**columns, "source": labels[number]}))
        rejects += [Reject(labels[f], line, reason) for f, line, reason in taken.rejects]
        for k, file in enumerate(files):
            accepted = int((number == k).sum())
            refused = sum(f == k for f, _, _ in taken.rejects)
            sources.append(Source(file.source.name, file.source.sha256, accepted + refused, accepted, refused))
    rows = pd.concat(frames, ignore_index=True)
    for optional in ("receiver_clock_s", "receiver_clock_start_s", "cn0_db_hz"):
        if rows[optional].isna().all():
            rows = rows.drop(columns=optional)
    if rows.empty:
        names = ", ".join(s.name for s in sources)
        raise InputError(
            Problem(
                names,
                "no record makes a row",
                found=_commonest(rejects),
                allowed="satellites, times and signals that the files hold",
                remedy="widen params.satellites, start, stop or minimum_cn0",
            )
        )
    order = np.lexsort((rows.emitter_id.to_numpy(str), rows.station_id.to_numpy(str), rows.time_tai_ns.to_numpy()))
    said = [
        "times are receiver time: true time = tag - clock offset of the receiver"
        + (
            ""
            if not any(f.header.clock_applied for _, fs, _ in parts for f in fs)
            else " (corrected in files with RCV CLOCK OFFS APPL = 1)"
        )
    ]
    return FrequencyTable(
        rows=rows.iloc[order].reset_index(drop=True),
        sources=tuple(sources),
        rejects=tuple(rejects),
        notes=(*notes, *said),
    )


def _commonest(rejects: Sequence[Reject]) -> str:
    reasons = [r.reason for r in rejects]
    if not reasons:
        return "no record of the wanted satellites and times"
    top = max(set(reasons), key=reasons.count)
    return f"{len(reasons)} records rejected, most for: {top}"
