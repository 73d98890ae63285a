"""Light time: fixed point, closed form for uniform motion, reciprocity, size of the Earth's delay."""

import numpy as np
import pytest
from straight_paths import AcceleratedPath, UniformPaths, random_directions, random_velocities

from shiftfix.physics.constants import GM_EARTH_M3_S2, SPEED_OF_LIGHT_M_S
from shiftfix.physics.lighttime import one_way

C = SPEED_OF_LIGHT_M_S


def delay(emitter, receiver):
    """2 GM/c**3 ln((r1 + r2 + R)/(r1 + r2 - R)) (IERS Conventions 2010, ch. 11)."""
    total, distance = np.linalg.norm(emitter) + np.linalg.norm(receiver), np.linalg.norm(receiver - emitter)
    return 2 * GM_EARTH_M3_S2 / C**3 * np.log((total + distance) / (total - distance))


def test_fixed_point_with_accelerated_emitter():
    """c L = |x_R - x_T(t - L)| + Earth's delay, to the rounding of 40 000 km (1e-8 m)."""
    path = AcceleratedPath([2.0e7, 1e7, -9e6], [2000.0, -3000.0, 1500.0], [-0.4, -0.2, 0.1])
    times, receiver = np.linspace(-900.0, 900.0, 40), np.tile([3e6, -4e6, 3.9e6], (40, 1))
    link = one_way(times, receiver, path)
    states = path.states(link.emission_times_s)
    line = receiver - states.position
    distance = np.linalg.norm(line, axis=1)
    shapiro = np.array([delay(a, b) for a, b in zip(states.position, receiver, strict=True)])
    assert np.abs(C * (link.light_time_s - shapiro) - distance).max() < 2e-8
    # Emission times near 900 s carry 1e-13 s, at 4 km/s below a nanometre
    assert np.abs(link.emitter.position - states.position).max() < 2e-8
    assert np.abs(link.direction - line / distance[:, None]).max() < 1e-15
    assert np.abs(link.emission_times_s + link.light_time_s - times).max() < 1e-12
    assert np.abs(one_way(times, receiver, path, shapiro=False).light_time_s - link.light_time_s + shapiro).max() < 1e-15


@pytest.mark.parametrize("largest", [1e-4, 0.5, 0.9, 0.99])
def test_uniform_motion_has_a_closed_form(largest):
    """L solves (1 - b**2) L**2 - 2 L b.d/c - (d/c)**2 = 0, d from the emitter's place at reception."""
    random = np.random.default_rng(1)
    velocity = C * random_velocities(random, 500, largest)
    receiver = 1e8 * random_directions(random, 500)
    link = one_way(np.zeros(500), receiver, UniformPaths(np.zeros((500, 3)), velocity), shapiro=False)
    beta, d = velocity / C, receiver / C
    along, square = np.sum(beta * d, axis=1), 1 - np.sum(beta * beta, axis=1)
    expected = (along + np.sqrt(along**2 + square * np.sum(d * d, axis=1))) / square
    assert (np.abs(link.light_time_s - expected) / expected).max() < 2e-13


def test_last_correction_moves_the_emitter_too():
    """Scene by scene, so that the last step has every size below 1e-9 s (0.3 m near light)."""
    random = np.random.default_rng(2)
    worst = 0.0
    for velocity, receiver in zip(C * random_velocities(random, 400, 0.9), random_directions(random, 400), strict=True):
        receiver = receiver[None] * 10.0 ** random.uniform(3, 7)
        link = one_way([0.0], receiver, UniformPaths(np.zeros((1, 3)), velocity[None]), shapiro=False)
        worst = max(worst, np.abs(link.emitter.position + velocity * link.light_time_s[:, None]).max())
    assert worst < 1e-7


def test_reciprocity_between_resting_ends():
    a, b = np.array([[7e6, 1e5, -3e6]]), np.array([[-1e6, 6.3e6, 4e5]])
    zero = np.zeros((1, 3))
    there = one_way([0.0], b, UniformPaths(a, zero))
    back = one_way([0.0], a, UniformPaths(b, zero))
    assert there.light_time_s == back.light_time_s and (there.direction == -back.direction).all()


@pytest.mark.parametrize(("elevation_deg", "expected_mm"), [(90.0, 12.65), (5.0, 17.93)])
def test_size_of_the_earths_delay(elevation_deg, expected_mm):
    """Navigation orbit, a = 26 560 km, station on the equator: 12.65 mm at the zenith, 17.93 mm at 5 deg (computed)."""
    station, radius, e = 6378137.0, 2.656e7, np.radians(elevation_deg)
    distance = np.sqrt(radius**2 - (station * np.cos(e)) ** 2) - station * np.sin(e)
    emitter = np.array([[distance * np.cos(e), 0.0, station + distance * np.sin(e)]])
    path, receiver = UniformPaths(emitter, np.zeros((1, 3))), np.array([[0.0, 0.0, station]])
    change = one_way([0.0], receiver, path).light_time_s - one_way([0.0], receiver, path, shapiro=False).light_time_s
    assert change[0] * C * 1e3 == pytest.approx(expected_mm, abs=0.01)


def test_what_has_no_light_time_is_refused_and_paths_through_the_centre_stay_finite():
    class Running:
        def states(self, times):
            states = UniformPaths([[1e7, 0, 0]], [[-1.5 * C, 0, 0]]).states(times)
            return states

    with pytest.raises(ValueError, match="not slower than light"):
        one_way([0.0], np.array([[0.0, 1e3, 0.0]]), Running())
    for emitter, receiver in (([np.nan, 0, 0], [0.0, 1e7, 0.0]), ([1e7, 0, 0], [0.0, np.inf, 0.0])):
        with pytest.raises(ValueError, match="not finite"), np.errstate(invalid="ignore"):
            one_way([0.0], np.array([receiver]), UniformPaths([emitter], np.zeros((1, 3))))
    through = one_way([0.0], np.array([[6.4e6, 0.0, 0.0]]), UniformPaths([[-7e6, 0.0, 0.0]], np.zeros((1, 3))))
    assert np.isfinite(through.light_time_s).all()
