"""Errors that are not estimated and that residuals need not show: their 1-sigma, carried through the fit's own map."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.interpolate import CubicSpline

from shiftfix.estimation.covariance import local_axes
from shiftfix.estimation.fit import Fit
from shiftfix.estimation.forward import ForwardModel
from shiftfix.estimation.receivers import Receiver
from shiftfix.physics.constants import EARTH_RADIUS_M, GM_EARTH_M3_S2, OMEGA_EARTH_RAD_S, SPEED_OF_LIGHT_M_S
from shiftfix.physics.motion.states import States

PHASE_ADVANCE_M3_S2 = 40.308193  # e**2 / (8 pi**2 eps0 m_e): phase advance = this x electrons per square metre / f**2


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
        Error of the zenith tropospheric delay, independent from station to station and, on arcs of more than an hour,
        from one node of 90 minutes to the next (linear between them): weather changes within an arc.
    vertical_tec : float
        Unmodelled vertical electron content [1e16 /m2], independent from station to station.
    carrier_hz : float
        Carrier, for the ionosphere.
    antenna_m : float
        Distance of an orbiting emitter's antenna from its centre of mass, which the dynamics move, along the radius.
    forces_1 : float
        Unmodelled accelerations of an orbiting emitter, constant along its radial, along-track and cross-track axes, in
        units of what Kaula's rule (Kaula 1966) gives for the gravity field of degree 5 and above at its radius.
    loading_m : float
        Height of ground stations that varies within hours and is not modelled (ocean loading, remainder of the tide), as
        amplitude of sine and cosine of twelve hours, independent from station to station.
    emitter_flicker_1 : float
        Slow variations of the emitter's fractional frequency that its model leaves out (flicker, periodic terms): the
        amplitude of sine and cosine of the arc's length and of its half.
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
    forces_1: float = 0.0
    antenna_m: float = 0.0
    loading_m: float = 0.0
    emitter_flicker_1: float = 0.0


def considered_changes(fit: Fit, considered: Considered) -> dict[str, np.ndarray]:
    """Return, by source, the 1-sigma changes of z that considered errors cause: (n, k) columns, independent of each other.

    Sources are `time tags`, `coordinates`, `loading`, `Earth rotation`, `forces`, `emitter antenna`,
    `emitter oscillator`, `troposphere` and `ionosphere`; absent when nothing is considered.
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
    if considered.loading_m:
        columns = []
        base = forward.predict(fit.path)
        for phase in (0.0, 0.5 * np.pi):
            moved = [
                replace(r, path=_Heaving(r.path, considered.loading_m, phase)) if not r.moving else r for r in receivers
            ]
            change = ForwardModel(rows, moved, forward.media).predict(fit.path) - base
            columns += [change * mine[:, s] for s in range(len(receivers)) if (change * mine[:, s]).any()]
        if columns:
            out["loading"] = columns
    if considered.emitter_flicker_1:
        phase = 2.0 * np.pi * (rows.middle_s - rows.middle_s.min()) / max(float(np.ptp(rows.middle_s)), 1.0)
        waves = [wave(k * phase) for k in (1, 2) for wave in (np.sin, np.cos)]
        out["emitter oscillator"] = [considered.emitter_flicker_1 * wave for wave in waves]
    if considered.ut1_s:
        slopes = _coordinate_slopes(forward, fit)
        turned = [np.cross([0.0, 0.0, OMEGA_EARTH_RAD_S], _itrs(r)) * considered.ut1_s for r in receivers]
        out["Earth rotation"] = [sum(slopes[a] * np.array([t[a] for t in turned])[rows.station] for a in range(3))]
    if considered.forces_1 and hasattr(fit.path, "state_transition"):
        base = forward.predict(fit.path)
        out["forces"] = [forward.predict(path) - base for path in _pushed(fit, considered.forces_1)]
    if considered.antenna_m:
        moved = forward.predict(_Outward(fit.path, -considered.antenna_m))
        out["emitter antenna"] = [moved - forward.predict(fit.path)]
    if considered.zenith_delay_m or considered.vertical_tec:
        link = forward.links(fit.path)
        if considered.zenith_delay_m:
            mapping = forward.zenith_mapping(link) * considered.zenith_delay_m
            rates = [_plain_rate(forward, mapping * share) for share in _hours(forward.event_times_s)]
            out["troposphere"] = [
                r * mine[:, s] for r in rates for s in range(len(receivers)) if (r * mine[:, s]).any()
            ]
        if considered.vertical_tec and considered.carrier_hz:
            # Phase advance of a thin shell at 350 km: 40.308e16 TEC / f**2 metres, opposite in sign to a delay.
            mapping = _shell_mapping(forward.sin_elevation(link))
            delay = PHASE_ADVANCE_M3_S2 * 1e16 * considered.vertical_tec / considered.carrier_hz**2
            rate = -_plain_rate(forward, mapping) * delay
            out["ionosphere"] = [rate * mine[:, s] for s in range(len(receivers)) if (rate * mine[:, s]).any()]
    return {name: np.column_stack(columns) for name, columns in out.items() if columns}


