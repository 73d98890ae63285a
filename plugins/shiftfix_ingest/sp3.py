"""SP3 precise orbits (versions a, c and d) to an `Ephemeris`: ITRS positions, satellite clocks, velocities where given.

Positions are kilometres of the satellite's centre of mass in the Earth-fixed frame of the file (an ITRF realisation, a
few millimetres from ITRS); clocks are microseconds without the periodic relativistic term -2 r.v/c**2.

References
----------
The Extended Standard Product 3 Orbit Format (SP3-c, SP3-d), S. Hilla, NGS: layout from memory and from public files.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from shiftfix.api import Ephemeris, InputError, Problem, Source, param, tai_ns_from_calendar
from shiftfix_ingest.source_files import SourceFile, binary_problem, head_text, open_sources, repeat_problems

_NO_CLOCK_US = 999999.0  # 999999.999999 marks an absent clock; any value at or above this is one
_SCALES = {
    "GPS": ("GPS", 0),
    "GAL": ("GPS", 0),
    "QZS": ("GPS", 0),
    "IRN": ("GPS", 0),
    "UTC": ("UTC", 0),
    "GLO": ("UTC", 0),
    "TAI": ("TAI", 0),
    "BDT": ("GPS", 14),
}  # BDT = GPS - 14 s
_EQUAL_M = 1e-3  # records of two files that agree to this are the same; SP3 gives 1 mm


@dataclass(frozen=True)
class Sp3Params:
    """Parameters of `ingest.sp3`."""

    files: tuple = param("SP3 files, plain or gzip, in any order; the last named wins where two disagree", path="files")
    satellites: tuple[str, ...] = param("satellites to read, as in G17; empty means all", default=())
    position_sigma: float = param("1-sigma of each coordinate", default=0.05, unit="m", minimum=0.0)
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


@dataclass
class _Records:
    """Records of one file, column by column."""

    satellite: list[str] = field(default_factory=list)
    time: list[int] = field(default_factory=list)
    values: list[tuple[float, ...]] = field(default_factory=list)
    line: list[int] = field(default_factory=list)
    read: int = 0
    absent: list[int] = field(default_factory=list)


def recognise(path: Any, first_bytes: bytes) -> bool:
    """Return whether the first line is that of an SP3 file."""
    text = head_text(first_bytes)
    return len(text) > 30 and text[0] == "#" and text[1] in "abcd" and text[2] in "PV" and text[3:7].strip().isdigit()


def read_sp3(inputs: Any, params: Sp3Params, context: Any) -> dict[str, Ephemeris]:
    """Return the ephemeris of all files: one object a satellite, in the order of time.

    Raises
    ------
    InputError
        Files that are missing, empty, binary, of another kind or truncated, and lines that cannot be read: all at once.
    """
    sources, problems, notes = open_sources(params.files, context.display_path)
    problems += repeat_problems(notes, params.on_repeat)
    wanted = set(params.satellites)
    found: list[tuple[SourceFile, _Records]] = []
    for source in sources:
        records, bad = _parse(source, wanted)
        problems += bad
        found.append((source, records))
    seen = {s for _, r in found for s in r.satellite}
    if not problems and (wanted - seen or not seen):
        problems.append(
            Problem(
                ", ".join(s.name for s in sources),
                "satellites without any position",
                found=", ".join(sorted(wanted - seen)) or "none in the files",
                allowed=", ".join(sorted(seen)),
                remedy="correct params.satellites or add the file that holds them",
            )
        )
    if problems:
        raise InputError(problems)
    rows, told, accepted = _joined(found)
    for text in (*notes, *told):
        context.logger.warning("%s", text)
    for source, records in found:
        if records.absent:
            context.logger.info(
                "%s: %d records without position left out (0.000000), first at line %d",
                source.name,
                len(records.absent),
                records.absent[0],
            )
    return {
        "ephemeris": Ephemeris(
            rows=rows,
            frame="ITRS",
            clock_excludes_periodic_relativity=True,
            position_sigma_m=params.position_sigma,
            sources=tuple(
                Source(s.name, s.sha256, r.read, n, r.read - n) for (s, r), n in zip(found, accepted, strict=True)
            ),
        )
    }


def _joined(found: list[tuple[SourceFile, _Records]]) -> tuple[Any, list[str], list[int]]:
    """Return rows of all files without duplicates, notes on those that disagree, and the count kept of each file."""
    import pandas as pd

    frames = []
    for k, (_, r) in enumerate(found):
        values = np.array(r.values, float).reshape(-1, 7)
        frame = pd.DataFrame(values, columns=["x_m", "y_m", "z_m", "clock_s", "vx_m_s", "vy_m_s", "vz_m_s"])
        frame.insert(0, "time_tai_ns", np.array(r.time, np.int64))
        frame.insert(0, "object_id", np.array(r.satellite, object))
        frames.append(frame.assign(file=k, order=np.arange(len(frame))))
    rows = pd.concat(frames, ignore_index=True)
    rows = rows.sort_values(["object_id", "time_tai_ns", "file", "order"], kind="stable", ignore_index=True)
    same = (rows.object_id == rows.object_id.shift(-1)) & (rows.time_tai_ns == rows.time_tai_ns.shift(-1))
    drop = same.to_numpy()
    notes = []
    if drop.any():
        xyz = rows[["x_m", "y_m", "z_m"]].to_numpy()
        index = np.flatnonzero(drop)
        apart = np.abs(xyz[index + 1] - xyz[index]).max(axis=1)
        far = apart > _EQUAL_M
        if far.any():
            later = ", ".join(sorted({found[int(f)][0].name for f in rows.file.to_numpy()[index[far] + 1]}))
            notes.append(
                f"{int(far.sum())} positions occur twice with differences up to {apart.max():.3f} m; those of the file "
                f"named last are used ({later})"
            )
    rows = rows[~drop].reset_index(drop=True)
    accepted = [int((rows.file == k).sum()) for k in range(len(found))]
    return rows.drop(columns=["file", "order"]), notes, accepted


def _parse(source: SourceFile, wanted: set[str]) -> tuple[_Records, list[Problem]]:
    out = _Records()
    binary = binary_problem(source, "an SP3 text file")
    if binary:
        return out, [binary]
    if not recognise(source.path, source.data):
        first = source.data[:60].decode("latin-1").splitlines()[:1]
        return out, [
            Problem(
                f"{source.name}:1",
                "not an SP3 file",
                found=repr(first[0] if first else ""),
                allowed="a first line such as '#cP2021  1  1  0  0  0.00000000      96 ORBIT IGb14 HLM  IGS'",
            )
        ]
    lines = source.data.decode("latin-1").splitlines()
    problems: list[Problem] = []
    scale, behind_s, time_now, ended = "GPS", 0, None, False
    epochs = 0
    first_c = True
    row: int | None = None
    for number, line in enumerate(lines, 1):
        tag = line[:1]
        where = f"{source.name}:{number}"
        if line.startswith("%c") and first_c:
            first_c = False
            name = line[9:12].strip()
            if name and name != "ccc":
                if name not in _SCALES:
                    problems.append(Problem(where, "unknown time system", found=name, allowed=", ".join(_SCALES)))
                    break
                scale, behind_s = _SCALES[name]
        elif tag == "*":
            epochs += 1
            row = None
            try:
                parts = line[1:].split()
                time_now = tai_ns_from_calendar(*map(int, parts[:5]), float(parts[5]), scale) + behind_s * 1_000_000_000
            except (ValueError, IndexError) as error:
                problems.append(Problem(where, "epoch cannot be read", found=line.strip(), allowed=str(error)))
                time_now = None
        elif tag == "P" and time_now is not None:
            row = None
            satellite = _satellite(line)
            if wanted and satellite not in wanted:
                continue
            out.read += 1
            try:
                xyz = [float(line[a : a + 14]) * 1e3 for a in (4, 18, 32)]
                clock = float(line[46:60]) if line[46:60].strip() else 999999.999999
            except ValueError:
                problems.append(
                    Problem(
                        where,
                        "position record cannot be read",
                        found=line.rstrip(),
                        allowed="PG17 x y z [km] clock [us], 14 columns each from column 5",
                    )
                )
                continue
            if not np.isfinite([*xyz, clock]).all():
                problems.append(Problem(where, "number is not finite", found=line.rstrip()))
                continue
            if xyz == [0.0, 0.0, 0.0]:
                out.absent.append(number)
                continue
            row = len(out.values)
            out.satellite.append(satellite)
            out.time.append(time_now)
            out.line.append(number)
            nan = float("nan")
            out.values.append((*xyz, nan if abs(clock) >= _NO_CLOCK_US else clock * 1e-6, nan, nan, nan))
        elif tag == "V" and row is not None and _satellite(line) == out.satellite[row]:
            try:
                velocity = [float(line[a : a + 14]) * 0.1 for a in (4, 18, 32)]  # dm/s
            except ValueError:
                problems.append(Problem(where, "velocity record cannot be read", found=line.rstrip()))
                continue
            if velocity != [0.0, 0.0, 0.0]:
                out.values[row] = (*out.values[row][:4], *velocity)
        elif line.startswith("EOF"):
            ended = True
            break
    problems += _whole(source, lines, epochs, ended)
    return out, problems


def _whole(source: SourceFile, lines: list[str], epochs: int, ended: bool) -> list[Problem]:
    """Return a problem when the file ends early: no EOF line, or fewer epochs than its first line announces."""
    announced = lines[0][32:39].strip()
    if ended and announced.isdigit() and int(announced) == epochs:
        return []
    if ended and not announced.isdigit():
        return [Problem(f"{source.name}:1", "number of epochs cannot be read", found=lines[0].rstrip())]
    return [
        Problem(
            f"{source.name}:{len(lines)}",
            "the file is truncated" if not ended else "number of epochs does not agree",
            found=f"{epochs} epochs, {'EOF line' if ended else 'no EOF line'}",
            allowed=f"{announced} epochs and an EOF line",
            remedy="fetch the file again",
        )
    ]


def _satellite(line: str) -> str:
    system = line[1:2] if line[1:2].strip() else "G"  # version a has GPS only, without a letter
    return system + line[2:4].replace(" ", "0")
