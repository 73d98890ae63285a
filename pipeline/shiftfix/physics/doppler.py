"""Received over rest frequency: the ratio of the contraction k.u at reception and emission, and its mean over a count.

ln D = ln[(k.u)_R / (k.u)_T] is formed as log1p of the small quantity, so that nothing is lost to cancellation; a mean
over a count interval is the emitter's proper time that arrives in it over the receiver's proper time (phase difference
over length), never a value at mid-interval.
"""

from __future__ import annotations

import numpy as np

from shiftfix.physics import doubled
from shiftfix.physics.constants import GM_EARTH_M3_S2, SPEED_OF_LIGHT_M_S
from shiftfix.physics.gravity import earth_potential, earth_potential_gradient, earth_potential_rate
from shiftfix.physics.lighttime import Link
from shiftfix.physics.motion.states import States

C2 = SPEED_OF_LIGHT_M_S**2


def log_ratio(
    link: Link,
    receiver: States,
    *,
    receiver_potential: np.ndarray | float = 0.0,
    emitter_potential: np.ndarray | float = 0.0,
    light_delay: bool = False,
) -> np.ndarray:
    """Return ln D of instantaneous received frequency over rest frequency, shape (n,).

    Parameters
    ----------
    link : Link
    receiver : States
        At reception, GCRS.
    receiver_potential, emitter_potential : ndarray or float
        Gravitational potential w > 0 [m2/s2]; 0 gives special relativity.
    light_delay : bool
        Whether the change of the Earth's delay of light belongs to it, as in a link from `one_way`; positions are geocentric.

    Notes
    -----
    Metric of IAU 2000 B1.3 to first post-Newtonian order: u0 from the exact norm of u, k along the straight chord, and the
    gradient of the Earth's delay (Blanchet et al. 2001, A&A 370 320), up to 3e-14 in low orbits and 1e-15 for navigation
    satellites. With it the value is the limit of the mean over ever shorter counts, to 1e-16.
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
    out = 0.5 * np.log1p(dilation + doppler * (2.0 + doppler) * (1.0 + dilation))
    return out + _delay_gradient(link, receiver) if light_delay else out


def _delay_gradient(link: Link, receiver: States) -> np.ndarray:
    """Return the part of ln D that the changing delay of light in the Earth's field makes (gamma = 1), shape (n,)."""
    ends = []
    for sign, states in ((1.0, link.emitter), (-1.0, receiver)):
        radius = np.sqrt(np.einsum("ni,ni->n", states.position, states.position))
        along = np.einsum("ni,ni->n", link.direction, states.velocity)
        rising = sign * np.einsum("ni,ni->n", states.position, states.velocity) / radius
        ends.append((radius, along, rising))
    total = ends[0][0] + ends[1][0]
    # A path through the Earth's interior (a bad trial state) stays finite, as in the light time.
    scale = 4.0 * GM_EARTH_M3_S2 / SPEED_OF_LIGHT_M_S**3 / np.maximum(total**2 - link.distance_m**2, 1e-3 * total**2)
    at_t, at_r = (
        scale * (total * along + link.distance_m * rising) / (1.0 - along / SPEED_OF_LIGHT_M_S) for _, along, rising in ends
    )
    return at_t - at_r


def log_ratio_precise(
    link: Link,
    receiver: States,
    *,
    receiver_potential: np.ndarray | float = 0.0,
    emitter_potential: np.ndarray | float = 0.0,
) -> np.ndarray:
    """Return ln D, without the light's delay, with relative accuracy even where it nearly vanishes, shape (n,).

    `log_ratio` is good to 5e-15 of the larger of |ln D| and v/c; where approach and time dilation cancel (|ln D| far
    below v/c) its accuracy relative to ln D is worse. Here the definition is evaluated in pairs of doubles, good to
    1e-15 of ln D. Twelve times slower: for checks.
    """
    one, two = doubled.pair(1.0), doubled.pair(2.0)
    n = doubled.pair(link.direction)
    squares = []
    for velocity, potential in (
        (receiver.velocity, receiver_potential), (link.emitter.velocity, emitter_potential)
    ):
        beta = doubled.divide(velocity, SPEED_OF_LIGHT_M_S)
        w = doubled.divide(np.broadcast_to(np.asarray(potential, float), len(velocity)) / SPEED_OF_LIGHT_M_S, SPEED_OF_LIGHT_M_S)
        seen = doubled.subtract(one, doubled.dot(n, beta))
        twice = doubled.multiply(two, w)
        dilated = doubled.multiply(doubled.add(one, twice), doubled.dot(beta, beta))
        norm = doubled.subtract(doubled.add(doubled.subtract(one, twice), doubled.multiply(twice, w)), dilated)
        squares.append((doubled.multiply(seen, seen), norm))
    # D**2 = (seen_R**2 norm_T) / (seen_T**2 norm_R); log1p of the positive small quantity either way round
    above = doubled.multiply(squares[0][0], squares[1][1])
    below = doubled.multiply(squares[1][0], squares[0][1])
    difference = doubled.subtract(above, below)[0]
    smaller = np.minimum(above[0], below[0])
    return 0.5 * np.sign(difference) * np.log1p(np.abs(difference) / smaller)


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


