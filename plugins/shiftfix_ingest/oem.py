"""Orbit ephemeris messages (CCSDS OEM, KVN and XML) to an `Ephemeris`.

Frames: GCRF and ICRF are taken as GCRS (the same axes), EME2000 is turned by the frame bias (IERS Conventions 2010,
23 mas: 0.7 m at 7000 km), ITRF and its realisations are taken as ITRS (they differ by centimetres). Others are
refused. One centre, the Earth; km and km/s become metres. Accelerations and covariances are passed over and counted.

References
----------
CCSDS 502.0-B-3, Orbit Data Messages, April 2023, section 5: structure and order of metadata.
IERS Conventions (2010), TN 36, section 5.4.4 and 5.5.4: frame bias, through `erfa.bi00`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from shiftfix.api import Ephemeris, InputError, Problem, Source, param, tai_ns_from_texts
from shiftfix_ingest.ccsds_values import same_text
from shiftfix_ingest.oem_message import Block, parse_oem
from shiftfix_ingest.source_files import binary_problem, head_text, open_sources, repeat_problems

STANDARD = "CCSDS 502.0-B-3"
_SCALES = ("UTC", "TAI", "GPS", "TT")
_INERTIAL = ("GCRF", "ICRF", "EME2000")


@dataclass(frozen=True)
class OemParams:
    """Parameters of `ingest.oem`."""

    files: tuple = param("orbit ephemeris messages, KVN or XML, plain or gzip", path="files")
    objects: Mapping[str, str] = param("id by OBJECT_NAME or OBJECT_ID; default: OBJECT_NAME", default={})
    position_sigma: float = param("1-sigma of each coordinate; 0 when unknown", default=0.0, unit="m", minimum=0.0)
    span: str = param(
        "useable: states outside USEABLE_START_TIME and USEABLE_STOP_TIME are left out; all: they are kept",
        default="useable",
        choices=("useable", "all"),
    )
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


def recognise(path: Any, first_bytes: bytes) -> bool:
    """Return whether the text begins with the version line, or the root element, of an orbit ephemeris message."""
    text = head_text(first_bytes).lstrip("\ufeff \r\n")
    if text.startswith("<"):
        return 'id="CCSDS_OEM_VERS"' in text.replace("'", '"')
    return text.startswith("CCSDS_OEM_VERS")


def read_oem(inputs: Any, params: OemParams, context: Any) -> dict[str, Ephemeris]:
    """Return the states of all messages; every metadata block of an object is a segment of its own.

    Raises
    ------
    InputError
        Files that cannot be opened or break the standard, another centre, frames and time systems that cannot be
        converted, blocks of inertial and Earth-fixed frames mixed: all at once, with file and line.
    """
    sources, problems, notes = open_sources(params.files, context.display_path)
    problems += repeat_problems(notes, params.on_repeat)
    found = []
    for source in sources:
        binary = binary_problem(source, "an orbit ephemeris message, KVN or XML")
        if binary:
            problems.append(binary)
            continue
        blocks, bad = parse_oem(source)
        bad += [p for b in blocks for p in _block_problems(b, source.name)] if not bad else []
        problems += bad
        found.append((source, blocks))
    frames = set() if problems else {_frame(b) for _, blocks in found for b in blocks}
    if len(frames) > 1:
        problems.append(
            Problem(
                ", ".join(s.name for s, _ in found),
                "inertial and Earth-fixed frames in one ephemeris",
                found=", ".join(sorted({b.metadata["REF_FRAME"] for _, bs in found for b in bs})),
                remedy="read them with two nodes",
            )
        )
    if problems:
        raise InputError(problems)
    rows, cut, sources_out = [], 0, []
    for source, blocks in found:
        kept = 0
        for block in blocks:
            part = _block_rows(block, params)
            kept += len(part)
            rows.append(part)
        read = sum(len(b.epochs) for b in blocks)
        cut += read - kept
        sources_out.append(Source(source.name, source.sha256, read, kept, read - kept))
        extra = sum(b.covariances for b in blocks)
        if extra:
            notes.append(f"{source.name}: {extra} covariance matrices are passed over")
    if cut:
        notes.append(f"{cut} states outside the useable spans are left out")
    for text in notes:
        context.logger.warning("%s", text)
    if not sum(len(r) for r in rows):
        raise InputError(
            Problem(
                ", ".join(s.name for s, _ in found), "no state lies in a useable span", remedy='set params.span = "all"'
            )
        )
    return {
        "ephemeris": Ephemeris(
            rows=_ordered(rows),
            frame=next(iter(frames)),
            clock_excludes_periodic_relativity=True,
            sources=tuple(sources_out),
            position_sigma_m=params.position_sigma,
        )
    }


def _frame(block: Block) -> str:
    return "GCRS" if same_text(block.metadata["REF_FRAME"]) in _INERTIAL else "ITRS"


def _block_problems(block: Block, name: str) -> list[Problem]:
    """Return what keeps a block from being used."""
    meta, lines = block.metadata, block.lines
    out = []
    if same_text(meta["CENTER_NAME"]) != "EARTH":
        out.append(
            Problem(f"{name}:{lines['CENTER_NAME']}", "another centre", found=meta["CENTER_NAME"], allowed="EARTH")
        )
    frame = same_text(meta["REF_FRAME"])
    if frame not in _INERTIAL and not frame.startswith("ITRF"):
        out.append(
            Problem(
                f"{name}:{lines['REF_FRAME']}",
                "frame that cannot be converted",
                found=meta["REF_FRAME"],
                allowed=f"{', '.join(_INERTIAL)}, ITRF and its realisations",
            )
        )
    scale = same_text(meta["TIME_SYSTEM"])
    if scale not in _SCALES:
        out.append(
            Problem(
                f"{name}:{lines['TIME_SYSTEM']}",
                "time system that cannot be converted",
                found=meta["TIME_SYSTEM"],
                allowed=", ".join(_SCALES),
            )
        )
        return out
    times, bad = tai_ns_from_texts(block.epochs, scale, require_z=False)
    out += [
        Problem(f"{name}:{block.rows[k]}", "epoch cannot be read", found=block.epochs[k], allowed=text)
        for k, text in bad
    ]
    if not bad:
        out += [
            Problem(
                f"{name}:{block.rows[k + 1]}",
                "epochs do not increase",
                found=block.epochs[k + 1],
                allowed=f"increasing ({STANDARD}, section 5)",
            )
            for k in np.flatnonzero(np.diff(times) <= 0)
        ]
    keys = [k for k in ("START_TIME", "USEABLE_START_TIME", "USEABLE_STOP_TIME", "STOP_TIME") if k in meta]
    limits, bad = tai_ns_from_texts([meta[k] for k in keys], scale, require_z=False)
    out += [
        Problem(f"{name}:{lines[keys[k]]}", "epoch cannot be read", found=meta[keys[k]], allowed=text)
        for k, text in bad
    ]
    if not bad and (np.diff(limits) < 0).any():
        k = int(np.flatnonzero(np.diff(limits) < 0)[0])
        out.append(
            Problem(f"{name}:{lines[keys[k + 1]]}", f"{keys[k + 1]} lies before {keys[k]}", found=meta[keys[k + 1]])
        )
    return out


def _block_rows(block: Block, params: OemParams) -> Any:
    """Return the useable states of one block in SI units and our frames."""
    import pandas as pd

    meta = block.metadata
    scale = same_text(meta["TIME_SYSTEM"])
    times, _ = tai_ns_from_texts(block.epochs, scale, require_z=False)
    values = np.array(block.states) * 1e3
    position, velocity = values[:, :3], values[:, 3:]
    if same_text(meta["REF_FRAME"]) == "EME2000":
        turn = frame_bias()
        position, velocity = position @ turn, velocity @ turn
    keep = np.ones(len(times), bool)
    for key, sign in (("USEABLE_START_TIME", 1), ("USEABLE_STOP_TIME", -1)):
        if key in meta and params.span == "useable":
            limit = int(tai_ns_from_texts([meta[key]], scale, require_z=False)[0][0])
            keep &= sign * (times - limit) >= 0
    name = meta["OBJECT_NAME"]
    ids = {same_text(k): v for k, v in params.objects.items()}
    name = ids.get(same_text(name)) or ids.get(same_text(meta["OBJECT_ID"])) or name
    frame = pd.DataFrame(
        np.column_stack([position, velocity]), columns=["x_m", "y_m", "z_m", "vx_m_s", "vy_m_s", "vz_m_s"]
    )
    frame.insert(0, "time_tai_ns", times)
    frame.insert(0, "object_id", name)
    return frame[keep]


def frame_bias() -> np.ndarray:
    """Return the frame bias B of IAU 2000, shape (3, 3): r in EME2000 = B @ r in GCRS; rows turn back by r @ B."""
    import erfa

    bias, _, _ = erfa.bp00(2451545.0, 0.0)
    return np.asarray(bias)


def _ordered(parts: list) -> Any:
    """Return all rows by object and time, numbering the segments of each object."""
    import pandas as pd

    parts = [p for p in parts if len(p)]
    parts.sort(key=lambda p: (p.object_id.iloc[0], p.time_tai_ns.iloc[0]))
    counts: dict[str, int] = {}
    out = []
    for part in parts:
        name = part.object_id.iloc[0]
        out.append(part.assign(segment_1=counts.get(name, 0)))
        counts[name] = counts.get(name, 0) + 1
    return pd.concat(out, ignore_index=True)
