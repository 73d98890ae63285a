"""Hypothesis strategies for physical quantities: directions, velocities, rotations, places and UTC texts.

Hypothesis is imported by whoever imports this module; it belongs to the extra `test`.
"""

from __future__ import annotations

import erfa
import numpy as np
from hypothesis import strategies as st


@st.composite
def directions(draw: st.DrawFn) -> np.ndarray:
    """Draw a unit vector (3,)."""
    height = draw(st.floats(-1.0, 1.0))
    angle = draw(st.floats(0.0, 2.0 * np.pi))
    across = np.sqrt(1.0 - height * height)
    vector = np.array([across * np.cos(angle), across * np.sin(angle), height])
    return vector / np.linalg.norm(vector)


@st.composite
def betas(draw: st.DrawFn, largest: float = 0.9) -> np.ndarray:
    """Draw a velocity over c (3,), its size zero or spread over all powers of ten up to `largest`."""
    size = draw(st.one_of(st.just(0.0), st.floats(-9.0, np.log10(largest)).map(lambda a: min(10.0**a, largest))))
    return size * draw(directions())


@st.composite
def rotations(draw: st.DrawFn) -> np.ndarray:
    """Draw a proper rotation matrix (3, 3): an axis and an angle (Rodrigues)."""
    axis, angle = draw(directions()), draw(st.floats(-np.pi, np.pi))
    cross = np.array([[0.0, -axis[2], axis[1]], [axis[2], 0.0, -axis[0]], [-axis[1], axis[0], 0.0]])
    return np.eye(3) + np.sin(angle) * cross + (1.0 - np.cos(angle)) * cross @ cross


@st.composite
def places(draw: st.DrawFn, lowest_m: float = -1e4, highest_m: float = 1e7) -> tuple[float, float, float]:
    """Draw geodetic latitude [rad], longitude [rad] and height [m]; poles, equator and date line come up often."""
    edges = st.sampled_from([-np.pi / 2, -1e-9, 0.0, 1e-9, np.pi / 2])
    latitude = draw(st.one_of(edges, st.floats(-np.pi / 2, np.pi / 2)))
    longitude = draw(st.one_of(st.sampled_from([0.0, np.pi, -np.pi]), st.floats(-np.pi, np.pi)))
    return latitude, longitude, draw(st.floats(lowest_m, highest_m))


def _leap_days() -> list[np.datetime64]:
    table = erfa.leap_seconds.get()
    return [
        np.datetime64(f"{int(r['year']):04d}-{int(r['month']):02d}-01") - 1 for r in table[table["year"] > 1972]
    ]


@st.composite
def utc_texts(draw: st.DrawFn) -> str:
    """Draw a UTC text with nine decimals, 1972 to 2040; seconds around and within leap seconds come up often."""
    nano = draw(st.integers(0, 999_999_999))
    if draw(st.booleans()):
        day = str(draw(st.sampled_from(_leap_days())))
        return f"{day}T23:59:{draw(st.integers(57, 60))}.{nano:09d}Z"
    day = str(np.datetime64("1972-01-01") + draw(st.integers(0, 24800)))
    hour, minute, second = draw(st.integers(0, 23)), draw(st.integers(0, 59)), draw(st.integers(0, 59))
    return f"{day}T{hour:02d}:{minute:02d}:{second:02d}.{nano:09d}Z"
