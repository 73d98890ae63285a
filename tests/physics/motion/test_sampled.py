"""Interpolated ephemerides against the orbit or track they were sampled from."""

import numpy as np
import pytest

from shiftfix.physics.motion.orbit import OrbitMotion
from shiftfix.physics.motion.sampled import SampledPath
from shiftfix.physics.motion.surface import SurfaceMotion
from shiftfix.physics.motion.turning import TurningEarth


def to_fixed(frame, times, states):
    """Return position and velocity in earth-fixed axes."""
    rotation, spin = frame.rotation(times), TurningEarth(frame).angular_velocity(times)
    relative = states.velocity - np.cross(spin, states.position)
    return (np.einsum("nji,nj->ni", rotation, v) for v in (states.position, relative))


def errors(path, truth, times):
    """Return the largest errors of position, velocity and acceleration."""
    return [np.abs(a - b).max() for a, b in zip(path.states(times), truth.states(times), strict=True)]


@pytest.fixture(scope="module")
def low_orbit(orbits, spin_frame, epoch_tai_ns):
    return OrbitMotion(epoch_tai_ns, (-10.0, 6010.0), spin_frame).at(orbits["leo"])


@pytest.fixture(scope="module")
def navigation_orbit(orbits, spin_frame, epoch_tai_ns):
    return OrbitMotion(epoch_tai_ns, (-10.0, 43210.0), spin_frame).at(orbits["meo"])


@pytest.mark.parametrize("frame_name", ["GCRS", "ITRS"])
@pytest.mark.parametrize("with_velocity", [False, True])
def test_minute_samples_of_a_low_orbit(frame_name, with_velocity, low_orbit, spin_frame):
    """Asked: 1 cm and 1e-5 m/s for 60 s samples, up to the ends."""
    nodes = np.arange(0.0, 6001.0, 60.0)
    states = low_orbit.states(nodes)
    position, velocity = (states[:2]) if frame_name == "GCRS" else to_fixed(spin_frame, nodes, states)
    path = SampledPath(
        nodes, position, velocity if with_velocity else None, spin_frame if frame_name == "ITRS" else None
    )
    times = np.random.default_rng(3).uniform(0.0, 6000.0, 500)
    d_position, d_velocity, d_acceleration = errors(path, low_orbit, times)
    print(frame_name, with_velocity, d_position, d_velocity, d_acceleration)
    assert d_position < 1e-3
    assert d_velocity < 1e-5
    assert d_acceleration < 1e-5


def test_quarter_hour_samples_of_a_navigation_satellite(navigation_orbit, spin_frame):
    """As in SP3: ITRS positions every 900 s; asked: mean range rates over 30 s to 1e-5 m/s."""
    nodes = np.arange(0.0, 43201.0, 900.0)
    position, _ = to_fixed(spin_frame, nodes, navigation_orbit.states(nodes))
    path = SampledPath(nodes, position, None, spin_frame)
    inner = np.arange(4500.0, 38700.0, 30.0)
    d_position, d_velocity, _ = errors(path, navigation_orbit, inner)
    print("inner", d_position, d_velocity)
    assert d_position < 1e-4 and d_velocity < 1e-6
    ends = np.concatenate([np.arange(0.0, 4500.0, 30.0), np.arange(38700.0, 43200.0, 30.0)])
    d_position, d_velocity, _ = errors(path, navigation_orbit, ends)
    print("ends", d_position, d_velocity)
    assert d_position < 2e-2 and d_velocity < 1e-4
    station = np.array([4.1e6, 1.2e6, 4.8e6])
    ranges = [np.linalg.norm(p.states(inner).position - station, axis=1) for p in (path, navigation_orbit)]
    assert np.abs(np.diff(ranges[0] - ranges[1])).max() / 30.0 < 1e-6


def test_samples_rounded_to_a_millimetre(navigation_orbit, spin_frame):
    """SP3 prints millimetres; the rounding must not be blown up: 1 mm and 1e-5 m/s of mean range rate."""
    nodes = np.arange(0.0, 43201.0, 900.0)
    position, _ = to_fixed(spin_frame, nodes, navigation_orbit.states(nodes))
    path = SampledPath(nodes, np.round(position, 3), None, spin_frame)
    d_position, d_velocity, _ = errors(path, navigation_orbit, np.arange(4500.0, 38700.0, 30.0))
    assert d_position < 2e-3 and d_velocity < 1e-5


