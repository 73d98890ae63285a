"""ln D and its mean against 50 digits, invariance, partial derivatives against differences, shapes."""

import mpmath
import numpy as np
import pytest
from straight_paths import AcceleratedPath, UniformPaths, random_directions, random_velocities

from shiftfix.physics import doppler
from shiftfix.physics.constants import GM_EARTH_M3_S2, SPEED_OF_LIGHT_M_S
from shiftfix.physics.fourvectors import boost, four_velocity, observed_frequency, rotation, wave_four_vector
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.gravity import earth_potential
from shiftfix.physics.lighttime import one_way
from shiftfix.physics.motion.fixed import FixedMotion
from shiftfix.physics.motion.forces import Forces
from shiftfix.physics.motion.orbit import OrbitMotion
from shiftfix.physics.motion.states import States
from shiftfix.physics.motion.surface import SurfaceMotion
from shiftfix.physics.timescales import tai_ns_from_utc

C = SPEED_OF_LIGHT_M_S
EPOCH = tai_ns_from_utc("2026-03-01T12:00:00Z")


def scenes(count, largest_beta=0.9, seed=1):
    random = np.random.default_rng(seed)
    velocity_t, velocity_r = (C * random_velocities(random, count, largest_beta) for _ in range(2))
    receiver = np.exp(random.uniform(np.log(1e5), np.log(1e9), count))[:, None] * random_directions(random, count)
    emitter = UniformPaths(np.zeros((count, 3)), velocity_t)
    link = one_way(np.zeros(count), receiver, emitter, shapiro=False)
    return link, States(receiver, velocity_r, np.zeros((count, 3)))


def exact(n, v_t, v_r):
    """ln[(k.u)_R/(k.u)_T] of the float64 inputs as they are, by the definition, 50 digits."""
    c = mpmath.mpf(int(C))

    def frequency(v):
        beta = [mpmath.mpf(float(a)) / c for a in v]
        gamma = 1 / mpmath.sqrt(1 - mpmath.fsum(b * b for b in beta))
        return gamma * (1 - mpmath.fsum(mpmath.mpf(float(a)) * b for a, b in zip(n, beta, strict=True)))

    return mpmath.log(frequency(v_r) / frequency(v_t))


@pytest.fixture(scope="module")
def against_50_digits():
    link, receiver = scenes(10_000)
    with mpmath.workdps(50):
        reference = [exact(*row) for row in zip(link.direction, link.emitter.velocity, receiver.velocity, strict=True)]
        fast, precise = doppler.log_ratio(link, receiver), doppler.log_ratio_precise(link, receiver)
        error = [
            np.array([float(mpmath.mpf(float(a)) - b) for a, b in zip(values, reference, strict=True)])
            for values in (fast, precise)
        ]
    return np.array([float(r) for r in reference]), *error, link, receiver


def test_precise_path_has_relative_accuracy_1e_14_up_to_nine_tenths_of_light(against_50_digits):
    reference, _, error, _, _ = against_50_digits
    assert np.abs(error / reference).max() <= 1e-14


def test_fast_path_has_relative_accuracy_1e_14_unless_terms_cancel(against_50_digits):
    """Accuracy 5e-15 of the larger of |ln D| and v/c everywhere; relative to ln D wherever that is not far smaller."""
    reference, error, _, link, receiver = against_50_digits
    speed = np.maximum(*(np.linalg.norm(v, axis=1) for v in (link.emitter.velocity, receiver.velocity))) / C
    assert np.abs(error / np.maximum(np.abs(reference), speed)).max() <= 5e-15
    relative = np.abs(error / reference)
    assert np.percentile(relative, 99) <= 1e-14
    whole = np.abs(reference) > 0.3 * speed
    assert whole.mean() > 0.5 and relative[whole].max() <= 1e-14


def test_potentials_in_the_extended_path_agree_with_the_fast_path():
    link, receiver = scenes(500, 1e-4, 2)
    potentials = {"receiver_potential": np.full(500, 6.2e7), "emitter_potential": np.linspace(1e7, 6e7, 500)}
    fast, precise = (f(link, receiver, **potentials) for f in (doppler.log_ratio, doppler.log_ratio_precise))
    assert np.abs(fast - precise).max() < 3e-20
    # Clock at height: w difference over c**2 when nothing moves, blue below (first post-Newtonian order)
    still = States(receiver.position, np.zeros((500, 3)), np.zeros((500, 3)))
    resting = link._replace(emitter=States(link.emitter.position, np.zeros((500, 3)), np.zeros((500, 3))))
    change = (potentials["emitter_potential"] - potentials["receiver_potential"]) / C**2
    assert np.abs(doppler.log_ratio(resting, still, **potentials) + change).max() < 1e-18


