"""Frames and orbits for the tests of motions."""

import numpy as np
import pytest

GM = 3.986004415e14
EPOCH_TAI_NS = 1_609_459_237_000_000_000  # 2021-01-01T00:00:00 UTC


class SpinFrame:
    """Uniform rotation about an axis 0.12 degrees off that of the GCRS: a stand-in for the Earth's orientation."""

    rate = 7.292115e-5

    def __init__(self, span_s=(-2.0e3, 4.4e4)):
        self.span_s = span_s
        a, b = 0.0021, -0.0007
        tilt, upper = np.linalg.qr(np.array([[1.0, 0.0, a], [0.0, 1.0, b], [-a, -b, 1.0]]))
        self.tilt = tilt * np.sign(np.diag(upper))

    def rotation(self, times_s):
        angle = 1.234 + self.rate * np.asarray(times_s, dtype=float)
        spin = np.zeros((*angle.shape, 3, 3))
        spin[..., 0, 0] = spin[..., 1, 1] = np.cos(angle)
        spin[..., 1, 0] = np.sin(angle)
        spin[..., 0, 1] = -spin[..., 1, 0]
        spin[..., 2, 2] = 1.0
        return self.tilt @ spin


def state_from_elements(a, e, i, node=0.7, perigee=0.4, anomaly=0.3):
    """Return position and velocity (6,) for Kepler elements [m, 1, rad]; anomaly is the true one."""
    p = a * (1 - e * e)
    radius = p / (1 + e * np.cos(anomaly))
    position = radius * np.array([np.cos(anomaly), np.sin(anomaly), 0.0])
    velocity = np.sqrt(GM / p) * np.array([-np.sin(anomaly), e + np.cos(anomaly), 0.0])

    def about_z(t):
        return np.array([[np.cos(t), -np.sin(t), 0], [np.sin(t), np.cos(t), 0], [0, 0, 1]])

    tilt = np.array([[1, 0, 0], [0, np.cos(i), -np.sin(i)], [0, np.sin(i), np.cos(i)]])
    turn = about_z(node) @ tilt @ about_z(perigee)
    return np.concatenate([turn @ position, turn @ velocity])


@pytest.fixture(scope="session")
def spin_frame():
    return SpinFrame()


@pytest.fixture(scope="session")
def elements_state():
    return state_from_elements


@pytest.fixture(scope="session")
def epoch_tai_ns():
    return EPOCH_TAI_NS


@pytest.fixture(scope="session")
def orbits():
    """States of a low polar, a navigation and a very eccentric orbit."""
    return {
        "leo": state_from_elements(6_878_000.0, 0.0021, np.radians(97.4)),
        "meo": state_from_elements(26_560_000.0, 0.0113, np.radians(55.2)),
        "eccentric": state_from_elements(26_600_000.0, 0.7, np.radians(63.4)),
    }