@pytest.mark.parametrize("degree, with_velocity, bound_m", [(1, False, 0.02), (3, False, 1e-3), (None, True, 1e-3)])
def test_ship_track(degree, with_velocity, bound_m, spin_frame):
    """A ship at 12 m/s, samples every 60 s: straight lines between them sag by (12 m/s 60 s)^2 / 8 R = 1 cm."""
    truth = SurfaceMotion(spin_frame).at([0.62, -0.41, 21.0, 7.0, 9.7])
    nodes = np.arange(0.0, 1801.0, 60.0)
    position, velocity = to_fixed(spin_frame, nodes, truth.states(nodes))
    path = SampledPath(nodes, position, velocity if with_velocity else None, spin_frame, degree=degree)
    times = np.linspace(0.0, 1800.0, 333)
    d_position, d_velocity, _ = errors(path, truth, times)
    assert d_position < bound_m
    assert d_velocity < 0.1 * bound_m


def test_samples_far_from_the_arc_are_left_away(navigation_orbit, spin_frame):
    nodes = np.arange(0.0, 43201.0, 900.0)
    position, _ = to_fixed(spin_frame, nodes, navigation_orbit.states(nodes))
    short = type(spin_frame)((20000.0, 22000.0))
    path = SampledPath(nodes, position, None, short)
    whole = SampledPath(nodes, position, None, spin_frame)
    times = np.linspace(20000.0, 22000.0, 41)
    assert path.span_s == (13500.0, 28800.0)
    assert np.abs(path.states(times).position - whole.states(times).position).max() < 1e-6
    with pytest.raises(ValueError, match="near the arc"):
        SampledPath(nodes, position, None, type(spin_frame)((90000.0, 92000.0)))


def test_nothing_is_interpolated_across_segments(low_orbit):
    nodes = np.arange(0.0, 3001.0, 60.0)
    position = low_orbit.states(nodes).position
    segment = np.where(nodes < 1500.0, 4, 9)
    position[segment == 9] += 1e5  # another manoeuvred orbit, say
    path = SampledPath(nodes, position, segment=segment, name="receiver R7")
    before = np.array([10.0, 1400.0, 1439.9])
    assert np.abs(path.states(before).position - low_orbit.states(before).position).max() < 1e-2
    after = np.array([1501.0, 2999.0])
    assert np.abs(path.states(after).position - 1e5 - low_orbit.states(after).position).max() < 1e-2
    with pytest.raises(ValueError, match=r"receiver R7: 1 times without samples around them, the first at 1470\.000 s"):
        path.states([10.0, 1470.0])


def test_short_segments_lower_the_degree(low_orbit):
    nodes = np.arange(0.0, 181.0, 60.0)
    path = SampledPath(nodes, low_orbit.states(nodes).position)
    # Cubic through four samples: r (w h)^4 / 4! times 1 at most.
    assert errors(path, low_orbit, np.linspace(0.0, 180.0, 50))[0] < 10.0


def test_unequal_spacing_and_order_of_times(low_orbit):
    nodes = np.cumsum(np.random.default_rng(11).uniform(20.0, 60.0, 60))
    path = SampledPath(nodes, low_orbit.states(nodes).position)
    times = np.random.default_rng(12).permutation(np.linspace(nodes[0], nodes[-1], 100))
    assert errors(path, low_orbit, times)[0] < 1e-3


def test_refusals(low_orbit):
    nodes = np.arange(0.0, 601.0, 60.0)
    position = low_orbit.states(nodes).position
    path = SampledPath(nodes, position, name="SAT-4")
    for t in (-0.001, 600.001, np.nan):
        with pytest.raises(ValueError, match=r"SAT-4: .*\nallowed: 0\.000 \.\. 600\.000"):
            path.states([t])
    with pytest.raises(ValueError, match="ascending"):
        SampledPath(nodes[::-1], position)
    with pytest.raises(ValueError, match="at least two"):
        SampledPath(nodes[:1], position[:1])
    with pytest.raises(ValueError, match="finite"):
        SampledPath(nodes, position * np.nan)
    with pytest.raises(ValueError, match="degree"):
        SampledPath(nodes, position, degree=0)
    assert path.partials(nodes)[0].shape == (11, 3, 0)
