"""The text report, pinned by golden files: one good, each kind of refusal, an ambiguous one, one with long names.

The files are regression values; after a wanted change write them anew with `python tests/plugins/report/test_text.py`.
"""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace

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
    half = {"semi_major_m": 57.9, "semi_minor_m": 38.6, "azimuth_deg": 110.0}
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
            "height_sigma_m": 38.2,
            "ellipse_50": half,
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
        findings=("search: 240 candidates; starting states kept: 1",),
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
                {"position_m": [-157243.6, 5136126.2, -4387217.6], "velocity_m_s": [0.0, 0.0, 0.0]},
                0.46,
                1.02,
                {"latitude_deg": -40.5, "longitude_deg": -26.25, "height_m": 387500.0},
            ),
            Alternative({"position_m": [-157243.6, 5136126.2, -4587717.6], "velocity_m_s": [0.0, 0.0, 0.0]}, 0.0003, 1.4),
        ),
    ),
    "vessel": lambda: solution(
        motion="surface",
        frame="ITRS",
        position_m=np.array([4380184.0, -2071539.2, -4133785.1]),
        velocity_m_s=np.array([7.219, 9.018, 3.109]),
        covariance=np.diag([91.0, 113, 115, 0.043, 0.076, 0.054]) ** 2,
        geodetic=solution().geodetic
        | {"height_m": 0.0004, "height_sigma_m": 5.0, "speed_m_s": 11.96, "course_deg": 70.0, "climb_m_s": -0.002},
        rest_frequency_drift_hz_s=None,
        warnings=(),
    ),
    "at_rest_no_error": lambda: solution(
        motion="fixed",
        frame="ITRS",
        velocity_m_s=np.zeros(3),
        covariance=np.diag([91.0, 113, 115, np.nan, 0, 0]),
        geodetic=None,
    ),
    "not_observable": lambda: refused(
        "not observable",
        "the data do not determine the emitter; not seen: position (64 % cross-track, 36 % radial; as good as unknown), "
        "and 1 more",
        unobservable=(
            "position (64 % cross-track, 36 % radial; as good as unknown)",
            "position (along-track; 1 sigma 60 km)",
        ),
    ),
    "not_locatable": lambda: refused(
        "not locatable by this method", "the received frequency is constant at every station (no Doppler shift is seen)"
    ),
    "not_converged": lambda: refused("not converged", "the iteration did not reach a minimum; see the findings"),
    "quality_failed": lambda: refused(
        "quality failed",
        "55 % of the rows contradict the solution: model or data are wrong",
        findings=("461 of 836 rows rejected by the fit",),
    ),
    "long_names": lambda: solution(
        stations=(
            StationResult("A_STATION_WITH_A_VERY_LONG_NAME_INDEED", -1e-5, 1e-6, -1e-12, 12345.678, 123456, 654321),
        ),
        parameters=(Parameter("offset[A_STATION_WITH_A_VERY_LONG_NAME_INDEED" + "_AND_MORE" * 9 + "]_1", -1e-5, 1e-6),),
        rows=rows().assign(source="a/folder/" * 12 + "log.csv", reason=["", "because " * 20]),
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
    assert max(map(len, text.splitlines())) <= 100
    first_screen = " ".join(text.splitlines()[:24])
    assert "collision avoidance" in first_screen and "Cautions" in text
    assert "nan" not in text.lower().split() and "None" not in text


def test_a_refusal_says_what_would_help_and_gives_no_place():
    text = made("not_observable")
    assert "What would help:" in text and "another pass" in text
    assert "Where, at" not in text and "rest frequency" not in text.split("What went in")[1].split("Cautions")[0]
    assert text.count("as good as unknown") == 1, "said once"


def test_files_and_reasons_are_counted():
    text = made("fix")
    line = next(line for line in text.splitlines() if line.strip().startswith("a,b.csv"))
    assert line.split()[-3:] == ["1", "0", "1"]
    assert "left out: 1 x no calibration of this station" in text


@pytest.mark.parametrize("name", ["", ".x", "/x", "../x", "a/../../x", "a\\b"])
def test_a_product_stays_in_the_run_folder(name):
    from shiftfix.api import DefinitionError
    from shiftfix_report.plugin import TextParams, shiftfix_nodes

    kept = {}
    context = SimpleNamespace(node="text", title="t", emitter_classes=(), write=kept.__setitem__)
    node = next(n for n in shiftfix_nodes() if n.name == "text")
    with pytest.raises(DefinitionError, match="nodes.text.params.name: not the name of a file"):
        node.function({"solution": solution()}, TextParams(name=name), context)
    node.function({"solution": solution()}, TextParams(name="night/one.txt"), context)
    assert list(kept) == ["night/one.txt"]


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