def test_ratio_is_unchanged_by_a_thousand_boosts_and_rotations():
    """k.u of both ends is formed in a boosted and turned frame, its ratio compared with `log_ratio`."""
    random = np.random.default_rng(3)
    link, receiver = scenes(1000, 0.9, 4)
    expected = np.exp(doppler.log_ratio(link, receiver))
    worst = 0.0
    for i in range(1000):
        k = wave_four_vector(1.0, link.direction[i])
        ends = [four_velocity(v[i] / C) for v in (link.emitter.velocity, receiver.velocity)]
        turn, upper = np.linalg.qr(random.standard_normal((3, 3)))
        turn = turn * np.sign(np.diag(upper)) * np.sign(np.linalg.det(turn * np.sign(np.diag(upper))))
        matrix = rotation(turn) @ boost(random_velocities(random, 1, 0.5)[0])
        emitted, received = (observed_frequency(matrix @ k, matrix @ u) for u in ends)
        worst = max(worst, abs(received / emitted / expected[i] - 1.0))
    assert worst <= 1e-13


# Mean over a count

FAR = AcceleratedPath([7.0e6, 1.0e5, -2.0e5], [310.0, 7400.0, 1200.0], [-8.2, 0.3, 0.9])
STATION = AcceleratedPath([6.37e6, 2.0e4, 1.0e4], [-1.2, 465.0, 0.4], [-0.034, 0.0, 0.001])


def mean_of(interval, emitter=FAR, station=STATION):
    ends = [np.array([-0.5 * interval]), np.array([0.5 * interval])]
    receivers = [station.states(t) for t in ends]
    links = [one_way(t, r.position, emitter) for t, r in zip(ends, receivers, strict=True)]
    return doppler.log_mean_ratio(*links, *receivers, np.array([interval]))[0]


def exact_mean(interval, emitter=FAR, station=STATION):
    """Emitter's proper time that arrives over the receiver's, 50 digits: light times solved, deficits integrated."""
    mp = mpmath.mp
    c, gm = mpmath.mpf(int(C)), mpmath.mpf(GM_EARTH_M3_S2)
    from shiftfix.physics.constants import EARTH_RADIUS_M, J2_1

    j2, radius = mpmath.mpf(J2_1), mpmath.mpf(EARTH_RADIUS_M)
    bodies = [[[mpmath.mpf(float(a)) for a in part] for part in path.start] for path in (emitter, station)]

    def state(body, t):
        x, v, a = body
        return [x[i] + v[i] * t + a[i] * t * t / 2 for i in range(3)], [v[i] + a[i] * t for i in range(3)]

    def deficit(body, t):
        x, v = state(body, t)
        r2 = mpmath.fsum(a * a for a in x)
        r = mp.sqrt(r2)
        w = gm / r * (1 + j2 * radius**2 / r2 / 2 * (1 - 3 * x[2] ** 2 / r2))
        return (w + mpmath.fsum(a * a for a in v) / 2) / c**2

    def light_time(t):
        receiver, _ = state(bodies[1], t)
        size = lambda a: mp.sqrt(mpmath.fsum(b * b for b in a))  # noqa: E731

        def path(delay):
            emitter, _ = state(bodies[0], t - delay)
            distance = size([a - b for a, b in zip(receiver, emitter, strict=True)])
            total = size(receiver) + size(emitter)
            return distance / c + 2 * gm / c**3 * mp.log((total + distance) / (total - distance))

        delay = mpmath.mpf(0)
        for _ in range(14):
            delay = path(delay)
        return delay

    first, last = -mpmath.mpf(interval) / 2, mpmath.mpf(interval) / 2
    sent = [first - light_time(first), last - light_time(last)]
    emitted = sent[1] - sent[0] - mp.quad(lambda t: deficit(bodies[0], t), sent)
    counted = last - first - mp.quad(lambda t: deficit(bodies[1], t), [first, last])
    return mp.log(emitted / counted)


