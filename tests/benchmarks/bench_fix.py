"""Speed of model, fix and search against plain scipy, in one run on one machine: python tests/benchmarks/bench_fix.py

Prints ratios and rates; asserts nothing. One LEO pass over four stations, a row a second.
"""

from __future__ import annotations

import sys
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path[:0] = [str(Path(__file__).parents[1] / "support"), str(Path(__file__).parent)]
import plain_scipy  # noqa: E402
import worldline  # noqa: E402
from campaigns import make_earth  # noqa: E402

from shiftfix.api import (  # noqa: E402
    AnswerSettings,
    BoundMotion,
    ClockModels,
    FitSettings,
    Forces,
    ForwardModel,
    OrbitMotion,
    circular_orbits,
    fit_arc,
    ground_receiver,
    itrs_from_geodetic,
    observations,
    refine,
    search_data,
    solve_arc,
)

PLACES = [(-38.91, -23.12), (-41.36, -29.04), (-43.87, -25.40), (-40.6, -26.2)]


def scene():
    earth, frame, epoch = make_earth(1300.0)
    satellite = worldline.over(earth, -41.2, -26.4, 560e3, -9.9, span=900.0)
    receivers, z, station, middle = [], [], [], []
    for k, (latitude, longitude) in enumerate(PLACES):
        ground = worldline.Ground(earth, latitude, longitude, 40.0)
        t = np.arange(-420.0, 421.0, 1.0)
        t = t[worldline.elevation(satellite, ground, t) > 4]
        z.append(worldline.log_received(satellite, ground, t - 0.5, t + 0.5))
        station.append(np.full(t.size, k))
        middle.append(t)
        receivers.append(
            ground_receiver(f"S{k}", frame, itrs_from_geodetic(np.radians(latitude), np.radians(longitude), 40.0))
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
    noise = rows.sigma * np.random.default_rng(1).standard_normal(middle.size)
    return replace(rows, z=z[order] + 4e-6 + noise), tuple(receivers), satellite, earth, frame, epoch


def best(function, repeat):
    times = []
    for _ in range(repeat):
        begin = time.perf_counter()
        function()
        times.append(time.perf_counter() - begin)
    return min(times)


def main():
    rows, receivers, satellite, earth, frame, epoch = scene()
    truth = satellite.state(np.zeros(1))[0]
    span = (float(rows.start_s.min()) - 2, float(rows.stop_s.max()) + 1)
    motion = OrbitMotion(
        epoch, span, frame, Forces(degree=0, sun=False, moon=False, relativity=False, radiation=False, drag=False)
    )
    clocks = ClockModels(emitter="drift")
    settings = FitSettings(clocks=clocks)
    start = truth + np.array([5e3, -4e3, 3e3, 8.0, -6.0, 5.0])
    forward = ForwardModel(rows, receivers)

    def evaluate():
        path = motion.at(truth + np.random.default_rng(0).standard_normal(6))
        link = forward.links(path)
        forward.predict(path, link)
        forward.partials(path, link)

    evaluate()
    one = best(evaluate, 60)
    parameters = 6 + 1 + 1 + len(receivers)
    print(f"rows {len(rows)}, parameters {parameters} ({6} of motion, the others linear and eliminated)")
    print(f"model + partials (orbit integrated anew): {one * 1e3:.2f} ms, {len(rows) / one / 1e6:.2f} M rows/s")
    whole = best(lambda: fit_arc(rows, receivers, motion, start, settings), 10)
    warm = best(lambda: fit_arc(rows, receivers, motion, start, settings, forward=forward), 20)
    fit = fit_arc(rows, receivers, motion, start, settings)
    print(
        f"warm fix: {warm * 1e3:.1f} ms ({whole * 1e3:.1f} ms with the receivers' events made anew), "
        f"{fit.iterations} iterations, error {np.linalg.norm(fit.parameters[:3] - truth[:3]):.0f} m"
    )

    def places(t):
        return np.concatenate(
            [worldline.Ground(earth, *PLACES[s], 40.0).position(t[rows.station == s]) for s in range(len(PLACES))]
        )

    cache = {}

    def cached(t):
        key = t.tobytes()
        if key not in cache:
            cache[key] = places(t)
        return cache[key]

    guess = np.concatenate([start, [4e-6, 0.0], np.zeros(len(PLACES) - 1)])
    begin = time.perf_counter()
    answer, residuals, scale = plain_scipy.solve(
        rows.z, rows.sigma, rows.station, rows.start_s, rows.stop_s, cached, span, guess
    )
    plain = time.perf_counter() - begin
    print(
        f"plain scipy: {plain:.2f} s, {answer.nfev} evaluations + Jacobians, "
        f"error {np.linalg.norm((answer.x * scale)[:3] - truth[:3]):.0f} m"
    )
    print(f"warm fix is {plain / warm:.0f} times faster than plain scipy")
    single = best(lambda: residuals(answer.x), 5)
    print(
        f"plain model without partials: {single * 1e3:.1f} ms; "
        f"with finite differences of {guess.size} columns {single * (guess.size + 1) * 1e3:.0f} ms"
    )

    full = OrbitMotion(epoch, span, frame)
    begin = time.perf_counter()
    data = search_data(rows, receivers, clocks)
    states, _ = refine(data, full.propagate_batch, circular_orbits(data)[0], full.scales)
    searched = time.perf_counter() - begin
    bound = BoundMotion("orbit", full, None, full.propagate_batch, "GCRS", frame)
    solve_arc(rows, receivers, bound, states, AnswerSettings(fit=settings))
    print(f"cold fix from no prior: {time.perf_counter() - begin:.2f} s, of it search {searched:.2f} s")


if __name__ == "__main__":
    main()
