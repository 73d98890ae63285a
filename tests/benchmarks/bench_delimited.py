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


def main():
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        times = (np.datetime64("2026-03-01T00:00:00.000") + np.arange(ROWS) * np.timedelta64(50, "ms")).astype(str)
        lines = [f"{t}Z;{437262.5 + k * 1e-6:.6f};ORREL" for k, t in enumerate(times)]
        (folder / "log.csv").write_text("utc;f_khz;rx\n" + "\n".join(lines) + "\n")
        (folder / "p.toml").write_text(PIPELINE)
        begin = time.perf_counter()
        result = run_pipeline(folder / "p.toml")
        spent = time.perf_counter() - begin
        print(f"{len(result.tables['log.frequencies'])} rows in {spent:.1f} s, {ROWS / spent / 1e3:.0f} k rows/s")


if __name__ == "__main__":
    main()