@pytest.mark.parametrize("ends", [(FAR, STATION), (STATION, FAR)], ids=["down", "up"])
@pytest.mark.parametrize("interval", [1.0, 10.0, 60.0])
def test_mean_ratio_against_50_digits(interval, ends):
    """Light times near 2 ms in float64 (4e-19 s) over the count; end corrections of proper time at 60 s."""
    with mpmath.workdps(50):
        assert abs(float(mpmath.mpf(float(mean_of(interval, *ends))) - exact_mean(interval, *ends))) <= 1e-15


def fast_mean(velocity_t, velocity_r, seed):
    """Mean over 1000 s of uniformly moving ends, far out, where the Earth's potential is below 1e-15 of c**2."""
    direction = random_directions(np.random.default_rng(seed), len(velocity_t))
    emitter, length = UniformPaths(np.full((len(velocity_t), 3), 1e13), velocity_t), np.full(len(velocity_t), 1000.0)
    times = [-0.5 * length, 0.5 * length]
    receivers = [States(3e13 * direction + velocity_r * t[:, None], velocity_r, np.zeros_like(velocity_r)) for t in times]
    links = [one_way(t, r.position, emitter, shapiro=False) for t, r in zip(times, receivers, strict=True)]
    return emitter, links, receivers, length, doppler.log_mean_ratio(*links, *receivers, length)


def test_mean_ratio_is_exact_up_to_nine_tenths_of_light():
    """Uniform motion: times elapsed over each end's gamma. Light times of 1e5 s carry 1.5e-11 s into 1000 s."""
    random = np.random.default_rng(8)
    velocity_t, velocity_r = (C * random_velocities(random, 300, 0.9) for _ in range(2))
    _, links, _, length, ours = fast_mean(velocity_t, velocity_r, 9)
    emitted = length - (links[1].light_time_s - links[0].light_time_s)
    root_t, root_r = (np.sqrt(1.0 - np.sum(v * v, axis=1) / C**2) for v in (velocity_t, velocity_r))
    assert np.abs(ours - np.log(emitted * root_t / (length * root_r))).max() <= 5e-15


def test_partials_of_the_mean_ratio_of_fast_emitters():
    """d/dv at 0.3 to 0.8 of light against central differences of 1e-5 c; rounding of the light times makes 3e-9."""
    random = np.random.default_rng(10)
    velocity_t = C * np.linspace(0.3, 0.8, 40)[:, None] * random_directions(random, 40)
    velocity_r = C * random_velocities(random, 40, 0.5)
    _, links, _, length, _ = fast_mean(velocity_t, velocity_r, 11)
    unit = np.broadcast_to(np.eye(3), (40, 3, 3))
    blocks = [(link.emission_times_s[:, None, None] * unit, unit) for link in links]
    ours = doppler.log_mean_ratio_partials(*links, length, *blocks[0], *blocks[1]) * C
    for k, axis in enumerate(np.eye(3)):
        moved = [fast_mean(velocity_t + sign * 1e-5 * C * axis, velocity_r, 11)[4] for sign in (1.0, -1.0)]
        assert ours[:, k] == pytest.approx((moved[0] - moved[1]) / 2e-5, abs=1e-6 * np.abs(ours).max())


def test_proper_time_of_a_minute_is_that_of_its_seconds():
    """A flattened Earth, e = 0.1, a whole turn: ends of a minute against sixty seconds, 1e-17 of the minute and rounding."""
    span, a, e = (0.0, 7300.0), 7.4e6, 0.1
    frame = EarthFrame.without_orientation(EPOCH, span)
    forces = Forces(degree=2, sun=False, moon=False, relativity=False, radiation=False, drag=False)
    speed = np.sqrt(GM_EARTH_M3_S2 / a * (1 + e) / (1 - e))
    path = OrbitMotion(EPOCH, span, frame, forces).at(np.array([a * (1 - e), 0, 0, 0, 0.4 * speed, np.sqrt(0.84) * speed]))
    states, k = path.states(np.arange(0.0, 6601.0)), np.arange(6601)
    seconds = doppler.time_lost(states, k[:-1], k[1:], np.ones(6600)).reshape(110, 60).sum(axis=1)
    minutes = doppler.time_lost(states, k[:-60:60], k[60::60], np.full(110, 60.0))
    assert np.abs(minutes - seconds).max() / 60.0 < 3e-17
    assert np.ptp(minutes) / 60.0 > 1e-11


