"""States of a moving body at given epochs, and their partial derivatives.

Times are seconds of TT (equal in rate to TAI) past the epoch of the arc; positions are GCRS metres, velocities and
accelerations their time derivatives; components stand on the last axis, parameters after them.
"""

from __future__ import annotations

from typing import NamedTuple, Protocol

import numpy as np


class States(NamedTuple):
    """Kinematics at n epochs: position [m], velocity [m/s], acceleration [m/s2], each (..., n, 3), GCRS."""

    position: np.ndarray
    velocity: np.ndarray
    acceleration: np.ndarray


class Path(Protocol):
    """A motion with its parameters fixed: what the observation equation needs of an emitter or a receiver."""

    def states(self, times_s: np.ndarray) -> States:
        """Return the states at `times_s`, shape (n,)."""
        ...

    def partials(self, times_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return d position / d parameters and d velocity / d parameters, each (n, 3, p)."""
        ...


class Motion(Protocol):
    """A kind of motion bound to one arc; `at` fixes its parameters."""

    parameter_names: tuple[str, ...]
    scales: np.ndarray

    def at(self, parameters: np.ndarray) -> Path:
        """Return the path for `parameters`, shape (p,)."""
        ...
