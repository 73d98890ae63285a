"""One-way light time from a moving emitter to a receiver at given reception times."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shiftfix.physics.constants import GM_EARTH_M3_S2, SPEED_OF_LIGHT_M_S
from shiftfix.physics.motion.states import Path, States


class Link(NamedTuple):
    """One-way links of n reception events.

    Times in seconds of TT past the arc epoch; `direction` is the unit vector from emitter (at emission) to receiver
    (at reception); `emitter` holds the emitter's states at emission, GCRS.
    """

    emission_times_s: np.ndarray
    light_time_s: np.ndarray
    distance_m: np.ndarray
    direction: np.ndarray
    emitter: States


def one_way(receive_times_s: np.ndarray, receiver_position_m: np.ndarray, emitter: Path, *, shapiro: bool = True) -> Link:
    """Return the links of n reception events.

    Parameters
    ----------
    receive_times_s : ndarray, shape (n,)
    receiver_position_m : ndarray, shape (n, 3)
        GCRS at reception.
    emitter : Path
    shapiro : bool
        Whether the Earth's relativistic delay (6 to 19 mm) is added (Shapiro 1964; IERS Conventions 2010, ch. 11).

    Raises
    ------
    ValueError
        When a position is not finite or the emitter outruns light.

    Notes
    -----
    Newton iteration on the emission time; it converges for every speed below that of light. The last correction, below
    1e-9 s, moves the emitter along its velocity; what its acceleration adds is 1e-18 s**2 times 10 m/s**2.
    """
    times = np.atleast_1d(np.asarray(receive_times_s, float))
    c = SPEED_OF_LIGHT_M_S
    light_time = np.zeros_like(times)
    for _ in range(60):
        states = emitter.states(times - light_time)
        line = receiver_position_m - states.position
        distance = np.sqrt(np.einsum("ni,ni->n", line, line))
        approach = np.einsum("ni,ni->n", line, states.velocity) / distance
        target = distance / c
        if shapiro:
            target = target + _earth_delay(states.position, receiver_position_m, distance)
        # F(L) = L - |x_R - x_T(t - L)|/c, dF/dL = 1 - n.v/c
        change = (target - light_time) / (1.0 - approach / c)
        light_time = light_time + change
        largest = np.abs(change).max(initial=0.0)
        if largest < 1e-9:
            break
        if not np.isfinite(largest):
            raise ValueError("the light time is not finite: a position of the emitter or of a receiver is not")
    else:
        raise ValueError("the light time does not converge: the emitter's path is not slower than light")
    # The states are those before the last correction: position follows with the velocity; velocity stays (1e-8 m/s).
    position = states.position - change[:, None] * states.velocity
    line = receiver_position_m - position
    distance = np.sqrt(np.einsum("ni,ni->n", line, line))
    emitter = States(position, states.velocity, states.acceleration)
    return Link(times - light_time, light_time, distance, line / distance[:, None], emitter)


def _earth_delay(emitter: np.ndarray, receiver: np.ndarray, distance: np.ndarray) -> np.ndarray:
    total = np.sqrt(np.einsum("ni,ni->n", emitter, emitter)) + np.sqrt(np.einsum("ni,ni->n", receiver, receiver))
    # A path through the Earth's interior (a bad trial state) must not end in the logarithm of a negative number.
    below = np.maximum(total - distance, 1e-3 * total)
    return 2.0 * GM_EARTH_M3_S2 / SPEED_OF_LIGHT_M_S**3 * np.log((total + distance) / below)