def _hours(times_s: np.ndarray, step_s: float = 5400.0) -> list[np.ndarray]:
    """Return the shares of nodes at most `step_s` apart at given times, linear between nodes; one share of 1 in an hour."""
    first, span = float(times_s.min()), float(np.ptp(times_s))
    if span < 3600.0:
        return [np.ones_like(times_s)]
    nodes = np.linspace(first, first + span, int(np.ceil(span / step_s)) + 1)
    return [np.interp(times_s, nodes, row) for row in np.eye(nodes.size)]


class _Outward:
    """Path displaced along the radius: the antenna of a satellite that keeps one side to the Earth."""

    def __init__(self, path, distance_m: float) -> None:
        self.path, self.distance_m = path, distance_m

    def states(self, times_s: np.ndarray) -> States:
        position, velocity, acceleration = self.path.states(times_s)
        scale = self.distance_m / np.linalg.norm(position, axis=1)[:, None]
        return States(position * (1.0 + scale), velocity * (1.0 + scale), acceleration)


class _Heaving:
    """Ground path that moves up and down with a period of twelve hours."""

    def __init__(self, path, amplitude_m: float, phase_rad: float) -> None:
        self.path, self.amplitude_m, self.phase_rad = path, amplitude_m, phase_rad

    def states(self, times_s: np.ndarray) -> States:
        position, velocity, acceleration = self.path.states(times_s)
        height = self.amplitude_m * np.sin(2.0 * np.pi * np.asarray(times_s) / 43200.0 + self.phase_rad)
        return States(position * (1.0 + height / np.linalg.norm(position, axis=1))[:, None], velocity, acceleration)


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
            [replace(r, path=r.shifted(sign * delta)) if r.shifted else r for r in forward.receivers]
            for sign in (-1, 1)
        ]
        low, high = (ForwardModel(forward.rows, m, forward.media).predict(fit.path) for m in moved)
        out.append((high - low) / (2 * step))
    return out


def _plain_rate(forward: ForwardModel, mapping: np.ndarray) -> np.ndarray:
    rows = forward.rows
    interval = np.where(forward.mean, rows.interval_s, np.inf)
    rate = -(mapping[forward.last] - mapping[forward.first]) / interval / SPEED_OF_LIGHT_M_S
    if not forward.mean.all():
        # Instantaneous rows: the rate from the neighbouring rows of the same station.
        for s in np.unique(rows.station):
            mine = np.flatnonzero((rows.station == s) & ~forward.mean)
            if mine.size > 1:
                order = mine[np.argsort(rows.middle_s[mine], kind="stable")]
                times, first = np.unique(rows.middle_s[order], return_index=True)
                if times.size > 1:
                    slope = np.gradient(mapping[forward.first[order[first]]], times)
                    rate[order] = -np.interp(rows.middle_s[order], times, slope) / SPEED_OF_LIGHT_M_S
    return rate


def _shell_mapping(sin_elevation: np.ndarray) -> np.ndarray:
    cosine = np.sqrt(np.maximum(0.0, 1.0 - np.clip(sin_elevation, 0.0, 1.0) ** 2))
    return 1.0 / np.sqrt(1.0 - (6371e3 * cosine / (6371e3 + 350e3)) ** 2)


class _Displaced:
    """Path with a small displacement added, given at times and splined."""

    def __init__(self, path, times_s: np.ndarray, displacement_m: np.ndarray) -> None:
        self.path, self.spline = path, CubicSpline(times_s, displacement_m)

    def states(self, times_s: np.ndarray) -> States:
        position, velocity, acceleration = self.path.states(times_s)
        return States(position + self.spline(times_s), velocity + self.spline(times_s, 1), acceleration)


def omitted_field_m_s2(radius_m: float, first_degree: int = 5, last_degree: int = 60) -> float:
    """Return the rms acceleration of the gravity field from a degree on, by Kaula's rule (1e-5/l**2 per coefficient)."""
    degree = np.arange(first_degree, last_degree + 1)
    ratio = EARTH_RADIUS_M / radius_m
    power = (degree + 1) * 1e-5 / degree**2 * np.sqrt(2 * degree + 1) * ratio**degree
    return float(GM_EARTH_M3_S2 / radius_m**2 * np.sqrt((power**2).sum()))


def _pushed(fit: Fit, scale: float) -> list[_Displaced]:
    """Return the path under a constant push along each of its local axes, from the fit's own transition matrices."""
    times = fit.forward.event_times_s
    grid = np.linspace(min(times.min() - 0.5, 0.0), max(times.max(), 0.0), 201)
    states = fit.path.states(grid)
    transition = fit.path.state_transition(grid)
    axes = np.array([local_axes(r, v) for r, v in zip(states.position, states.velocity, strict=True)])
    size = scale * omitted_field_m_s2(float(np.median(np.linalg.norm(states.position, axis=1))))
    start = int(np.argmin(np.abs(grid)))
    out = []
    for axis in range(3):
        push = np.zeros((grid.size, 6, 1))
        push[:, 3:, 0] = size * axes[:, axis]
        rate = np.linalg.solve(transition, push)[:, :, 0]
        total = CubicSpline(grid, rate).antiderivative()(grid)
        moved = np.einsum("nij,nj->ni", transition, total - total[start])
        out.append(_Displaced(fit.path, grid, moved[:, :3]))
    return out
