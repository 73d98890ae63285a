"""The text report, pinned by golden files: one good, each kind of refusal, an ambiguous one, one with long names.

The files are regression values; after a wanted change write them anew with `python tests/plugins/report/test_text.py`.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from shiftfix.api import Alternative, Parameter, Solution, StationResult

HERE = Path(__file__).parent


def rows():
    return pd.DataFrame(
        {
            "station_id": ["ORREL", "QUOIN"],
            "emitter_id": "",
            "time_tai_ns": [1772323237000000000, 1772323238500000000],
            "interval_s": 1.0,
            "received_frequency_hz": [437262500.125, 437262501.5],
            "model_frequency_hz": [437262500.0, np.nan],
            "residual_hz": [0.125, np.nan],
            "normalised_residual_1": [0.25, np.nan],
            "sigma_hz": [0.5, np.nan],
            "weight_1": [1.0, np.nan],
            "elevation_deg": [12.5, np.nan],
            "flag": ["use", "reject"],
            "reason": ["", "no calibration of this station"],
            "source": "a,b.csv",
            "row_number": [2, 3],
        }
    )


def solution(**changes):
    ellipse = {"semi_major_m": 120.5, "semi_minor_m": 80.25, "azimuth_deg": 110.0}
    base = dict(
        rows=rows(),
        verdict="fix",
        verdict_text="one solution fits",
        motion="orbit",
        epoch_tai_ns=1772323237000000000,
        epoch_utc="2026-03-01T00:00:00.000000Z",
        position_m=np.array([-157243.6, 5136126.2, -4587217.6]),
        velocity_m_s=np.array([1169.8, 5027.1, 5588.4]),
        covariance=np.diag([44.0, 40, 35, 0.2, 0.3, 0.3]) ** 2,
        geodetic={
            "latitude_deg": -41.9,
            "longitude_deg": -26.2,
            "height_m": 519556.0,
            "ellipse_95": ellipse,
            "ellipse_50": ellipse,
        },
        rest_frequency_hz=437260660.08,
        rest_frequency_sigma_hz=0.13,
        rest_frequency_drift_hz_s=-0.017,
        frequency_datum="reference of ORREL (1-sigma 1.0e-11)",
        stations=(
            StationResult("ORREL", 0.0, 1e-11, None, 0.4995, 276, 0),
            StationResult("QUOIN", 2.97e-8, 2.2e-10, 1e-14, None, 0, 3),
        ),
        parameters=(Parameter("x_m", -157243.6, 44.0), Parameter("radiation_scale_1", 1.0, 0.5, "estimated", "prior")),
        chi_square=831.7,
        degrees_of_freedom=830,
        odds=1.0,
        converged=True,
        rank_full=True,
        condition=28.0,
        iterations=3,
        findings=("240 candidates, 1 starting states kept",),
        warnings=("rows rejected when the files were read: 1; run.json lists them",),
        budget={"noise": {"position_m": 60.0, "velocity_m_s": 0.4}, "total": {"position_m": 60.0, "velocity_m_s": 0.4}},
    )
    return Solution(**(base | changes))


def refused(verdict, text, **more):
    return Solution(
        rows=rows(),
        verdict=verdict,
        verdict_text=text,
        covariance_reason=text,
        motion="orbit",
        epoch_utc="2026-03-01T00:00:00.000000Z",
        **more,
    )


CASES = {
    "fix": lambda: solution(),
    "ambiguous": lambda: solution(
        verdict="ambiguous",
        verdict_text="2 solutions fit; odds 0.54, 0.46",
        odds=0.54,
        second_minimum=True,
        covariance_kind="widened",
        alternatives=(
            Alternative(
                {"position_m": [-157243.6, 5136126.2, -4387217.6], "velocity_m_s": [0.0, 0.0, 0.0]}, 0.46, 1.02
            ),
        ),
    ),
    "not_observable": lambda: refused(
        "not observable",
        "the data do not determine the emitter: not seen is position along 64% cross-track",
        unobservable=("position along 64% cross-track, 62% radial (3.7e+06 m, 1 sigma)",),
    ),
    "not_locatable": lambda: refused(
        "not locatable by this method", "the received frequency is constant at every station (no Doppler shift is seen)"
    ),
    "not_converged": lambda: refused("not converged", "the iteration did not reach a minimum; see the findings"),
    "quality_failed": lambda: refused(
        "quality failed",
        "55% of the rows contradict the solution: model or data are wrong",
        findings=("461 of 836 rows rejected by the fit",),
    ),
    "long_names": lambda: solution(
        stations=(
            StationResult("A_STATION_WITH_A_VERY_LONG_NAME_INDEED", -1e-5, 1e-6, -1e-12, 12345.678, 123456, 654321),
        ),
        frequency_datum="reference of A_STATION_WITH_A_VERY_LONG_NAME_INDEED (1-sigma 1.0e-11), with the priors of "
        + ", ".join(f"STATION_{k}" for k in range(20)),
        findings=(
            "a finding that is rather long because it names many stations: "
            + ", ".join(f"STATION_{k}" for k in range(20)),
        ),
    ),
}


def made(name):
    from shiftfix_report.text import report_text

    return report_text(CASES[name](), "Tamsin-1, first pass", ("space",))


@pytest.mark.parametrize("name", CASES)
def test_report_is_as_pinned(name):
    text = made(name)
    assert text == (HERE / f"{name}.txt").read_text()
    assert max(map(len, text.splitlines())) <= 100 or name == "long_names"
    assert "Cautions" in text and "collision avoidance" in text
    assert "nan" not in text.lower().split() and "None" not in text


def test_residuals_have_every_row_with_file_and_line():
    import csv
    import io

    from shiftfix_report.residuals import COLUMNS, residuals_csv

    lines = list(csv.reader(io.StringIO(residuals_csv(solution()))))
    assert lines[0] == list(COLUMNS) and len(lines) == 3
    first, second = (dict(zip(COLUMNS, line, strict=True)) for line in lines[1:])
    assert (
        first["time_utc"] == "2026-03-01T00:00:00.000000000Z"
        and first["source"] == "a,b.csv"
        and first["row_number"] == "2"
    )
    assert float(first["received_frequency_hz"]) == 437262500.125
    assert (
        second["residual_hz"] == ""
        and second["flag"] == "reject"
        and second["reason"] == "no calibration of this station"
    )


if __name__ == "__main__":
    for case in CASES:
        (HERE / f"{case}.txt").write_text(made(case))
