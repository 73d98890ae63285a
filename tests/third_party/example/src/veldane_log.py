"""Reader of an invented receiver log: `VRX1` lines of second of day, offset in hertz and quality, one station a file.

VRX1 station=QUOIN date=2026-03-01 dial=437262500
76165.5 8399.81 ok
"""

import hashlib
from dataclasses import dataclass

import pandas as pd

import shiftfix.api as sf

COLUMNS = ["station_id", "time_tai_ns", "received_frequency_hz", "nominal_frequency_hz", "source", "row_number"]


@dataclass(frozen=True)
class Params:
    files: tuple = sf.param("VRX1 logs", path="files")
    sigma: float = sf.param("1-sigma of one value", default=1.0, unit="Hz", minimum=1e-6)


def recognise(path, first_bytes):
    return first_bytes.startswith(b"VRX1 ")


def read(inputs, params, context):
    rows, rejects, sources, problems = [], [], [], []
    for path in params.files:
        name, content = context.display_path(path), path.read_bytes() if path.is_file() else b""
        if not recognise(path, content):
            problems.append(sf.Problem(f"{name}:1", "not a VRX1 log", found=repr(content[:40]) or "no such file"))
            continue
        first, *lines = content.decode("ascii").splitlines()
        head = dict(item.split("=") for item in first.split()[1:])
        midnight, dial, before = sf.tai_ns_from_utc(head["date"] + "T00:00:00Z"), float(head["dial"]), len(rows)
        for number, line in enumerate(lines, 2):
            second, offset, quality = line.split()
            if quality != "ok":
                rejects.append(sf.Reject(name, number, f"quality {quality}", line))
                continue
            time = midnight + round(float(second) * 1e9)
            rows.append((head["station"], time, dial + float(offset), dial, name, number))
        taken, digest = len(rows) - before, hashlib.sha256(content).hexdigest()
        sources.append(sf.Source(name, digest, len(lines), taken, len(lines) - taken))
    if problems:
        raise sf.InputError(problems)
    table = pd.DataFrame(rows, columns=COLUMNS).assign(received_frequency_sigma_hz=params.sigma, interval_s=1.0)
    return {"frequencies": sf.FrequencyTable(rows=table, sources=tuple(sources), rejects=tuple(rejects))}


@sf.hookimpl
def shiftfix_nodes():
    outputs = {"frequencies": sf.Port(sf.FrequencyTable, "received frequencies")}
    return (sf.NodeSpec("vrx1", "VRX1 logs", read, outputs=outputs, params=Params, recognise=recognise),)