def clock_deficit(states: States) -> tuple[np.ndarray, np.ndarray]:
    """Return 1 - d(proper time)/d(coordinate time) of a body, and its time derivative [1/s], each (n,).

    From the norm of u as in `log_ratio`: exact in the speed, first post-Newtonian order in the potential (the derivative
    without products of speed and potential, 1e-9 of it).
    """
    w = earth_potential(states.position) / C2
    square = np.einsum("ni,ni->n", states.velocity, states.velocity) / C2
    short = 2.0 * w * (1.0 - w) + (1.0 + 2.0 * w) * square
    rate = np.sqrt(1.0 - short)
    slope = earth_potential_rate(states.position, states.velocity)
    slope = slope + np.einsum("ni,ni->n", states.velocity, states.acceleration)
    # 1 - sqrt(1 - q) = q/(1 + sqrt(1 - q)), without cancellation
    return short / (1.0 + rate), slope / (C2 * rate)


def time_lost(states: States, first: np.ndarray, last: np.ndarray, duration_s: np.ndarray) -> np.ndarray:
    """Return coordinate time minus proper time [s] of a body between its states `first` and `last`, shape (rows,).

    Values and slopes at both ends (Euler-Maclaurin). The fourth-order term that is left out, over the duration, is 1e-17
    for 60 s and 5e-15 for 300 s in a low orbit of eccentricity 0.1, 1e-13 for 300 s through a perigee of eccentricity 0.7.
    """
    deficit, rate = clock_deficit(states)
    return duration_s * (0.5 * (deficit[first] + deficit[last]) + duration_s * (rate[first] - rate[last]) / 12.0)


def mean_ratio_of_events(
    link: Link, first: np.ndarray, last: np.ndarray, interval_s: np.ndarray, receiver_lost_s: np.ndarray
) -> np.ndarray:
    """Return ln of mean received over rest frequency across count intervals between reception events, shape (rows,).

    Parameters
    ----------
    link : Link
        At all reception events.
    first, last : ndarray of int, shape (rows,)
        Events at both ends of each interval; neighbouring counts share theirs.
    interval_s : ndarray, shape (rows,)
        Length in coordinate time.
    receiver_lost_s : ndarray, shape (rows,)
        Coordinate minus proper time of the receiver over the interval (7e-10 of it on the ground).
    """
    change = link.light_time_s[last] - link.light_time_s[first]
    lost = time_lost(link.emitter, first, last, interval_s - change)
    return np.log1p((receiver_lost_s - lost - change) / (interval_s - receiver_lost_s))


def mean_partials_of_events(
    link: Link,
    first: np.ndarray,
    last: np.ndarray,
    interval_s: np.ndarray,
    d_position: np.ndarray,
    d_velocity: np.ndarray,
) -> np.ndarray:
    """Return d ln(mean ratio) / d parameters, shape (rows, p); partials (events, 3, p) at fixed emission times."""
    v = link.emitter.velocity
    emitted = interval_s - (link.light_time_s[last] - link.light_time_s[first])
    # Change of the emitter's time at each event over its mean clock rate (both ends run alike to 1e-11 in any orbit), and
    # of the rate itself, whose end correction is left out (1e-9 of the whole).
    toward = 1.0 / (SPEED_OF_LIGHT_M_S - np.einsum("ni,ni->n", link.direction, v))
    moved = np.einsum("ni,nip->np", link.direction * toward[:, None], d_position)
    half = (0.5 / (C2 - np.einsum("ni,ni->n", v, v)))[:, None]
    rate = np.einsum("ni,nip->np", earth_potential_gradient(link.emitter.position) * half, d_position)
    rate += np.einsum("ni,nip->np", v * half, d_velocity)
    return (moved[last] - moved[first]) / emitted[:, None] - (rate[last] + rate[first])


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
    link, first, last = _joined(start, stop)
    receiver = States(*(np.concatenate(p) for p in zip(receiver_start, receiver_stop, strict=True)))
    return mean_ratio_of_events(link, first, last, interval_s, time_lost(receiver, first, last, interval_s))


def log_mean_ratio_partials(
    start: Link,
    stop: Link,
    interval_s: np.ndarray,
    d_position_start: np.ndarray,
    d_velocity_start: np.ndarray,
    d_position_stop: np.ndarray,
    d_velocity_stop: np.ndarray,
) -> np.ndarray:
    """Return d ln(mean ratio) / d parameters, shape (n, p); partials of the emitter at fixed emission times."""
    link, first, last = _joined(start, stop)
    d_position = np.concatenate([d_position_start, d_position_stop])
    d_velocity = np.concatenate([d_velocity_start, d_velocity_stop])
    return mean_partials_of_events(link, first, last, interval_s, d_position, d_velocity)


def _joined(start: Link, stop: Link) -> tuple[Link, np.ndarray, np.ndarray]:
    """Return the links of both ends as one set of events, with the indices of the ends."""
    emitter = States(*(np.concatenate(p) for p in zip(start.emitter, stop.emitter, strict=True)))
    link = Link(*(np.concatenate(p) for p in zip(start[:4], stop[:4], strict=True)), emitter)
    n = len(start.light_time_s)
    return link, np.arange(n), np.arange(n, 2 * n)
