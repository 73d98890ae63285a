"""What the solution says in words and usual angles, whatever way the iteration went."""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.api import ClockModels, FixedMotion
from shiftfix_solve.packing import _assumed, _usual_angles

NAMES = ("latitude_rad", "longitude_rad", "height_m")


def test_a_fit_that_went_over_a_pole_gives_the_usual_angles():
    over = np.array([np.pi + 0.7129, -16.1278081, 3.0])
    usual = _usual_angles(NAMES, over)
    assert usual == pytest.approx([-0.7129, -16.1278081 + 5 * np.pi, 3.0], abs=1e-12)
    assert over[1] == -16.1278081, "the fit itself stays as it is"
    assert _usual_angles(NAMES, np.array([0.3, 4.0, 3.0])) == pytest.approx([0.3, 4.0 - 2 * np.pi, 3.0], abs=1e-12)


def test_usual_angles_are_the_same_place(frame):
    over = np.array([-2.42867484, -16.1278081, 2.0])
    times = np.array([-300.0, 0.0, 417.0])
    motion = FixedMotion(frame)
    first, second = (motion.at(p).states(times) for p in (over, _usual_angles(NAMES, over)))
    # 1e-7 m: some roundings of angles up to 16 rad (2e-15) on the Earth's radius.
    np.testing.assert_allclose(second.position, first.position, rtol=0, atol=1e-7)


def test_other_motions_keep_their_parameters():
    p = np.array([-157243.6, 5136126.2, 0.5])
    assert np.array_equal(_usual_angles(("x_m", "y_m", "radiation_scale_1"), p), p)


def test_assumptions_about_oscillators_are_said_with_their_size():
    text = _assumed(ClockModels(emitter="drift", emitter_drift_sigma_per_s=1e-9, rest_log_sigma=1.25e-5), 400e6)
    assert "0 +/- 1e-09 1/s (+/- 0.4 Hz/s)" in text and "stations' oscillators constant" in text and "5000 Hz" in text
    text = _assumed(ClockModels(station="random_walk", emitter="random_walk", steps_s=(1.0, 2.0)), 400e6)
    assert "walks by 1e-10" in text and "2 steps" in text and "walk by 1e-11" in text and "beforehand" not in text