def test_mid_interval_value_is_off_by_curvature_over_24():
    """Mean minus value at mid-interval is f'' T**2/24 (Taylor), to the next order in T."""
    interval, h = 8.0, 4.0
    receiver = STATION.states(np.array([-h, 0.0, h]))
    link = one_way(np.array([-h, 0.0, h]), receiver.position, FAR)
    values = np.expm1(
        doppler.log_ratio(
            link, receiver, receiver_potential=earth_potential(receiver.position),
            emitter_potential=earth_potential(link.emitter.position),
        )
    )
    curvature = (values[0] - 2.0 * values[1] + values[2]) / h**2
    bias = np.expm1(mean_of(interval)) - values[1]
    assert abs(curvature) * interval**2 / 24 > 1e-10
    assert bias == pytest.approx(curvature * interval**2 / 24, rel=2e-3)


RISING = AcceleratedPath([6.8e6, 1.6e6, -2.0e5], [2900.0, 6800.0, 1200.0], [-7.5, -1.8, 0.2])


@pytest.mark.parametrize(("ends", "worth"), [((FAR, STATION), 3e-15), ((RISING, STATION), 1.5e-14), ((STATION, RISING), 1.5e-14)])
def test_instantaneous_ratio_is_the_limit_of_the_mean(ends, worth):
    """Counts of 8 to 1 s extrapolated to none: 1e-16, where the light's delay is worth more."""
    means = [np.expm1(mean_of(interval, *ends)) for interval in (8.0, 4.0, 2.0, 1.0)]
    for power in (4.0, 16.0, 64.0):
        means = [(power * b - a) / (power - 1.0) for a, b in zip(means, means[1:], strict=False)]
    receiver = ends[1].states(np.zeros(1))
    link = one_way(np.zeros(1), receiver.position, ends[0])
    potentials = {
        "receiver_potential": earth_potential(receiver.position),
        "emitter_potential": earth_potential(link.emitter.position),
    }
    with_delay, without = (doppler.log_ratio(link, receiver, light_delay=d, **potentials)[0] for d in (True, False))
    assert abs(with_delay - np.log1p(means[0])) <= 1e-16
    assert abs(with_delay - without) > worth


# Partial derivatives


@pytest.fixture(scope="module")
def frame():
    day = np.arange(61090.0, 61110.0)
    zero = np.zeros(day.size)
    return EarthFrame.from_orientation(EPOCH, (-900.0, 900.0), day, zero - 37.0, zero + 1e-6, zero + 2e-6, zero, zero)


@pytest.fixture(scope="module")
def receivers(frame):
    orbit = OrbitMotion(EPOCH, (-900.0, 900.0), frame, Forces(degree=2, sun=False, moon=False))
    return {
        "ground": FixedMotion(frame).at(np.array([-0.71, -0.46, 120.0])),
        "orbiting": orbit.at(np.array([-4.9e6, 2.1e6, -4.6e6, 3.2e3, 6.6e3, -0.4e3])),
    }


def emitters(frame):
    still = frame.to_gcrs(np.array([0.0]), FixedMotion(frame).at(np.array([-0.70, -0.43, 0.0])).position_itrs_m).position[0]
    up = still / np.linalg.norm(still)
    along = np.cross(up, [0.3, 0.2, 1.0])
    state = np.concatenate([up * 6.9e6, 7600.0 * along / np.linalg.norm(along)])
    return {
        "orbit": (OrbitMotion(EPOCH, (-900.0, 900.0), frame, Forces(degree=4, sun=False, moon=False)), state),
        "surface": (SurfaceMotion(frame), np.array([-0.70, -0.43, 10.0, 12.0, -150.0])),
        "fixed": (FixedMotion(frame), np.array([-0.70, -0.43, 300.0])),
    }


TIMES = np.linspace(-600.0, 600.0, 25)
STEPS = {"orbit": [2e3] * 3 + [2.0] * 3, "surface": [3e-4, 3e-4, 2e3, 20.0, 20.0], "fixed": [3e-4, 3e-4, 2e3]}


def instantaneous(path, receiver_path):
    receiver = receiver_path.states(TIMES)
    link = one_way(TIMES, receiver.position, path)
    potentials = {
        "receiver_potential": earth_potential(receiver.position),
        "emitter_potential": earth_potential(link.emitter.position),
    }
    return link, receiver, doppler.log_ratio(link, receiver, **potentials)


