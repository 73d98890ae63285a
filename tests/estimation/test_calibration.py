"""Station oscillators from known emitters: what was put in comes out, and relativity does not leak into the offset."""

from __future__ import annotations

import numpy as np
import worldline
from campaigns import make_earth

from shiftfix.api import (
    ForwardModel,
    SampledPath,
    clock_history,
    ground_receiver,
    itrs_from_geodetic,
    known_log_ratio,
    observations,
    smooth_offsets,
)


def orbiting_look(offset, seed):
    """Return looks of five minutes at an orbiting emitter of known motion: observed minus predicted ln of frequency."""
    earth, frame, _ = make_earth(1200.0)
    satellite = worldline.over(earth, -41.2, -26.4, 700e3, 20.0, span=700.0)
    ground = worldline.Ground(earth, -40.0, -25.0, 100.0)
    t = np.arange(-150.0, 150.0, 1.0)
    clean = worldline.log_received(satellite, ground, t - 0.5, t + 0.5) + np.log1p(offset)
    rows, _ = observations(
        station=np.zeros(t.size, int),
        middle_s=t,
        interval_s=np.ones(t.size),
        received_hz=np.full(t.size, 437e6),
        sigma_hz=np.full(t.size, 1.0),
        reference_hz=437e6,
    )
    nodes = np.arange(-600.0, 601.0, 30.0)
    state = satellite.state(nodes)
    path = SampledPath(nodes, state[:, :3], state[:, 3:], None)
    receiver = ground_receiver("S", frame, itrs_from_geodetic(np.radians(-40.0), np.radians(-25.0), 100.0))
    noise = rows.sigma * np.random.default_rng(seed).standard_normal(t.size)
    return t, clean + noise - known_log_ratio(ForwardModel(rows, (receiver,)), path, None), rows.sigma


def test_offset_of_1e9_is_recovered_within_2e10():
    """1 Hz noise at 437 MHz, 300 values: 1-sigma 1.3e-10; without time dilation 3e-10 would leak in."""
    errors = []
    for seed in range(20):
        t, rate, sigma = orbiting_look(1e-9, seed)
        answer = smooth_offsets(t, rate, sigma, np.array([-60.0, 0.0, 60.0]), "constant", 0.0)
        errors.append(answer.values[1] - 1e-9)
        assert abs(errors[-1]) < 4 * answer.common_sigma
    assert abs(np.mean(errors)) < 1.0e-10, "no leak of the 3e-10 of time dilation"
    assert np.sqrt(np.mean(np.square(errors))) < 2e-10


def test_drift_and_walk_follow_the_oscillator():
    random = np.random.default_rng(4)
    t = np.arange(0.0, 3600.0, 10.0)
    sigma = np.full(t.size, 1e-10)
    drifting = 2e-9 + 1e-12 * t
    answer = smooth_offsets(t, drifting + sigma * random.standard_normal(t.size), sigma, t[::36], "drift", 0.0)
    assert np.all(np.abs(answer.values - drifting[::36]) < 5 * np.hypot(answer.own_sigma, answer.common_sigma))
    walking = np.cumsum(3e-12 * np.sqrt(10.0) * random.standard_normal(t.size))
    answer = smooth_offsets(t, walking + sigma * random.standard_normal(t.size), sigma, t[::6], "random_walk", 3e-12)
    pulls = (answer.values - walking[::6]) / np.hypot(answer.own_sigma, answer.common_sigma)
    assert np.sqrt(np.mean(pulls**2)) < 1.6
    assert answer.rejected == 0


def test_outlying_looks_are_left_out():
    t = np.arange(0.0, 300.0, 1.0)
    sigma = np.full(t.size, 1e-10)
    rate = 5e-10 + sigma * np.random.default_rng(1).standard_normal(t.size)
    rate[::10] += 1e-8
    answer = smooth_offsets(t, rate, sigma, np.array([0.0, 150.0, 300.0]), "constant", 0.0)
    assert answer.rejected == 30
    assert abs(answer.values[1] - 5e-10) < 5e-11


def test_clock_phase_of_several_records_with_a_slip():
    """Eight emitters, a wandering clock, one undetected slip: the clock comes out to millimetres, the slip does not."""
    random = np.random.default_rng(2)
    epochs = np.arange(0, 121) * 30_000_000_000
    clock = np.cumsum(1e-10 * random.standard_normal(121)) + 3e-9 * np.arange(121)
    sigma = 0.003 / 299792458.0
    rows = []
    for emitter in range(8):
        first, last = sorted(random.choice(121, 2, replace=False))
        first, last = min(first, 40), max(last, 80)
        phase = clock[first : last + 1] + sigma * random.standard_normal(last - first + 1)
        if emitter == 3:
            phase[last - first - 20 :] += 0.19 / 299792458.0
        for k in range(first, last):
            rows.append((epochs[k], epochs[k + 1], (phase[k + 1 - first] - phase[k - first]) / 30.0, emitter))
    start, stop, rate, record = map(np.array, zip(*rows, strict=True))
    zero = np.zeros(start.size)
    history = clock_history(start, stop, rate, np.full(start.size, sigma), record, zero, zero, zenith_sigma_m=0.0)
    assert (~history.kept).sum() == 1, "the slip's row and no other"
    at = np.searchsorted(epochs, history.epochs_ns)
    error = history.phase_s - clock[at]
    error -= error.mean()
    assert np.std(error) * 299792458.0 < 0.004
    assert 0.8 < history.scale < 1.2
    assert np.all(np.diff(history.epochs_ns) > 0) and history.used.max() == 8


def test_zenith_delay_is_found_from_the_emitters_themselves():
    random = np.random.default_rng(8)
    epochs = np.arange(0, 241) * 30_000_000_000
    sigma = 0.003 / 299792458.0
    rows = []
    for emitter in range(8):
        elevation = np.radians(15 + 60 * np.abs(np.sin(np.linspace(emitter, emitter + 2.5, 241))))
        mapping = 1 / np.sin(elevation)
        phase = 0.12 * mapping / 299792458.0 + sigma * random.standard_normal(241)
        for k in range(240):
            rows.append(
                (epochs[k], epochs[k + 1], (phase[k + 1] - phase[k]) / 30.0, emitter, mapping[k], mapping[k + 1])
            )
    start, stop, rate, record, a, b = map(np.array, zip(*rows, strict=True))
    history = clock_history(start, stop, rate, np.full(start.size, sigma), record, a, b)
    assert np.abs(history.zenith_m - 0.12).max() < 0.01
