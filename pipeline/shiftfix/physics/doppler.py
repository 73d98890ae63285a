"""Received over rest frequency: the ratio of the contraction k.u at reception and emission, and its mean over a count.

ln D = ln[(k.u)_R / (k.u)_T] is formed as log1p of the small quantity, so that nothing is lost to cancellation; a mean
over a count interval is the emitter's proper time that arrives in it over the receiver's proper time (phase difference
over length), never a value at mid-interval.
"""

from __future__ import annotations

import numpy as np

from shiftfix.physics.constants import SPEED_OF_LIGHT_M_S
from shiftfix.physics.gravity import earth_potential, earth_potential_gradient
from shiftfix.physics.lighttime import Link
from shiftfix.physics.motion.states import States

C2 = SPEED_OF_LIGHT_M_S**2


def log_ratio(
    link: Link,
    receiver: States,
    *,
    receiver_potential: np.ndarray | float = 0.0,
    emitter_potential: np.ndarray | float = 0.0,
) -> np.ndarray:
    """Return ln D of instantaneous received frequency over rest frequency, shape (n,).

    Parameters
    ----------
    link : Link
    receiver : States
        At reception, GCRS.
    receiver_potential, emitter_potential : ndarray or float
        Gravitational potential w > 0 [m2/s2]; 0 gives special relativity.

    Notes
    -----
    Metric of IAU 2000 B1.3 to first post-Newtonian order: u0 from the exact norm of u, k along the straight chord. The
    bending of the ray near the Earth adds less than 1e-14 and is left out (it is in the light time, hence in means).
    """
    beta_t = link.emitter.velocity / SPEED_OF_LIGHT_M_S
    beta_r = receiver.velocity / SPEED_OF_LIGHT_M_S
    delta = beta_r - beta_t
    n = link.direction
    along_t = np.einsum("ni,ni->n", n, beta_t)
    doppler = -np.einsum("ni,ni->n", n, delta) / (1.0 - along_t)
    square_r = np.einsum("ni,ni->n", beta_r, beta_r)
    w_r, w_t = np.asarray(receiver_potential) / C2, np.asarray(emitter_potential) / C2
    # Norm of (1, beta) in the metric: 1 - 2w + 2w**2 - (1 + 2w) beta**2; the difference emitter - receiver is formed
    # from differences.
    norm_r = 1.0 - 2.0 * w_r + 2.0 * w_r**2 - (1.0 + 2.0 * w_r) * square_r
    square_difference = np.einsum("ni,ni->n", delta, beta_r + beta_t)
    square_t = np.einsum("ni,ni->n", beta_t, beta_t)
    difference = square_difference + 2.0 * (w_r - w_t) * (1.0 - w_r - w_t) + 2.0 * (w_r * square_r - w_t * square_t)
    dilation = difference / norm_r
    return 0.5 * np.log1p(dilation + doppler * (2.0 + doppler) * (1.0 + dilation))


def log_ratio_partials(link: Link, receiver: States, d_position: np.ndarray, d_velocity: np.ndarray) -> np.ndarray:
    """Return d ln D / d parameters, shape (n, p), the shift of the emission time included.

    Parameters
    ----------
    link : Link
    receiver : States
    d_position, d_velocity : ndarray, shape (n, 3, p)
        Of the emitter at fixed emission time.
    """
    c = SPEED_OF_LIGHT_M_S
    n, v = link.direction, link.emitter.velocity
    along_t = np.einsum("ni,ni->n", n, v) / c
    along_r = np.einsum("ni,ni->n", n, receiver.velocity) / c
    to_position = n / (c * (1.0 - along_t))[:, None]
    # d t_T / d p = n.dx / (c (1 - n.v/c)); total changes of position and velocity at the moved emission time:
    #   dX = dx + v dt, dV = dv + a dt
    # d ln D = d(-n.(v_R - v_T)/c ...) with dn = -(dX - n n.dX)/R
    gamma = 1.0 / (1.0 - np.einsum("ni,ni->n", v, v) / C2)
    gradient = earth_potential_gradient(link.emitter.position)
    turn_r = -(receiver.velocity - n * (along_r * c)[:, None]) / (c * (1.0 - along_r) * link.distance_m)[:, None]
    turn_t = -(v - n * (along_t * c)[:, None]) / (c * (1.0 - along_t) * link.distance_m)[:, None]
    on_x = -turn_r + turn_t - gradient * (gamma / C2)[:, None]
    on_v = n / (c * (1.0 - along_t))[:, None] - v * (gamma / C2)[:, None]
    on_time = np.einsum("ni,ni->n", on_x, v) + np.einsum("ni,ni->n", on_v, link.emitter.acceleration)
    weight_x = on_x + to_position * on_time[:, None]
    return np.einsum("ni,nip->np", weight_x, d_position) + np.einsum("ni,nip->np", on_v, d_velocity)


