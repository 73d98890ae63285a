"""Speed of the delimited reader on a million rows: python tests/benchmarks/bench_delimited.py. Prints, asserts nothing."""

from __future__ import annotations

import tempfile
import time
from pathlib import Path

import numpy as np

from shiftfix.api import run_pipeline

ROWS = 1_000_000
PIPELINE = """shiftfix = 1
[nodes.log]
use = "ingest.delimited"
params.files = "log.csv"
params.columns = { time = "utc", frequency = "f_khz", station = "rx" }
params.units = { frequency = "kHz" }
params.time_scale = "UTC"
params.sigma = "1 Hz"
params.nominal_frequency = "437.2625 MHz"
"""


def layouts():
    """Yield name, function from (time text, seconds, frequency) to a line, and further parameters."""
    yield "ISO calendar", lambda t, s, f: f"{t}Z;{f};ORREL", ""
    yield "quoted fields", lambda t, s, f: f'"{t}Z";"{f}";"ORREL"', ""
    yield "decimal comma", lambda t, s, f: f"{t}Z;{f.replace('.', ',')};ORREL", 'params.decimal = ","\n'
    yield "one row in a hundred bad", lambda t, s, f: f"{t}Z;{'-' if s % 5 == 0 else f};ORREL", 'params.on_bad_row = "reject"\n'
    yield "POSIX counts", lambda t, s, f: f"{s:.3f};{f};ORREL", 'params.time_format = "posix"\n'
    yield "day of year", lambda t, s, f: f"{day_of_year(t)}Z;{f};ORREL", ""


def day_of_year(text):
    days = (0, 31, 59, 90)[int(text[5:7]) - 1] + int(text[8:10])
    return f"{text[:5]}{days:03d}{text[10:]}"


def main():
    times = (np.datetime64("2026-03-01T00:00:00.000") + np.arange(ROWS) * np.timedelta64(50, "ms")).astype(str)
    seconds = 1772323200.0 + 0.05 * np.arange(ROWS)
    values = [f"{437262.5 + k * 1e-6:.6f}" for k in range(ROWS)]
    for name, line, extra in layouts():
        with tempfile.TemporaryDirectory() as place:
            folder = Path(place)
            rows = [line(t, s, f) for t, s, f in zip(times, seconds, values, strict=True)]
            (folder / "log.csv").write_text("utc;f_khz;rx\n" + "\n".join(rows) + "\n")
            (folder / "p.toml").write_text(PIPELINE + extra)
            begin = time.perf_counter()
            result = run_pipeline(folder / "p.toml")
            spent = time.perf_counter() - begin
            if result.error:
                raise result.error
            table = result.tables["log.frequencies"]
            print(f"{name}: {len(table)} rows in {spent:.1f} s, {ROWS / spent / 1e3:.0f} k rows/s", flush=True)


if __name__ == "__main__":
    main()
