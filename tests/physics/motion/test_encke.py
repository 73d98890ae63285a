"""Fast orbits of candidates against the integration with the same J2."""

import numpy as np
import pytest

from shiftfix.physics.motion.encke import propagate_batch
from shiftfix.physics.motion.orbit import Forces, OrbitMotion

J2_ONLY = Forces(degree=0, zonal_degree=2, sun=False, moon=False, relativity=False, radiation=False, drag=False)


@pytest.mark.parametrize(
    "name, first_s, last_s, bound_m",
    # Bounds: the second order of J2, twice what was measured.
    [("leo", 0.0, 900.0, 0.6), ("leo", -450.0, 450.0, 0.02), ("leo", 0.0, 5700.0, 1400.0), ("meo", 0.0, 15120.0, 0.6)],
)
def test_first_order_of_the_flattening(name, first_s, last_s, bound_m, orbits, epoch_tai_ns):
    states = orbits[name] + np.array([[0.0] * 6, [3e4, -2e4, 1e4, 5.0, 8.0, -6.0]])
    times = np.linspace(first_s, last_s, 37)[::-1]
    position, velocity = propagate_batch(states, times)
    motion = OrbitMotion(epoch_tai_ns, (first_s, last_s), None, J2_ONLY)
    for row, state in enumerate(states):
        exact = motion.at(state).states(times)
        assert np.linalg.norm(position[row] - exact.position, axis=1).max() < bound_m
        assert np.linalg.norm(velocity[row] - exact.velocity, axis=1).max() < 0.01 * bound_m
    again, _ = motion.propagate_batch(states, times)
    assert np.array_equal(again, position)


def test_orbits_through_the_earth_are_two_body_orbits_and_finite(orbits):
    states = np.array([orbits["leo"], [7e6, 1e5, 0.0, 0.0, 2e3, 1e3], [7e6, 0.0, 1e6, 0.0, 13e3, 0.0]])
    position, velocity = propagate_batch(states, np.linspace(0.0, 1000.0, 11))
    assert np.isfinite(position).all() and np.isfinite(velocity).all()
    # Energy of the two-body orbit is kept.
    speed, radius = np.sum(velocity[1] ** 2, axis=1), np.linalg.norm(position[1], axis=1)
    energy = 0.5 * speed - 3.986004415e14 / radius
    assert energy == pytest.approx(energy[0], rel=1e-9)


def test_shapes_and_the_epoch_itself(orbits):
    states = np.array([orbits["leo"], orbits["meo"]])
    position, velocity = propagate_batch(states, np.array([0.0]))
    assert position.shape == velocity.shape == (2, 1, 3)
    assert np.abs(position[:, 0] - states[:, :3]).max() < 1e-7