def _clock_deficit(position: np.ndarray, velocity: np.ndarray) -> np.ndarray:
    """Return 1 - d(proper time)/d(coordinate time), first post-Newtonian order, (n,)."""
    return (earth_potential(position) + 0.5 * np.einsum("ni,ni->n", velocity, velocity)) / C2


def _clock_deficit_rate(states: States) -> np.ndarray:
    gradient = earth_potential_gradient(states.position)
    return np.einsum("ni,ni->n", states.velocity, gradient + states.acceleration) / C2


def _lost(start: States, stop: States, duration_s: np.ndarray) -> np.ndarray:
    """Return coordinate time minus proper time over intervals [s].

    Values and slopes at both ends (Euler-Maclaurin): the neglected fourth-order term is below 1e-19 s for 60 s in a
    low orbit of eccentricity 0.1.
    """
    a, b = _clock_deficit(start.position, start.velocity), _clock_deficit(stop.position, stop.velocity)
    slopes = _clock_deficit_rate(start) - _clock_deficit_rate(stop)
    return duration_s * (0.5 * (a + b) + duration_s * slopes / 12.0)


def log_mean_ratio(
    start: Link, stop: Link, receiver_start: States, receiver_stop: States, interval_s: np.ndarray
) -> np.ndarray:
    """Return ln of mean received over rest frequency across count intervals, shape (n,).

    Parameters
    ----------
    start, stop : Link
        At both ends of each interval.
    receiver_start, receiver_stop : States
    interval_s : ndarray, shape (n,)
        Length in coordinate time; its excess over the receiver's proper time (7e-10 of it) is taken off here.
    """
    change = stop.light_time_s - start.light_time_s
    emitted = interval_s - change
    lost_t = _lost(start.emitter, stop.emitter, emitted)
    lost_r = _lost(receiver_start, receiver_stop, interval_s)
    return np.log1p((lost_r - lost_t - change) / (interval_s - lost_r))


def log_mean_ratio_partials(
    start: Link,
    stop: Link,
    receiver_start: States,
    receiver_stop: States,
    interval_s: np.ndarray,
    d_position_start: np.ndarray,
    d_velocity_start: np.ndarray,
    d_position_stop: np.ndarray,
    d_velocity_stop: np.ndarray,
) -> np.ndarray:
    """Return d ln(mean ratio) / d parameters, shape (n, p); partials of the emitter at fixed emission times."""
    c = SPEED_OF_LIGHT_M_S
    emitted = interval_s - (stop.light_time_s - start.light_time_s)

    def ends(link: Link, sign: float) -> tuple[np.ndarray, np.ndarray]:
        v = link.emitter.velocity
        deficit = _clock_deficit(link.emitter.position, v)
        moved = link.direction / (c * (1.0 - np.einsum("ni,ni->n", link.direction, v) / c))[:, None]
        on_x = sign * moved * (1.0 - deficit)[:, None]
        half = (0.5 * emitted / C2)[:, None]
        return on_x - half * earth_potential_gradient(link.emitter.position), -half * v

    a_x, a_v = ends(start, -1.0)
    b_x, b_v = ends(stop, 1.0)
    scale = (1.0 / emitted)[:, None]
    out = np.einsum("ni,nip->np", b_x * scale, d_position_stop)
    out += np.einsum("ni,nip->np", a_x * scale, d_position_start)
    out += np.einsum("ni,nip->np", b_v * scale, d_velocity_stop)
    out += np.einsum("ni,nip->np", a_v * scale, d_velocity_start)
    return out
