"""Receiver files of navigation satellites, precise orbits as truth (IGS final products); skipped where they are not there."""

from __future__ import annotations

from pathlib import Path

import pytest
from precise_orbit import against

from shiftfix.api import run_pipeline

HERE = Path(__file__).parent
SHARED = HERE.parents[2] / "shared"
needs_data = pytest.mark.skipif(
    not (SHARED / "data" / "gnss" / "2008_148").is_dir(), reason="the receiver files are not beside this clone"
)
MARKS = {
    "gnss_2008_148/g17.toml": (40.0, 5e-3),
    "gnss_2008_148/g22.toml": (40.0, 5e-3),
    "gnss_2008_148/g28.toml": (40.0, 5e-3),
    "gnss_2021_001/g27.toml": (20.0, 1.0),
    "gnss_2021_001/g16.toml": (40.0, 1.0),
    "gnss_2021_001/g08.toml": (60.0, 1.0),
    "gnss_2021_001/g07.toml": (200.0, 1.0),
}


@needs_data
@pytest.mark.parametrize("track", MARKS)
def test_satellite_within_its_mark(track):
    satellite = Path(track).stem.upper()
    result = run_pipeline(HERE / track, allow=[SHARED])
    assert result.error is None, result.error
    assert result.exit_code == 0
    position, velocity, normalised = against(result.solution, result.tables["orbits.ephemeris"], satellite)
    metres, speed = MARKS[track]
    assert position <= metres
    assert velocity <= speed
    assert normalised <= 12.59, "95 % point of chi-square, six degrees of freedom"


@needs_data
def test_simple_clocks_are_seen_to_be_too_simple():
    result = run_pipeline(HERE / "gnss_2008_148/g17_simple_clocks.toml", allow=[SHARED])
    assert result.error is None, result.error
    solution = result.solution
    assert any("not white" in text for text in solution.findings)
    if solution.position_m is None:
        assert result.exit_code == 5
        return
    assert solution.covariance_kind == "widened"
    orbits = run_pipeline(HERE / "gnss_2008_148/g17.toml", allow=[SHARED]).tables["orbits.ephemeris"]
    position, _, normalised = against(solution, orbits, "G17")
    assert 100.0 < position < 3000.0, "clocks that are constant and linear cost hundreds of metres"
    assert normalised <= 12.59