def averaged(path, receiver_path, interval=10.0):
    ends = [TIMES - 0.5 * interval, TIMES + 0.5 * interval]
    receivers = [receiver_path.states(t) for t in ends]
    links = [one_way(t, r.position, path) for t, r in zip(ends, receivers, strict=True)]
    length = np.full(TIMES.size, interval)
    return links, receivers, length, doppler.log_mean_ratio(*links, *receivers, length)


def differences(function, motion, parameters, steps):
    """Central differences with steps h, h/2 and h/4, extrapolated twice (error of sixth order)."""
    columns = []
    for k, step in enumerate(steps):
        table = []
        for part in (1.0, 0.5, 0.25):
            ends = []
            for sign in (1.0, -1.0):
                moved = parameters.copy()
                moved[k] += sign * part * step
                ends.append(function(motion.at(moved)))
            table.append((ends[0] - ends[1]) / (2.0 * part * step))
        once = [(4.0 * b - a) / 3.0 for a, b in zip(table, table[1:], strict=False)]
        columns.append((16.0 * once[1] - once[0]) / 15.0)
    return np.stack(columns, axis=1)


def sizes(reference, path, link, on_ground):
    """Largest partial of each parameter; between two points on the ground terms cancel: then a tenth of the terms'."""
    moved = np.linalg.norm(path.partials(link.emission_times_s)[0], axis=1)
    turning = (np.linalg.norm(link.emitter.velocity, axis=1) / (C * link.distance_m))[:, None] * moved
    return np.maximum(np.abs(reference).max(axis=0), 0.1 * turning.max(axis=0) if on_ground else 0.0)


@pytest.mark.parametrize("place", ["ground", "orbiting"])
@pytest.mark.parametrize("kind", ["orbit", "surface", "fixed"])
def test_partials_of_the_instantaneous_ratio(kind, place, frame, receivers):
    motion, parameters = emitters(frame)[kind]
    path, receiver_path = motion.at(parameters), receivers[place]
    link, receiver, _ = instantaneous(path, receiver_path)
    ours = doppler.log_ratio_partials(link, receiver, *path.partials(link.emission_times_s))
    reference = differences(lambda p: instantaneous(p, receiver_path)[2], motion, parameters, STEPS[kind])
    size = sizes(reference, path, link, place == "ground" and kind != "orbit")
    assert ours.shape == (TIMES.size, parameters.size)
    assert (np.abs(ours - reference).max(axis=0) / size).max() <= 1e-6


@pytest.mark.parametrize("place", ["ground", "orbiting"])
@pytest.mark.parametrize("kind", ["orbit", "surface", "fixed"])
def test_partials_of_the_mean_ratio(kind, place, frame, receivers):
    motion, parameters = emitters(frame)[kind]
    path, receiver_path = motion.at(parameters), receivers[place]
    links, _, length, _ = averaged(path, receiver_path)
    blocks = [path.partials(link.emission_times_s) for link in links]
    ours = doppler.log_mean_ratio_partials(*links, length, *blocks[0], *blocks[1])
    reference = differences(lambda p: averaged(p, receiver_path)[3], motion, parameters, STEPS[kind])
    size = sizes(reference, path, links[0], place == "ground" and kind != "orbit")
    assert (np.abs(ours - reference).max(axis=0) / size).max() <= 1e-6


# Shapes


def test_rows_stand_for_themselves_and_no_rows_give_none():
    link, receiver = scenes(7, 1e-3, 5)
    values = doppler.log_ratio(link, receiver, receiver_potential=3e7)
    assert values.shape == (7,)
    for i in range(7):
        row = slice(i, i + 1)
        part = link._replace(
            direction=link.direction[row], distance_m=link.distance_m[row], emitter=States(*(a[row] for a in link.emitter))
        )
        one = doppler.log_ratio(part, States(*(a[row] for a in receiver)), receiver_potential=np.array([3e7]))
        assert one.shape == (1,) and one[0] == values[i]
    empty = scenes(0)
    assert doppler.log_ratio(*empty).shape == (0,)
    assert doppler.log_ratio_partials(*empty, np.zeros((0, 3, 4)), np.zeros((0, 3, 4))).shape == (0, 4)
    nothing = np.zeros(0)
    assert doppler.log_mean_ratio(empty[0], empty[0], empty[1], empty[1], nothing).shape == (0,)
