"""The demo scenes: what their README promises, as intervals that were measured first."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import worldline
from scipy.stats import chi2

from shiftfix.api import run_pipeline, tai_ns_from_utc

DEMO = Path(__file__).parents[2] / "demo_tracks"


def test_satellite_pass():
    result = run_pipeline(DEMO / "tamsin_pass" / "pipeline.toml")
    assert result.exit_code == 0, result.error
    truth = json.loads((DEMO / "tamsin_pass" / "truth.json").read_text())
    solution = result.solution
    later = (solution.epoch_tai_ns - tai_ns_from_utc(truth["epoch_utc"])) * 1e-9
    earth = worldline.Earth(2026, 3, 1, 21 * 3600 + 14 * 60, 37)
    satellite = worldline.over(earth, -41.2, -26.4, 510e3, -9.9)
    assert np.allclose(satellite.state(np.zeros(1))[0][:3], truth["position_m"], atol=1e-3)
    error = np.concatenate([solution.position_m, solution.velocity_m_s]) - satellite.state(np.array([later]))[0]
    scale = np.sqrt(np.diag(solution.covariance))
    normalised = (error / scale) @ np.linalg.solve(solution.covariance / np.outer(scale, scale), error / scale)
    assert normalised < chi2.ppf(0.999, 6)
    assert np.linalg.norm(error[:3]) < 250.0
    assert 50.0 < solution.budget["total"]["position_m"] < 90.0
    rest = truth["rest_frequency_hz"] + later * truth["rest_frequency_drift_hz_s"]
    assert abs(solution.rest_frequency_hz - rest) < 4 * solution.rest_frequency_sigma_hz < 1.0
    assert solution.rest_frequency_drift_hz_s == pytest.approx(-0.02, abs=0.01)
    offsets = {s.station_id: s.offset for s in solution.stations}
    assert offsets["QUOIN"] == pytest.approx(3e-8, abs=1e-9) and offsets["BASTLE"] == pytest.approx(4e-7, abs=1.5e-9)
    assert solution.frequency_datum.startswith("reference of ORREL")
    assert {Path(s.name).name for t in result.tables.values() for s in getattr(t, "sources", ())} == {
        "orrel_head.csv",
        "quoin_skerry.txt",
        "bastle_fen.tdm",
        "stations.toml",
    }


def test_one_station_of_the_pass_is_refused(tmp_path):
    text = (DEMO / "tamsin_pass" / "pipeline.toml").read_text().replace('["orrel", "quoin", "bastle"]', '"orrel"')
    for name in ("stations.toml", "orrel_head.csv", "quoin_skerry.txt", "bastle_fen.tdm"):
        (tmp_path / name).write_bytes((DEMO / "tamsin_pass" / name).read_bytes())
    (tmp_path / "p.toml").write_text(text)
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 5 and result.solution.verdict == "not observable"
    assert "cross-track" in result.solution.verdict_text
    assert result.document["state"]["position_m"] is None and result.document["covariance"] is None


def test_vessel_with_a_turn():
    result = run_pipeline(DEMO / "stuck_key" / "pipeline.toml")
    assert result.exit_code == 0, result.error
    truth = json.loads((DEMO / "stuck_key" / "truth.json").read_text())
    solution = result.solution
    error = solution.position_m - np.array(truth["position_m"])
    up = solution.position_m / np.linalg.norm(solution.position_m)
    east = np.cross([0, 0, 1.0], up)
    axes = np.array([east / np.linalg.norm(east), np.cross(up, east / np.linalg.norm(east))])
    plane = axes @ solution.covariance[:3, :3] @ axes.T
    assert (axes @ error) @ np.linalg.solve(plane, axes @ error) < chi2.ppf(0.999, 2)
    assert 250.0 < solution.geodetic["ellipse_95"]["semi_major_m"] < 600.0
    values = {p.name: p for p in solution.parameters}
    for leg, (east_speed, north_speed) in enumerate(truth["east_north_m_s"], 1):
        for axis, speed in (("east", east_speed), ("north", north_speed)):
            found = values[f"{axis}_{leg}_m_s"]
            assert abs(found.value - speed) < 4 * found.sigma
    assert abs(values["turn_2_s"].value) < 4 * values["turn_2_s"].sigma
    leg = 2 if values["turn_2_s"].value < 0.0 else 1
    east_speed, north_speed = (values[f"{axis}_{leg}_m_s"].value for axis in ("east", "north"))
    ground = solution.geodetic
    assert ground["speed_m_s"] == pytest.approx(np.hypot(east_speed, north_speed), abs=1e-3)
    assert np.radians(ground["course_deg"]) == pytest.approx(np.arctan2(east_speed, north_speed), abs=1e-3)
    assert abs(ground["climb_m_s"]) < 1e-3 and ground["height_sigma_m"] == pytest.approx(5.0, rel=0.2)
    offsets = result.tables["offsets.offsets"]
    for name, offset in truth["offsets"].items():
        mine = offsets.array("station_id") == name
        assert np.abs(offsets.array("offset_1")[mine] - offset).max() < 1e-10
    assert any("coastguard" in text for text in solution.cautions)


def test_earth_orientation_ends_somewhere(tmp_path):
    """A pass after the end of the table is refused with exit 4; the degraded mode runs and says what it costs."""
    for name in ("stations.toml", "orrel_head.csv", "quoin_skerry.txt", "bastle_fen.tdm"):
        content = (DEMO / "tamsin_pass" / name).read_text().replace("2026-03-0", "2033-03-0")
        (tmp_path / name).write_text(content)
    text = (DEMO / "tamsin_pass" / "pipeline.toml").read_text()
    (tmp_path / "p.toml").write_text(text)
    result = run_pipeline(tmp_path / "p.toml")
    assert (
        result.exit_code == 4
        and "outside the table" in str(result.error)
        and 'earth_orientation = "degraded"' in str(result.error)
    )
    degraded = [f"nodes.{n}.params.earth_orientation=degraded" for n in ("starts", "fix")]
    result = run_pipeline(tmp_path / "p.toml", overrides=degraded)
    assert result.exit_code == 0, result.error
    assert result.solution.budget["Earth rotation"]["position_m"] > 100.0
    assert any("420 m" in text for text in result.solution.warnings)


@pytest.mark.parametrize("scene", ["tamsin_pass", "stuck_key"])
def test_generator_makes_the_same_files(scene, tmp_path):
    folder = tmp_path / "demo_tracks" / scene
    folder.mkdir(parents=True)
    (tmp_path / "tests").symlink_to(DEMO.parent / "tests")
    (folder / "make_tracks.py").write_bytes((DEMO / scene / "make_tracks.py").read_bytes())
    done = subprocess.run([sys.executable, folder / "make_tracks.py"], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    for path in folder.iterdir():
        if path.suffix in (".csv", ".txt", ".tdm"):
            assert path.read_bytes() == (DEMO / scene / path.name).read_bytes(), path.name
