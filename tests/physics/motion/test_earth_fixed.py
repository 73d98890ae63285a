"""Fixed, surface and polynomial motions: kinematics, partial derivatives, batches."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from shiftfix.physics.motion.fixed import FixedMotion
from shiftfix.physics.motion.polynomial import PolynomialMotion
from shiftfix.physics.motion.surface import SurfaceMotion
from shiftfix.physics.motion.track import curvature, kinematics

A, F = 6378137.0, 1.0 / 298.257223563
E2 = F * (2 - F)

TIMES = np.array([-900.0, -311.0, -20.0, 0.0, 77.0, 450.0, 1111.0, 1800.0])
MOTIONS = {
    "fixed": (lambda frame: FixedMotion(frame), [0.61, -1.27, 312.0]),
    "one leg": (lambda frame: SurfaceMotion(frame), [0.93, 2.1, 11000.0, 214.0, -91.0]),
    "eastward": (lambda frame: SurfaceMotion(frame), [-0.4, 2.1, 5.0, 12.0, 0.0]),
    "known turns": (
        lambda frame: SurfaceMotion(frame, 3, [-300.0, 400.0]),
        [0.7, 0.3, 40.0, 5.0, 6.0, -7.0, 4.0, 3.0, -8.0],
    ),
    "estimated turns": (
        lambda frame: SurfaceMotion(frame, 3),
        [0.7, 0.3, 40.0, 50.0, 60.0, -70.0, 40.0, 30.0, -80.0, 310.0, 700.0],
    ),
    "turns before the epoch": (
        lambda frame: SurfaceMotion(frame, 3),
        [0.7, 0.3, 40.0, 50.0, 60.0, -70.0, 40.0, 30.0, -80.0, -500.0, -100.0],
    ),
    "constant velocity": (lambda frame: PolynomialMotion(frame, 1), [4.1e6, 1.2e6, 4.8e6, 120.0, -30.0, 55.0]),
    "constant acceleration": (
        lambda frame: PolynomialMotion(frame, 2),
        [4.1e6, 1.2e6, 4.8e6, 120.0, -30.0, 55.0, 0.11, 0.07, -0.02],
    ),
}
STEPS = {"_rad": 1e-6, "_m": 10.0, "_m_s": 0.1, "_m_s2": 1e-3, "_s": 0.5}


def step_of(name):
    """Return a step that suits the unit of a parameter."""
    return next(STEPS[unit] for unit in ("_rad", "_m_s2", "_m_s", "_m", "_s") if name.endswith(unit))


@pytest.mark.parametrize("kind", MOTIONS)
def test_partials_are_central_differences(kind, spin_frame):
    make, parameters = MOTIONS[kind]
    motion, parameters = make(spin_frame), np.array(parameters)
    assert len(motion.parameter_names) == motion.scales.size == parameters.size
    d_position, d_velocity = motion.at(parameters).partials(TIMES)
    assert d_position.shape == d_velocity.shape == (TIMES.size, 3, parameters.size)
    for column, name in enumerate(motion.parameter_names):
        step = step_of(name)
        shift = step * np.eye(parameters.size)[column]
        up, down = motion.at(parameters + shift).states(TIMES), motion.at(parameters - shift).states(TIMES)
        for partial, after, before, rounding in (
            (d_position, up.position, down.position, 4e-9),
            (d_velocity, up.velocity, down.velocity, 1e-11),
        ):
            numeric = (after - before) / (2 * step)
            bound = 1e-7 * np.abs(numeric).max() + rounding / step
            assert np.abs(partial[:, :, column] - numeric).max() < bound, name


@pytest.mark.parametrize("kind", MOTIONS)
def test_velocity_and_acceleration_are_derivatives(kind, spin_frame):
    make, parameters = MOTIONS[kind]
    path = make(spin_frame).at(np.array(parameters))
    times = TIMES + 3.3  # away from the turns
    before, at, after = path.states(times - 0.2), path.states(times), path.states(times + 0.2)
    # Of the difference: the jerk (below 3e-5 m/s3) times 0.2^2 / 6, and rounding 1e-9 / 0.2.
    assert np.abs((after.position - before.position) / 0.4 - at.velocity).max() < 3e-7
    assert np.abs((after.velocity - before.velocity) / 0.4 - at.acceleration).max() < 1e-8


@pytest.mark.parametrize("kind", MOTIONS)
def test_batches_agree_with_single_paths(kind, spin_frame):
    make, parameters = MOTIONS[kind]
    motion = make(spin_frame)
    many = np.array(parameters) * (1.0 + 1e-3 * np.arange(3)[:, None])
    position, velocity = motion.states_batch(many, TIMES)
    assert position.shape == velocity.shape == (3, TIMES.size, 3)
    for row, one in enumerate(many):
        states = motion.at(one).states(TIMES)
        # The search follows legs by the middle-latitude rule: 0.25 m over 420 km at 53 degrees of latitude.
        assert np.abs(position[row] - states.position).max() < 0.5
        assert np.abs(velocity[row] - states.velocity).max() < 1e-4


def integrated(parameters, legs, times):
    """Return latitude and longitude by integrating the equations of motion with scipy."""
    height = parameters[2]

    def rates(t, y):
        east, north = legs(t)
        w = 1 - E2 * np.sin(y[0]) ** 2
        n, m = A / np.sqrt(w), A * (1 - E2) / w**1.5
        return [north / (m + height), east / ((n + height) * np.cos(y[0]))]

    return np.array(
        [solve_ivp(rates, (0.0, t), parameters[:2], rtol=1e-12, atol=1e-14, max_step=60.0).y[:, -1] for t in times]
    )


def test_vessel_with_a_turn_agrees_with_integration_to_a_millimetre(spin_frame):
    """Twenty minutes at 12 m/s."""
    parameters = np.array([0.62, -0.41, 21.0, 7.0, 9.7468, -11.2, 4.3081])
    turn = 480.0
    path = SurfaceMotion(spin_frame, 2, [turn]).at(parameters)
    place = integrated(parameters, lambda t: parameters[3:5] if t < turn else parameters[5:7], [turn])[0]
    start = np.array([*place, 21.0])
    times = np.array([600.0, 1200.0])
    later = integrated(start, lambda t: parameters[5:7], times - turn)
    for t, (latitude, longitude) in zip(times, later, strict=True):
        expected = FixedMotion(spin_frame).at([latitude, longitude, 21.0]).states(np.array([t])).position
        assert np.abs(path.states(np.array([t])).position - expected).max() < 1e-3 / 100


def test_aircraft_agrees_with_integration(spin_frame):
    """Half an hour at 230 m/s, both ways from the epoch."""
    parameters = np.array([1.05, 0.2, 11300.0, 160.0, 165.0])
    path = SurfaceMotion(spin_frame).at(parameters)
    times = np.array([-900.0, 1800.0])
    for t, (latitude, longitude) in zip(
        times, integrated(parameters, lambda t: parameters[3:5], times), strict=True
    ):
        expected = FixedMotion(spin_frame).at([latitude, longitude, 11300.0]).states(np.array([t])).position
        assert np.abs(path.states(np.array([t])).position - expected).max() < 1e-4


def test_speed_over_ground_and_height_stay(spin_frame):
    parameters = np.array([0.93, 2.1, 11000.0, 214.0, -91.0])
    track = SurfaceMotion(spin_frame).at(parameters).track
    position, velocity, _ = track.kinematics(TIMES)
    assert np.linalg.norm(velocity, axis=1) == pytest.approx(np.hypot(214.0, 91.0), rel=1e-12)
    # Height through Bowring's closed formula would be another program; the ellipsoid's own equation does:
    up = position / np.linalg.norm(position, axis=1, keepdims=True)
    assert np.abs(np.einsum("ni,ni->n", up, velocity)).max() < 0.004 * 240.0  # level but for the flattening


def test_geodetic_to_cartesian_published_case():
    """42 N 82 W 200 m (test vector common to public geodesy programs; ERFA gd2gc agrees)."""
    position, _, _ = kinematics(np.radians(42.0), np.radians(-82.0), 200.0, 0.0, 0.0)
    assert position == pytest.approx([660675.2518247, -4700948.68316, 4245737.66222], abs=1e-5)


def test_geodetic_to_cartesian_standard_library_case():
    """ERFA/SOFA test t_gd2gc, WGS84: longitude 3.1, latitude -0.5 rad, height 2500 m."""
    position, _, _ = kinematics(-0.5, 3.1, 2500.0, 0.0, 0.0)
    assert position == pytest.approx([-5599000.5577049947, 233011.67223479203, -3040909.4706983363], abs=1e-6)


def test_radii_of_curvature():
    """At the equator a(1-e2) and a, at the poles both a/sqrt(1-e2) (textbook)."""
    m, n, slope = curvature(np.array([0.0, np.pi / 2]))
    assert m == pytest.approx([A * (1 - E2), A / np.sqrt(1 - E2)], rel=1e-14)
    assert n == pytest.approx([A, A / np.sqrt(1 - E2)], rel=1e-14)
    numeric = (curvature(0.7 + 1e-5)[1] - curvature(0.7 - 1e-5)[1]) / 2e-5
    assert curvature(0.7)[2] == pytest.approx(numeric, rel=1e-6)


def test_refusals(spin_frame):
    with pytest.raises(ValueError, match="latitude"):
        SurfaceMotion(spin_frame).at([1.5, 0.0, 10.0, 0.0, 900.0]).states(np.array([600.0]))
    with pytest.raises(ValueError, match="latitude"):
        SurfaceMotion(spin_frame).at([1.5706, 0.0, 10.0, 0.0, 900.0])
    with pytest.raises(ValueError, match="ascending"):
        SurfaceMotion(spin_frame, 3, [400.0, 300.0])
    with pytest.raises(ValueError, match="ascending"):
        SurfaceMotion(spin_frame, 3).at([0.7, 0.3, 40.0, 5.0, 6.0, -7.0, 4.0, 3.0, -8.0, 310.0, 200.0])
    with pytest.raises(ValueError, match="legs"):
        SurfaceMotion(spin_frame, 0)
    with pytest.raises(ValueError, match="degree"):
        PolynomialMotion(spin_frame, 3)
    for motion in (FixedMotion(spin_frame), SurfaceMotion(spin_frame), PolynomialMotion(spin_frame)):
        with pytest.raises(ValueError, match="parameters"):
            motion.at(np.full(len(motion.parameter_names), np.nan))
        with pytest.raises(ValueError, match="parameters"):
            motion.at(np.zeros(2))
