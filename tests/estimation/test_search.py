"""Search without any prior: the basin of the truth is in the list, and so is a mirror that fits."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import worldline
from campaigns import make_earth

from shiftfix.api import (
    AnswerSettings,
    BoundMotion,
    ClockModels,
    FitSettings,
    FixedMotion,
    OrbitMotion,
    Receiver,
    SampledPath,
    ValuePrior,
    circular_orbits,
    ground_places,
    ground_receiver,
    itrs_from_geodetic,
    observations,
    refine,
    search_data,
    solve_arc,
)

PLACES = [(-38.91, -23.12), (-41.36, -29.04), (-43.87, -25.40), (-40.2, -26.0)]


def orbit_scene(seed):
    """Return a random pass (350 to 1 500 km, any heading) over two to four stations."""
    random = np.random.default_rng(seed)
    earth, frame, epoch = make_earth(1300.0)
    satellite = worldline.over(
        earth,
        -41.2 + random.uniform(-4, 4),
        -26.4 + random.uniform(-5, 5),
        random.uniform(350e3, 1.5e6),
        random.uniform(0, 360),
        span=900.0,
    )
    count = int(random.integers(2, 5))
    receivers, z, station, middle = [], [], [], []
    for k in range(count):
        latitude, longitude = PLACES[k]
        ground = worldline.Ground(earth, latitude, longitude, 40.0)
        t = np.arange(-400.0, 401.0, 5.0)
        t = t[worldline.elevation(satellite, ground, t) > 5]
        z.append(worldline.log_received(satellite, ground, t - 0.5, t + 0.5))
        station.append(np.full(t.size, k))
        middle.append(t)
        receivers.append(
            ground_receiver(
                f"S{k}", frame, itrs_from_geodetic(np.radians(latitude), np.radians(longitude), 40.0), offset_sigma=1e-8
            )
        )
    station, middle, z = map(np.concatenate, (station, middle, z))
    rows, order = observations(
        station=station,
        middle_s=middle,
        interval_s=np.ones(middle.size),
        received_hz=np.full(middle.size, 437e6),
        sigma_hz=np.ones(middle.size),
        reference_hz=437e6,
    )
    rows = replace(rows, z=z[order] + 4e-6 + rows.sigma * random.standard_normal(middle.size))
    return rows, tuple(receivers), satellite, frame, epoch


def found(seed):
    """Return whether the search's list holds the truth's basin (within five standard deviations after the fit)."""
    rows, receivers, satellite, frame, epoch = orbit_scene(seed)
    if len(np.unique(rows.station)) < 2:
        return True
    motion = OrbitMotion(epoch, (float(rows.start_s.min()) - 2, float(rows.stop_s.max()) + 1), frame)
    data = search_data(rows, receivers, ClockModels())
    states, _ = refine(data, motion.propagate_batch, circular_orbits(data)[0], motion.scales)
    bound = BoundMotion("orbit", motion, None, motion.propagate_batch, "GCRS", frame)
    answer = solve_arc(rows, receivers, bound, states, AnswerSettings(keep_delta_chi_square=1e9))
    truth = satellite.state(np.zeros(1))[0]
    fits = ([answer.widened.fit] if answer.widened else []) + list(answer.others)
    return any(
        np.all(np.abs(f.parameters - truth) < 5 * np.sqrt(np.diag(f.covariance)[:6]) + 1e-4 * np.abs(truth))
        for f in fits
    )


@pytest.mark.parametrize("seed", range(24))
def test_random_pass_is_found_from_nothing(seed):
    assert found(seed)


def test_mirror_across_the_track_is_listed_and_decides_the_verdict():
    earth, frame, _ = make_earth(1200.0)
    beacon = worldline.Ground(earth, -41.2, -26.4, 0.0)
    orbiter = worldline.over(earth, -41.2, -25.3, 850e3, -8.0, span=900.0)
    nodes = np.arange(-800.0, 801.0, 30.0)
    state = orbiter.state(nodes)
    receivers = (
        Receiver("PETREL-A", SampledPath(nodes, state[:, :3], state[:, 3:], None), moving=True, offset_sigma=1e-10),
    )
    motion = FixedMotion(frame)
    priors = (ValuePrior(2, 0.0, 300.0),)
    bound = BoundMotion("fixed", motion, None, motion.states_batch, "ITRS", frame, priors)
    clocks = ClockModels(emitter="drift", emitter_drift_sigma_per_s=1e-9)
    truth = beacon.itrs(np.zeros(1))[0]
    for half, verdict in ((150.0, "ambiguous"), (300.0, "fix")):
        t = np.arange(-half, half + 1, 10.0)
        clean = worldline.log_received(beacon, orbiter, t - 0.2, t + 0.2)
        rows, _ = observations(
            station=np.zeros(t.size, int),
            middle_s=t,
            interval_s=np.full(t.size, 0.4),
            received_hz=np.full(t.size, 401.648e6),
            sigma_hz=np.full(t.size, 2.0),
            reference_hz=401.648e6,
        )
        rows = replace(rows, z=clean + rows.sigma * np.random.default_rng(0).standard_normal(t.size))
        data = search_data(rows, receivers, clocks)
        places = np.column_stack(ground_places(orbiter_below(earth, orbiter), 2.5e6, 0.0, 900))
        states, _ = refine(data, motion.states_batch, places, motion.scales, priors=priors)
        settings = AnswerSettings(fit=FitSettings(clocks=clocks, priors=priors))
        answer = solve_arc(rows, receivers, bound, states, settings)
        assert answer.verdict == verdict
        positions = [bound.state(f.path)[0] for f in (answer.widened.fit, *answer.others)]
        assert len(positions) == 2, "both sides of the track are in the list"
        assert min(np.linalg.norm(p - truth) for p in positions) < 30e3
        assert np.linalg.norm(positions[0] - positions[1]) > 150e3
        assert answer.odds.sum() == pytest.approx(1.0)


def orbiter_below(earth, orbiter):
    return earth.matrix(np.zeros(1))[0].T @ orbiter.position(np.zeros(1))[0]
