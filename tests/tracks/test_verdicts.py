"""Verdicts from pipeline files: ambiguous with both sides of the track, a mirror below the ground, nothing to locate."""

from __future__ import annotations

import numpy as np
import pytest
import worldline
from campaigns import aircraft

from shiftfix.api import AnswerSettings, ArcScene, FitSettings, Quantity, refine, run_pipeline, search_data, solve_arc

EPOCH = np.datetime64("2026-03-01T12:00:00.000000")
BEACON = """shiftfix = 1
title = "Beacon, one pass"
emitter_classes = ["wildlife"]
[nodes.track]
use = "ingest.positions"
params.files = "track.csv"
params.columns = { time = "t", x = "x", y = "y", z = "z" }
params.time_scale = "UTC"
params.object = "PETREL-A"
[nodes.stations]
use = "ingest.stations"
params.file = "stations.toml"
inputs.ephemeris = ["track"]
[nodes.log]
use = "ingest.delimited"
params.files = "log.csv"
params.columns = { time = "t", frequency = "f" }
params.units = { frequency = "Hz" }
params.time_scale = "UTC"
params.time_tag = "middle"
params.interval = "0.4 s"
params.sigma = "2 Hz"
params.station = "PETREL-A"
[nodes.starts]
use = "solve.search"
inputs = { frequencies = "log", stations = "stations" }
params.motion = "fixed"
params.emitter_model = "drift"
params.emitter_drift_sigma = "1e-9 1/s"
params.rest_frequency = "401.648 MHz +/- 5 kHz"
[nodes.fix]
use = "solve.fix"
inputs = { frequencies = "log", stations = "stations", starts = "starts" }
params.emitter_model = "drift"
params.emitter_drift_sigma = "1e-9 1/s"
"""
BOOK = (
    '[stations.PETREL-A]\ntrack = "PETREL-A"\nposition_sigma = "50 m"\nreference = "gnss-disciplined"\nclock = "gnss"\n'
)


def stamp(seconds):
    return str(EPOCH + np.timedelta64(round(seconds * 1e6), "us")) + "Z"


@pytest.mark.parametrize(("off_track_deg", "half_s", "code"), [(1.1, 150.0, 6), (6.0, 400.0, 0)])
def test_beacon_heard_by_a_low_orbiter(tmp_path, off_track_deg, half_s, code):
    earth = worldline.Earth(2026, 3, 1, 43200.0, 37)
    beacon = worldline.Ground(earth, -41.2, -26.4, 0.0)
    orbiter = worldline.over(earth, -41.2, -26.4 + off_track_deg, 850e3, -8.0, span=900.0)
    t = np.arange(-half_s, half_s + 1, 10.0)
    t = t[worldline.elevation(orbiter, beacon, t) > 3]
    received = 401.648e6 * np.exp(worldline.log_received(beacon, orbiter, t - 0.2, t + 0.2))
    received += 2.0 * np.random.default_rng(0).standard_normal(t.size)
    (tmp_path / "log.csv").write_text(
        "t,f\n" + "\n".join(f"{stamp(a)},{f:.3f}" for a, f in zip(t, received, strict=True))
    )
    nodes = np.arange(-840.0, 841.0, 60.0)
    fixed = np.einsum("nji,nj->ni", earth.matrix(nodes), orbiter.position(nodes))
    lines = [f"{stamp(a)},{x:.3f},{y:.3f},{z:.3f}" for a, (x, y, z) in zip(nodes, fixed, strict=True)]
    (tmp_path / "track.csv").write_text("t,x,y,z\n" + "\n".join(lines))
    (tmp_path / "stations.toml").write_text(BOOK)
    (tmp_path / "p.toml").write_text(BEACON)
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == code, (result.error, result.solution and result.solution.verdict_text)
    solution = result.solution
    truth = beacon.itrs(np.zeros(1))[0]
    found = [solution.position_m, *(np.array(a.state["position_m"]) for a in solution.alternatives)]
    assert min(np.linalg.norm(p - truth) for p in found) < 15e3
    assert np.all(solution.velocity_m_s == 0.0) and np.all(solution.covariance[3:] == 0.0)
    assert solution.budget["coordinates"]["position_m"] > 10.0, "the orbiter's own 50 m"
    if code == 6:
        assert len(found) == 2 and np.linalg.norm(found[0] - found[1]) > 150e3
        assert solution.odds + solution.alternatives[0].odds == pytest.approx(1.0)
        assert result.document["alternatives"][0]["odds"] < 0.95
    else:
        error = (solution.position_m - truth)[:3]
        up = truth / np.linalg.norm(truth)
        assert np.linalg.norm(error - up * (error @ up)) < 4 * solution.budget["total"]["position_m"]


def test_aircraft_without_height_has_a_mirror_below():
    """Six ground stations: without a height prior a second answer lies some 20 km lower; a prior decides."""
    import shiftfix_solve.motions as motions
    from shiftfix_solve.options import PolynomialOptions

    campaign = aircraft()
    rows, _ = campaign.draw(0)
    scene = ArcScene(0, (-150.0, 150.0), campaign.bound.earth, campaign.receivers)
    data = search_data(rows, campaign.receivers, campaign.clocks)
    for height, verdict in ((None, "ambiguous"), (Quantity(11000.0, 300.0), "fix")):
        bound = motions.polynomial(PolynomialOptions(height=height), scene)
        states, _ = refine(
            data, bound.states_batch, bound.candidates(data), bound.motion.scales, priors=tuple(bound.priors)
        )
        answer = solve_arc(
            rows, campaign.receivers, bound, states, AnswerSettings(fit=FitSettings(priors=tuple(bound.priors)))
        )
        assert answer.verdict == verdict
        distances = [
            np.linalg.norm(bound.state(f.path)[0] - campaign.truth[:3]) for f in (answer.widened.fit, *answer.others)
        ]
        assert min(distances) < 1000.0
        assert (max(distances) > 15e3) == (verdict == "ambiguous")


def test_a_station_that_is_not_in_the_book_is_named_plainly(tmp_path):
    (tmp_path / "stations.toml").write_text(
        '[stations.NORTH]\nlatitude = "-41 deg"\nlongitude = "-26 deg"\nheight = "9 m"\nheight_kind = "ellipsoid"\n'
        'datum = "WGS84"\noffset = "0 +/- 1e-9"\nclock = "pps"\nposition_sigma = "3 m"\n'
    )
    (tmp_path / "log.csv").write_text("t,f\n2026-03-01T12:00:00Z,437000000.5\n2026-03-01T12:00:09Z,437000001.5\n")
    text = BEACON.replace("PETREL-A", "NORHT")
    start, stop = text.index("[nodes.track]"), text.index("[nodes.stations]")
    (tmp_path / "p.toml").write_text(text[:start] + text[stop:].replace('inputs.ephemeris = ["track"]\n', ""))
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4
    assert "log.csv:2: station 'NORHT' is not in the station book" in str(result.error)
    assert "did you mean NORTH?" in str(result.error)
