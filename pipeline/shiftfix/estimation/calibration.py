"""Station oscillators from emitters of known motion: what a known emitter should have been received as, and the clock.

Two kinds of known emitter: one with a rest frequency (its proper time counts), and one whose clock is given against
coordinate time (navigation satellites: clock table plus the periodic term -2 r.v/c**2).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from shiftfix.estimation.forward import ForwardModel
from shiftfix.physics.constants import L_G, SPEED_OF_LIGHT_M_S
from shiftfix.physics.doppler import C2
from shiftfix.physics.lighttime import Link
from shiftfix.physics.motion.states import Path, States


def periodic_relativity_s(states: States) -> np.ndarray:
    """Return the periodic relativistic clock term -2 r.v/c**2 [s] (IS-GPS-200, 20.3.3.3.3.1, from memory)."""
    return -2.0 * np.einsum("ni,ni->n", states.position, states.velocity) / C2


def known_log_ratio(
    forward: ForwardModel, path: Path, clock_s: Callable[[np.ndarray], np.ndarray] | None, link: Link | None = None
) -> np.ndarray:
    """Return ln(received / nominal frequency) that a known emitter gives at an ideal station, shape (n,).

    Parameters
    ----------
    forward : ForwardModel
        Of the emitter's rows.
    path : Path
    clock_s : callable or None
        `clock_s(times)`: the emitter's clock minus coordinate time, periodic relativity included; None when the
        emitter's proper time counts (rest frequency).
    """
    link = forward.links(path) if link is None else link
    if clock_s is None:
        return forward.predict(path, link)
    a, b = forward.first, forward.last
    interval = forward.interval_s
    change = link.light_time_s[b] - link.light_time_s[a]
    clock = clock_s(link.emission_times_s)
    # Coordinate time is TT here: an ideal clock on the geoid keeps it (L_G takes the potential there off).
    lost = forward.receiver_lost_s - L_G * interval
    out = np.log1p((lost - change + clock[b] - clock[a]) / (interval - lost))
    if forward.media.troposphere:
        out = out - forward.delay_rate(forward.slant_delay(link), link)
    return out


@dataclass(frozen=True, eq=False)
class ClockHistory:
    """Clock phase of one station at the ends of its intervals.

    Parameters
    ----------
    epochs_ns : ndarray of int, shape (m,)
        Ends of intervals, as tagged.
    phase_s : ndarray, shape (m,)
        Clock phase (arbitrary origin in each connected stretch); its slope is the fractional offset.
    phase_sigma_s : ndarray, shape (m,)
    zenith_m : ndarray, shape (m,)
        Correction of the zenith delay.
    used : ndarray of int, shape (m,)
        Number of emitters at each epoch.
    kept : ndarray of bool, shape (n,)
        Rows that were used.
    scale : float
        Residual spread over the stated phase noise.
    """

    epochs_ns: np.ndarray
    phase_s: np.ndarray
    phase_sigma_s: np.ndarray
    zenith_m: np.ndarray
    used: np.ndarray
    kept: np.ndarray
    scale: float


def clock_history(
    start_ns: np.ndarray,
    stop_ns: np.ndarray,
    rate: np.ndarray,
    sigma_phase_s: np.ndarray,
    record: np.ndarray,
    mapping_start: np.ndarray,
    mapping_stop: np.ndarray,
    *,
    zenith_sigma_m: float = 0.3,
    zenith_step_s: float = 5400.0,
    zenith_walk_m: float = 0.02,
) -> ClockHistory:
    """Return the clock of one station from phase records of several known emitters.

    Parameters
    ----------
    start_ns, stop_ns : ndarray of int, shape (n,)
        Ends of the count intervals, as tagged.
    rate : ndarray, shape (n,)
        Observed minus predicted ln of frequency: the station's offset plus noise.
    sigma_phase_s : ndarray, shape (n,)
        1-sigma of the phase at each end [s].
    record : ndarray of int, shape (n,)
        Unbroken phase record of each row.
    mapping_start, mapping_stop : ndarray, shape (n,)
        Mapping of the zenith delay at the ends (0 to leave it alone).
    zenith_sigma_m : float
        Prior 1-sigma of the correction of the zenith delay; 0 leaves it out.
    zenith_step_s, zenith_walk_m : float
        Node spacing of the correction, and the 1-sigma of its change from node to node.

    Notes
    -----
    In the phase domain consecutive counts of a record are a running sum with one unknown constant and white noise; the
    clock phase at each epoch is eliminated by the weighted mean over the emitters, which leaves the constants and the
    zenith delay. Rows that stand out of their interval's median break their record.
    """
    kept = _consistent(start_ns, rate, sigma_phase_s * np.sqrt(2.0) / ((stop_ns - start_ns) * 1e-9))
    for attempt in range(4):
        solved = _phase_solution(
            start_ns,
            stop_ns,
            rate,
            sigma_phase_s,
            record,
            mapping_start,
            mapping_stop,
            kept,
            zenith_sigma_m,
            zenith_step_s,
            zenith_walk_m,
        )
        residual, row_of, history = solved
        size = np.abs(residual)
        limit = 6.0 * max(1.4826 * float(np.median(size)) if size.size else 1.0, 1.0)
        bad = np.unique(row_of[size > limit])
        if not bad.size or attempt == 3:
            return history
        kept = kept.copy()
        kept[bad] = False
    return history


def _consistent(start_ns: np.ndarray, rate: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Return rows that agree with the median of their interval within eight robust standard deviations."""
    _, group = np.unique(start_ns, return_inverse=True)
    median = np.array([np.median(rate[group == g]) for g in range(group.max() + 1)]) if len(rate) else np.empty(0)
    off = rate - median[group]
    spread = max(1.4826 * float(np.median(np.abs(off))), float(np.median(sigma)) * 0.5) if len(rate) else 1.0
    return np.abs(off) <= 8.0 * spread


