"""What must hold for any velocities, directions, places and times."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from straight_paths import AcceleratedPath, UniformPaths

from shiftfix.physics import doppler
from shiftfix.physics.constants import SPEED_OF_LIGHT_M_S
from shiftfix.physics.fourvectors import (
    boost,
    contraction,
    four_velocity,
    observed_frequency,
    rotation,
    wave_four_vector,
)
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.geodesy import enu_axes, geodetic_from_itrs, itrs_from_geodetic
from shiftfix.physics.kepler import propagate
from shiftfix.physics.lighttime import Link, one_way
from shiftfix.physics.motion.states import States
from shiftfix.physics.timescales import tai_ns_from_texts, tai_ns_from_utc, utc_text
from shiftfix.testing.strategies import betas, directions, places, rotations, utc_texts

C = SPEED_OF_LIGHT_M_S
GM = 3.986004415e14
checked = settings(deadline=None, derandomize=True, max_examples=200)


def log_ratio(direction, beta_t, beta_r):
    zero = np.zeros((1, 3))
    link = Link(np.zeros(1), np.ones(1), np.ones(1), direction[None], States(zero, C * beta_t[None], zero))
    return float(doppler.log_ratio(link, States(zero, C * beta_r[None], zero))[0])


@checked
@given(directions(), betas(), betas(0.8), rotations())
def test_scalar_product_is_the_same_in_every_frame(direction, beta, frame, turn):
    k, u = wave_four_vector(1.0, direction), four_velocity(beta)
    matrix = rotation(turn) @ boost(frame)
    assert contraction(matrix @ k, matrix @ u) == pytest.approx(contraction(k, u), rel=2e-13)
    assert contraction(matrix @ u, matrix @ u) == pytest.approx(-1.0, abs=2e-12)
    # Light stays light: rounding of squares of a blue-shifted k (factor up to 3)
    assert abs(contraction(matrix @ k, matrix @ k)) < 1e-13


@checked
@given(betas(0.8))
def test_boost_there_and_back_is_none(beta):
    assert np.abs(boost(beta) @ boost(-beta) - np.eye(4)).max() < 1e-14
    assert np.abs(boost(beta) @ four_velocity(beta) - [1.0, 0.0, 0.0, 0.0]).max() < 1e-14


@checked
@given(directions(), betas(), betas())
def test_ratio_is_that_of_the_scalar_products(direction, beta_t, beta_r):
    k = wave_four_vector(1.0, direction)
    expected = observed_frequency(k, four_velocity(beta_r)) / observed_frequency(k, four_velocity(beta_t))
    assert log_ratio(direction, beta_t, beta_r) == pytest.approx(np.log(expected), abs=1e-14)


@checked
@given(directions(), directions(), st.floats(1e-8, 1e-4))
def test_low_speeds_give_the_classical_shift(direction, heading, speed):
    """ln D = -v/c of the separation, to second order in v/c."""
    shift = log_ratio(direction, np.zeros(3), speed * heading)
    assert abs(shift + speed * float(direction @ heading)) <= 1.01 * speed**2 + 1e-16


@checked
@given(directions(), st.floats(1e-9, 0.95))
def test_approach_and_recession_are_inverse(direction, speed):
    away, toward = (log_ratio(direction, np.zeros(3), sign * speed * direction) for sign in (1.0, -1.0))
    # Rounding of D**2 = (1 - v/c)/(1 + v/c) near light: 1e-16 over 0.026
    assert away + toward == pytest.approx(0.0, abs=2e-14) and away < 0 < toward


@checked
@given(directions(), betas(), betas(), rotations())
def test_ratio_does_not_know_the_axes_and_turns_over_with_the_ends(direction, beta_t, beta_r, turn):
    here = log_ratio(direction, beta_t, beta_r)
    assert log_ratio(turn @ direction, turn @ beta_t, turn @ beta_r) == pytest.approx(here, abs=2e-14)
    assert log_ratio(direction, beta_r, beta_t) == pytest.approx(-here, abs=2e-14)


@checked
@given(st.floats(-3600.0, 3600.0), st.integers(0, 16_000))
def test_earth_rotation_is_orthonormal(time, day):
    frame = EarthFrame.without_orientation(tai_ns_from_utc("1980-01-01T00:00:00Z") + day * 86_400_000_000_000, (-3600.0, 3600.0))
    turn = frame.rotation(np.array([time]))[0]
    assert np.abs(turn @ turn.T - np.eye(3)).max() < 2e-15 and np.linalg.det(turn) == pytest.approx(1.0, abs=2e-15)


@checked
@given(utc_texts())
def test_utc_there_and_back(text):
    tai = tai_ns_from_utc(text)
    assert utc_text(tai, 9) == text
    values, problems = tai_ns_from_texts([text])
    assert not problems and values[0] == tai


@checked
@given(utc_texts(), st.integers(1, 3_000_000_000))
def test_later_is_later(text, later):
    tai = tai_ns_from_utc(text)
    other = utc_text(tai + later, 9)
    assert tai_ns_from_utc(other) - tai == later and other > text


@checked
@given(st.text(alphabet="0123456789-:T Z.+,", max_size=32))
def test_any_text_is_judged_alike_alone_and_among_many(text):
    values, problems = tai_ns_from_texts([text, "2026-03-01T12:00:00.000000000000000Z"])
    try:
        expected = tai_ns_from_utc(text)
    except ValueError as error:
        assert problems == [(0, str(error))]
    else:
        assert not problems and values[0] == expected


@checked
@given(places())
def test_geodetic_there_and_back(place):
    position = itrs_from_geodetic(*place)
    assert np.abs(itrs_from_geodetic(*geodetic_from_itrs(position)) - position).max() < 1e-7
    axes = enu_axes(*place[:2])
    assert np.abs(axes @ axes.T - np.eye(3)).max() < 1e-15


@checked
@given(betas(), directions(), st.floats(1e3, 1e10))
def test_light_time_is_a_fixed_point(beta, direction, distance):
    receiver = distance * direction[None]
    link = one_way([0.0], receiver, UniformPaths(np.zeros((1, 3)), C * beta[None]), shapiro=False)
    line = receiver - C * beta * -link.light_time_s[:, None]
    # Near 0.9 c the longest light time is ten times the distance
    assert np.linalg.norm(line) / C == pytest.approx(link.light_time_s[0], rel=1e-13)


@checked
@given(directions(), directions(), st.floats(-900.0, 900.0))
def test_light_time_to_an_orbiting_body(place, heading, time):
    path = AcceleratedPath(7.2e6 * place, 7.4e3 * heading, -7.7 * place)
    receiver = np.array([[6.4e6, 0.0, 0.0]])
    link = one_way([time], receiver, path)
    assume(link.distance_m[0] > 1e3)
    distance = np.linalg.norm(receiver - path.states(link.emission_times_s).position)
    delay = link.light_time_s[0] - distance / C
    # The Earth's delay: nothing to 10 cm (paths through the Earth among them)
    assert 0.0 < delay < 4e-10


@checked
@given(directions(), directions(), st.floats(0.2, 1.6), st.floats(-2e5, 2e5))
def test_two_body_energy_and_return(place, heading, speed, time):
    position = 7e6 * place
    velocity = speed * np.sqrt(GM / 7e6) * heading
    assume(np.linalg.norm(np.cross(place, heading)) > 0.1)
    moved = propagate(position, velocity, time, GM)
    energy = [v @ v / 2 - GM / np.linalg.norm(x) for x, v in ((position, velocity), moved)]
    assert energy[1] == pytest.approx(energy[0], abs=1e-8 * GM / 7e6)
    home = propagate(*moved, -time, GM)
    # Errors grow with the number of turns and the closeness of the perigee: 1e5 roundings
    assert np.linalg.norm(home[0] - position) < 1.0
