"""Residuals as CSV: one row an observation, used or not, full precision, UTC, file and line kept."""

from __future__ import annotations

import csv
import io
import math

from shiftfix.api import Solution, utc_text

COLUMNS = (
    "time_utc",
    "station_id",
    "emitter_id",
    "interval_s",
    "received_frequency_hz",
    "model_frequency_hz",
    "residual_hz",
    "normalised_residual_1",
    "sigma_hz",
    "weight_1",
    "elevation_deg",
    "flag",
    "reason",
    "source",
    "row_number",
)


def residuals_csv(solution: Solution) -> str:
    """Return the CSV text; an empty field where there is no value."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    columns = [solution.array(name) for name in COLUMNS[1:]]
    for time, *values in zip(solution.array("time_tai_ns"), *columns, strict=True):
        writer.writerow([utc_text(int(time), 9), *map(_field, values)])
    return out.getvalue()


def _field(value) -> str:
    if isinstance(value, str):
        return value
    number = float(value)
    if not math.isfinite(number):
        return ""
    return (
        repr(int(number))
        if number.is_integer() and abs(number) < 1e15 and not isinstance(value, float)
        else repr(number)
    )