def _phase_solution(start_ns, stop_ns, rate, sigma, record, map_a, map_b, kept, zenith_sigma, zenith_step, zenith_walk):
    rows = np.flatnonzero(kept)
    order = rows[np.lexsort((start_ns[rows], record[rows]))]
    new = np.ones(order.size, bool)
    if order.size > 1:
        new[1:] = (record[order][1:] != record[order][:-1]) | (start_ns[order][1:] != stop_ns[order][:-1])
    arc = np.cumsum(new) - 1
    # Phase observations: the start of each arc, then the running sum at every end.
    step = rate[order] * (stop_ns[order] - start_ns[order]) * 1e-9
    total = np.cumsum(step)
    base = (total - step)[new][arc]
    at_end = total - base
    first = np.flatnonzero(new)
    time = np.concatenate([start_ns[order][first], stop_ns[order]])
    value = np.concatenate([np.zeros(first.size), at_end])
    arcs = np.concatenate([arc[first], arc])
    weight = 1.0 / np.concatenate([sigma[order][first], sigma[order]]) ** 2
    mapping = np.concatenate([map_a[order][first], map_b[order]]) / SPEED_OF_LIGHT_M_S
    row_of = np.concatenate([order[first], order])
    epochs, index = np.unique(time, return_inverse=True)
    m = epochs.size
    zenith = _zenith_columns((time - epochs[0]) * 1e-9 if m else time, mapping, zenith_sigma, zenith_step)
    nodes = zenith.shape[1]
    count = int(arcs.max()) + 1 if arcs.size else 0
    design = np.zeros((value.size, count + nodes))
    design[np.arange(value.size), arcs] = 1.0
    design[:, count:] = zenith
    sums = np.bincount(index, weight, m)

    def centred(columns: np.ndarray) -> np.ndarray:
        mean = np.zeros((m, columns.shape[1]))
        np.add.at(mean, index, weight[:, None] * columns)
        return columns - (mean / sums[:, None])[index]

    root = np.sqrt(weight)
    a = centred(design) * root[:, None]
    b = centred(value[:, None])[:, 0] * root
    prior = []
    if nodes:
        block = np.zeros((nodes, count + nodes))
        block[:, count:] = np.eye(nodes) / zenith_sigma
        prior.append(block)
        change = np.zeros((nodes - 1, count + nodes))
        for k in range(nodes - 1):
            change[k, count + k], change[k, count + k + 1] = -1.0 / zenith_walk, 1.0 / zenith_walk
        prior.append(change)
    lower = np.vstack(prior) if prior else np.zeros((0, count + nodes))
    normal = a.T @ a + lower.T @ lower
    scale = np.sqrt(np.maximum(np.diag(normal), 1e-300))
    solution = (
        np.linalg.pinv(normal / np.outer(scale, scale), rcond=1e-12, hermitian=True) @ ((a.T @ b) / scale) / scale
    )
    left = value - design @ solution
    phase = np.bincount(index, weight * left, m) / sums
    used = np.bincount(index, minlength=m)
    residual = (left - phase[index]) * root
    # A single emitter at an epoch leaves no residual there; the divisor puts the others back to unit variance.
    free = np.sqrt(np.maximum(1.0 - weight / sums[index], 1e-3))
    normalised = np.where(used[index] > 1, residual / free, 0.0)
    many = used[index] > 1
    spread = 1.4826 * float(np.median(np.abs(normalised[many]))) if many.any() else 1.0
    zenith_at = _zenith_columns((epochs - epochs[0]) * 1e-9 if m else epochs, np.ones(m), zenith_sigma, zenith_step)
    history = ClockHistory(
        epochs,
        phase,
        max(spread, 1.0) / np.sqrt(sums),
        zenith_at @ solution[count:] if nodes else np.zeros(m),
        used,
        kept,
        spread,
    )
    return normalised, row_of, history


