"""What the fit's covariance means: error ellipses, considered errors, directions that the data do not see."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.stats import chi2

from shiftfix.estimation.fit import Fit
from shiftfix.estimation.forward import ForwardModel
from shiftfix.estimation.receivers import Receiver
from shiftfix.physics.motion.states import States


@dataclass(frozen=True)
class Considered:
    """1-sigma of errors that are not estimated but belong into the covariance.

    Parameters
    ----------
    common_time_s : float
        Time-tag error that all stations share.
    station_time : bool
        Whether each station's own time-tag sigma (of its receiver) is considered.
    coordinates : bool
        Whether each station's coordinate sigma is considered.
    zenith_delay_m : float
        Error of the zenith tropospheric delay, independent from station to station.
    vertical_tec : float
        Unmodelled vertical electron content [1e16 /m2], independent from station to station.
    carrier_hz : float
        Carrier, for the ionosphere.
    antenna_m : float
        Distance of an orbiting emitter's antenna from its centre of mass, which the dynamics move, along the radius.
    ut1_s : float
        Error of UT1 when no Earth orientation is used: all Earth-fixed receivers turn together.
    """

    common_time_s: float = 0.0
    station_time: bool = True
    coordinates: bool = True
    zenith_delay_m: float = 0.0
    vertical_tec: float = 0.0
    carrier_hz: float = 0.0
    ut1_s: float = 0.0
    antenna_m: float = 0.0


def considered_changes(fit: Fit, considered: Considered) -> dict[str, np.ndarray]:
    """Return, by source, the 1-sigma changes of z that considered errors cause: (n, k) columns, independent of each other.

    Sources are `time tags`, `coordinates`, `Earth rotation`, `emitter antenna`, `troposphere` and `ionosphere`; absent when nothing is considered.
    """
    forward, rows = fit.forward, fit.forward.rows
    receivers = forward.receivers
    mine = rows.station[:, None] == np.arange(len(receivers))
    out: dict[str, list[np.ndarray]] = {}
    time_sigma = np.array([r.time_sigma_s if considered.station_time else 0.0 for r in receivers])
    if time_sigma.any() or considered.common_time_s:
        slope = _time_slope(forward, fit)
        columns = [slope * considered.common_time_s] if considered.common_time_s else []
        columns += [slope * mine[:, s] * time_sigma[s] for s in np.flatnonzero(time_sigma)]
        out["time tags"] = columns
    position_sigma = np.array([r.position_sigma_m if considered.coordinates else 0.0 for r in receivers])
    if position_sigma.any():
        slopes = _coordinate_slopes(forward, fit)
        out["coordinates"] = [
            slopes[axis] * mine[:, s] * position_sigma[s]
            for s in np.flatnonzero(position_sigma)
            for axis in range(3)
            if receivers[s].shifted is not None
        ]
    if considered.ut1_s:
        slopes = _coordinate_slopes(forward, fit)
        turned = [np.cross([0.0, 0.0, 7.292115e-5], _itrs(r)) * considered.ut1_s for r in receivers]
        out["Earth rotation"] = [sum(slopes[a] * np.array([t[a] for t in turned])[rows.station] for a in range(3))]
    if considered.antenna_m:
        moved = forward.predict(_Outward(fit.path, -considered.antenna_m))
        out["emitter antenna"] = [moved - forward.predict(fit.path)]
    if considered.zenith_delay_m or considered.vertical_tec:
        link = forward.links(fit.path)
        if considered.zenith_delay_m:
            rate = _plain_rate(forward, forward.zenith_mapping(link)) * considered.zenith_delay_m
            out["troposphere"] = [rate * mine[:, s] for s in range(len(receivers)) if (rate * mine[:, s]).any()]
        if considered.vertical_tec and considered.carrier_hz:
            # Phase advance of a thin shell at 350 km: 40.308e16 TEC / f**2 metres, opposite in sign to a delay.
            mapping = _shell_mapping(forward.sin_elevation(link))
            delay = 40.308193e16 * considered.vertical_tec / considered.carrier_hz**2
            rate = -_plain_rate(forward, mapping) * delay
            out["ionosphere"] = [rate * mine[:, s] for s in range(len(receivers)) if (rate * mine[:, s]).any()]
    return {name: np.column_stack(columns) for name, columns in out.items() if columns}


class _Outward:
    """Path displaced along the radius: the antenna of a satellite that keeps one side to the Earth."""

    def __init__(self, path, distance_m: float) -> None:
        self.path, self.distance_m = path, distance_m

    def states(self, times_s: np.ndarray) -> States:
        position, velocity, acceleration = self.path.states(times_s)
        scale = self.distance_m / np.linalg.norm(position, axis=1)[:, None]
        return States(position * (1.0 + scale), velocity * (1.0 + scale), acceleration)


def _itrs(receiver: Receiver) -> np.ndarray:
    """Return the Earth-fixed position of a ground receiver; a moving one has its own frame and is not turned."""
    return getattr(receiver.path, "position_itrs_m", np.zeros(3))


def _time_slope(forward: ForwardModel, fit: Fit, step: float = 0.02) -> np.ndarray:
    """Return d z / d (time-tag bias): the tag is late by the bias, so the true time is earlier."""
    rows = forward.rows
    early, late = (
        ForwardModel(
            replace(rows, start_s=rows.start_s + shift, stop_s=rows.stop_s + shift), forward.receivers, forward.media
        ).predict(fit.path)
        for shift in (-step, step)
    )
    return -(late - early) / (2 * step)


def _coordinate_slopes(forward: ForwardModel, fit: Fit, step: float = 1.0) -> list[np.ndarray]:
    out = []
    for axis in range(3):
        delta = np.zeros(3)
        delta[axis] = step
        moved = [
            [replace(r, path=r.shifted(sign * delta)) if r.shifted else r for r in forward.receivers] for sign in (-1, 1)
        ]
        low, high = (ForwardModel(forward.rows, m, forward.media).predict(fit.path) for m in moved)
        out.append((high - low) / (2 * step))
    return out


def _plain_rate(forward: ForwardModel, mapping: np.ndarray) -> np.ndarray:
    rows = forward.rows
    interval = np.where(forward.mean, rows.interval_s, np.inf)
    rate = -(mapping[forward.last] - mapping[forward.first]) / interval / 299792458.0
    if not forward.mean.all():
        # Instantaneous rows: the rate from the neighbouring rows of the same station.
        for s in np.unique(rows.station):
            mine = np.flatnonzero((rows.station == s) & ~forward.mean)
            if mine.size > 1:
                order = mine[np.argsort(rows.middle_s[mine], kind="stable")]
                times, first = np.unique(rows.middle_s[order], return_index=True)
                if times.size > 1:
                    slope = np.gradient(mapping[forward.first[order[first]]], times)
                    rate[order] = -np.interp(rows.middle_s[order], times, slope) / 299792458.0
    return rate


def _shell_mapping(sin_elevation: np.ndarray) -> np.ndarray:
    cosine = np.sqrt(np.maximum(0.0, 1.0 - np.clip(sin_elevation, 0.0, 1.0) ** 2))
    return 1.0 / np.sqrt(1.0 - (6371e3 * cosine / (6371e3 + 350e3)) ** 2)


def ellipse(covariance_2x2: np.ndarray, level: float) -> dict[str, float]:
    """Return the ellipse of a probability level of a horizontal covariance (east, north) [m2].

    Returns
    -------
    dict
        semi_major_m, semi_minor_m and azimuth_deg of the major axis, clockwise from north, 0 to 180.
    """
    values, vectors = np.linalg.eigh(covariance_2x2)
    scale = np.sqrt(chi2.ppf(level, 2) * np.maximum(values, 0.0))
    east, north = vectors[:, 1]
    return {
        "semi_major_m": float(scale[1]),
        "semi_minor_m": float(scale[0]),
        "azimuth_deg": float(np.degrees(np.arctan2(east, north)) % 180.0),
    }


def local_axes(position: np.ndarray, velocity: np.ndarray) -> np.ndarray:
    """Return radial, along-track and cross-track unit vectors as rows."""
    radial = position / np.linalg.norm(position)
    cross = np.cross(position, velocity)
    cross = cross / max(np.linalg.norm(cross), 1e-300)
    return np.array([radial, np.cross(cross, radial), cross])


def describe_direction(vector: np.ndarray, axes: np.ndarray, names: tuple[str, str, str], unit: str) -> str:
    """Return a direction in words: components along named axes, largest first, those below 5 % left out."""
    parts = axes @ vector
    size = np.linalg.norm(parts)
    if size == 0:
        return "no direction"
    order = np.argsort(-np.abs(parts))
    words = [f"{abs(parts[k]) / size:.0%} {names[k]}" for k in order if abs(parts[k]) > 0.05 * size]
    return f"{', '.join(words)} ({size:.3g} {unit})"


def nearest_distance(fit: Fit) -> float:
    """Return the shortest distance between emitter and receivers over the arc [m]."""
    return float(fit.forward.links(fit.path).distance_m.min())


def receivers_with_rows(forward: ForwardModel) -> list[Receiver]:
    """Return the receivers that have at least one row."""
    present = np.unique(forward.rows.station)
    return [forward.receivers[s] for s in present]
