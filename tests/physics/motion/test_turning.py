"""Velocity and acceleration on the turning Earth against derivatives of the rotation itself."""

import numpy as np
import pytest

from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.motion.fixed import FixedMotion
from shiftfix.physics.motion.turning import TurningEarth
from shiftfix.tables.bundled_orientation import bundled_earth_orientation


@pytest.fixture(scope="module")
def frames(epoch_tai_ns):
    rows = bundled_earth_orientation().rows
    columns = ("mjd_utc_1", "ut1_minus_tai_s", "xp_rad", "yp_rad", "dx_rad", "dy_rad")
    table = [rows[name].to_numpy() for name in columns]
    return {span: EarthFrame.from_orientation(epoch_tai_ns, span, *table) for span in ((-600.0, 20000.0), (0.0, 0.0))}


@pytest.mark.parametrize("span_s", [(-600.0, 20000.0), (0.0, 0.0)])
def test_velocity_is_the_derivative_of_the_turned_position(frames, span_s):
    frame = frames[span_s]
    place = np.array([5.1e6, 1.3e6, 3.6e6])
    times, step = np.linspace(*span_s, 9), 5.0
    at = {k: frame.rotation(times + k * step) @ place for k in (-2, -1, 0, 1, 2)}
    states = TurningEarth(frame).states(times, np.broadcast_to(place, (9, 3)))
    velocity = (8.0 * (at[1] - at[-1]) - (at[2] - at[-2])) / (12.0 * step)
    acceleration = (16.0 * (at[1] + at[-1]) - (at[2] + at[-2]) - 30.0 * at[0]) / (12.0 * step**2)
    # Asked of frames: 1e-5 m/s. An axis of the turning that is that of the figure would be off by 7e-4, one without
    # precession by 4e-5.
    assert np.abs(states.velocity - velocity).max() < 2e-7
    assert np.abs(states.acceleration - acceleration).max() < 1e-8


def test_partials_under_the_earth_orientation(frames):
    motion = FixedMotion(frames[-600.0, 20000.0])
    place, times = np.array([0.61, -1.27, 312.0]), np.array([-100.0, 9000.0])
    d_position, d_velocity = motion.at(place).partials(times)
    for column, step in enumerate((1e-6, 1e-6, 10.0)):
        shift = step * np.eye(3)[column]
        up, down = motion.at(place + shift).states(times), motion.at(place - shift).states(times)
        for partial, difference in (
            (d_position, up.position - down.position),
            (d_velocity, up.velocity - down.velocity),
        ):
            numeric = difference / (2 * step)
            assert np.abs(partial[:, :, column] - numeric).max() < 1e-7 * np.abs(numeric).max() + 2e-9 / step