def _zenith_columns(times_s: np.ndarray, mapping: np.ndarray, sigma: float, step: float) -> np.ndarray:
    """Return the columns of a piecewise linear zenith correction; empty when it is left out."""
    if not sigma or not times_s.size or not np.any(mapping):
        return np.zeros((times_s.size, 0))
    span = float(times_s.max())
    count = max(1, int(np.ceil(span / step)))
    position = np.clip(times_s / max(span / count, 1e-9), 0, count)
    lower = np.minimum(position.astype(int), count - 1)
    share = position - lower
    out = np.zeros((times_s.size, count + 1))
    at = np.arange(times_s.size)
    out[at, lower] = (1.0 - share) * mapping
    out[at, lower + 1] += share * mapping
    return out


@dataclass(frozen=True, eq=False)
class SmoothOffsets:
    """Offset of one station on a time grid: values, own and common 1-sigma, residual spread, looks left out."""

    values: np.ndarray
    own_sigma: np.ndarray
    common_sigma: float
    scale: float
    rejected: int


def smooth_offsets(
    times_s: np.ndarray, rate: np.ndarray, sigma: np.ndarray, grid_s: np.ndarray, model: str, walk: float
) -> SmoothOffsets:
    """Return a constant, drifting or randomly walking offset from looks at known emitters.

    Parameters
    ----------
    times_s, rate, sigma : ndarray, shape (n,)
        Looks: time, observed minus predicted ln of frequency, 1-sigma.
    grid_s : ndarray, shape (g,)
        Ascending times of the answer.
    model : {"constant", "drift", "random_walk"}
    walk : float
        1-sigma of the change of the offset in one second, for the random walk.

    Notes
    -----
    Weighted least squares on a basis (constant; line; values at the grid joined by random-walk priors), with looks
    beyond six robust standard deviations left out; an error larger than stated scales the covariance.
    """
    keep = np.ones(times_s.size, bool)
    middle = 0.5 * (grid_s[0] + grid_s[-1])
    lower = np.zeros((0, 0))
    if model == "random_walk" and grid_s.size > 1:
        position = np.interp(times_s, grid_s, np.arange(grid_s.size))
        left = np.minimum(position.astype(int), grid_s.size - 2)
        basis = np.zeros((times_s.size, grid_s.size))
        at = np.arange(times_s.size)
        basis[at, left], basis[at, left + 1] = 1.0 - (position - left), position - left
        on_grid = np.eye(grid_s.size)
        change = 1.0 / (walk * np.sqrt(np.diff(grid_s)))
        lower = np.zeros((grid_s.size - 1, grid_s.size))
        k = np.arange(grid_s.size - 1)
        lower[k, k], lower[k, k + 1] = -change, change
    else:
        powers = [0, 1] if model == "drift" else [0]
        span = max(float(np.ptp(times_s)), 1.0)
        basis = np.column_stack([((times_s - middle) / span) ** q for q in powers])
        on_grid = np.column_stack([((grid_s - middle) / span) ** q for q in powers])
        lower = np.zeros((0, len(powers)))
    spread = 1.0
    for _ in range(5):
        a = np.vstack([basis[keep] / sigma[keep, None], lower])
        b = np.concatenate([rate[keep] / sigma[keep], np.zeros(len(lower))])
        q, upper = np.linalg.qr(a)
        inverse = np.linalg.pinv(upper, rcond=1e-14)
        solution = inverse @ (q.T @ b)
        normalised = (rate - basis @ solution) / sigma
        spread = max(1.0, 1.4826 * float(np.median(np.abs(normalised[keep]))))
        renewed = np.abs(normalised) <= 6.0 * spread
        if (renewed == keep).all():
            break
        keep = renewed
    covariance = spread**2 * (on_grid @ inverse) @ (on_grid @ inverse).T
    total = np.diag(covariance)
    common = max(float(covariance.min()), 0.0)
    return SmoothOffsets(
        on_grid @ solution, np.sqrt(np.maximum(total - common, 0.0)), float(np.sqrt(common)), spread, int((~keep).sum())
    )
