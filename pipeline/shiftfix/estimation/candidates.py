"""Grids of candidate motions for the global search: circular orbits in view, places on the ground, slow movers in the air."""

from __future__ import annotations

import numpy as np

from shiftfix.estimation.search import SearchData
from shiftfix.physics import geodesy
from shiftfix.physics.constants import EARTH_RADIUS_M, GM_EARTH_M3_S2

ALTITUDES_M = np.array(
    [
        220e3,
        320e3,
        430e3,
        560e3,
        720e3,
        930e3,
        1.2e6,
        1.6e6,
        2.2e6,
        3.2e6,
        5e6,
        8e6,
        12e6,
        16e6,
        20.2e6,
        25e6,
        30e6,
        36e6,
    ]
)
"""Altitudes of the circular orbits [m]: spaced so that a neighbour lies inside the basin of the damped steps."""


def lattice(count: int, half_angle_rad: float, centre: np.ndarray) -> np.ndarray:
    """Return about `count` evenly spread unit vectors within a cap (spiral lattice), shape (count, 3)."""
    k = np.arange(count) + 0.5
    cosine = 1.0 - k / count * (1.0 - np.cos(half_angle_rad))
    sine = np.sqrt(np.maximum(0.0, 1.0 - cosine**2))
    angle = np.pi * (1.0 + np.sqrt(5.0)) * k
    centre = centre / np.linalg.norm(centre)
    aside = np.cross(centre, np.eye(3)[np.argmin(np.abs(centre))])
    aside /= np.linalg.norm(aside)
    third = np.cross(centre, aside)
    return cosine[:, None] * centre + sine[:, None] * (np.cos(angle)[:, None] * aside + np.sin(angle)[:, None] * third)


def circular_orbits(
    data: SearchData, points: int = 140, headings: int = 24, best: int = 240
) -> tuple[np.ndarray, np.ndarray]:
    """Return the best circular orbits that the stations could see, and the time they refer to.

    Parameters
    ----------
    data : SearchData
    points, headings : int
        Places on the sphere per altitude, and directions of flight.
    best : int
        How many to return.

    Returns
    -------
    states : ndarray, shape (best, 6)
        Position [m] and velocity [m/s], GCRS, at the arc epoch (time 0 of the data).
    costs : ndarray, shape (best,)
    """
    middle = float(np.median(data.times_s))
    index, up = _active(data, middle)
    found, costs = [], []
    for altitude in ALTITUDES_M:
        radius = EARTH_RADIUS_M + altitude
        places = _in_view(data, index, up, radius, points)
        if not len(places):
            continue
        east = np.cross([0.0, 0.0, 1.0], places)
        east /= np.maximum(np.linalg.norm(east, axis=1), 1e-9)[:, None]
        north = np.cross(places, east)
        angle = np.arange(headings) * 2 * np.pi / headings
        along = np.cos(angle)[:, None] * north[:, None, :] + np.sin(angle)[:, None] * east[:, None, :]
        motion = np.sqrt(GM_EARTH_M3_S2 / radius**3)
        phase = motion * (data.times_s - middle)
        cost = np.empty((len(places), headings))
        for h in range(headings):
            position = radius * (np.cos(phase)[:, None] * places[:, None] + np.sin(phase)[:, None] * along[:, None, h])
            velocity = (
                radius
                * motion
                * (np.cos(phase)[:, None] * along[:, None, h] - np.sin(phase)[:, None] * places[:, None])
            )
            r = data.residuals(position, velocity)
            cost[:, h] = np.einsum("bn,bn->b", r, r)
        # Two headings a place at most: neighbours in heading fall into one basin.
        order = np.argsort(cost, axis=1)[:, :2]
        for column in range(order.shape[1]):
            h = order[:, column]
            at = np.arange(len(places))
            back = -motion * middle
            p0, a0 = places, along[at, h]
            position = radius * (np.cos(back) * p0 + np.sin(back) * a0)
            velocity = radius * motion * (np.cos(back) * a0 - np.sin(back) * p0)
            found.append(np.hstack([position, velocity]))
            costs.append(cost[at, h])
    if not found:
        return np.empty((0, 6)), np.empty(0)
    states, cost = np.vstack(found), np.concatenate(costs)
    keep = np.argsort(cost, kind="stable")[:best]
    return states[keep], cost[keep]


def _active(data: SearchData, middle: float) -> tuple[np.ndarray, np.ndarray]:
    """Return rows nearest to the middle, one for each station that has data around it, and their verticals."""
    rows = []
    for s in np.unique(data.station):
        mine = np.flatnonzero(data.station == s)
        t = data.times_s[mine]
        if t.min() <= middle <= t.max():
            rows.append(mine[np.argmin(np.abs(t - middle))])
    if not rows:
        rows = [int(np.argmin(np.abs(data.times_s - middle)))]
    index = np.array(rows)
    up = data.position[index] / np.linalg.norm(data.position[index], axis=1)[:, None]
    return index, up


def _in_view(data: SearchData, index: np.ndarray, up: np.ndarray, radius: float, points: int) -> np.ndarray:
    """Return places (unit vectors) on a sphere that are above -3 deg of elevation at all given stations."""
    here = np.linalg.norm(data.position[index], axis=1)
    cap = (
        min(np.pi, np.arccos(np.clip(here.min() / radius, -1.0, 1.0)) + np.radians(4.0))
        if radius > here.min()
        else np.pi
    )
    centre = up.sum(0) if np.linalg.norm(up.sum(0)) > 0.1 else up[0]
    for density in (1, 4, 16):
        places = lattice(points * density, cap, centre)
        line = radius * places[:, None] - data.position[index]
        elevation = np.einsum("pni,ni->pn", line, up) / np.linalg.norm(line, axis=2)
        seen = places[(elevation > np.sin(np.radians(-3.0))).all(1)]
        if len(seen) >= min(60, points // 2):
            return seen
    return seen


def ground_places(
    centre_itrs_m: np.ndarray, radius_m: float, height_m: float, count: int = 600
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return latitudes, longitudes [rad] and heights [m] of about `count` places within a radius on the ground."""
    vectors = lattice(count, min(radius_m / EARTH_RADIUS_M, np.pi), centre_itrs_m)
    latitude, longitude, _ = geodesy.geodetic_from_itrs(vectors * EARTH_RADIUS_M)
    return latitude, longitude, np.full(count, height_m)
