"""A motion bound to an arc, with what search and report need beyond the path: candidates, priors, frame of report."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from shiftfix.estimation.receivers import Receiver
from shiftfix.estimation.search import SearchData
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.motion.states import Motion, Path


@dataclass(frozen=True, eq=False)
class ArcScene:
    """What a motion may know of the arc before any data: epoch, span, Earth frame and receivers.

    Parameters
    ----------
    epoch_tai_ns : int
        Arc epoch; all times are seconds of TT past it.
    span_s : tuple of float
        First and last time at which the emitter's state may be asked for.
    frame : EarthFrame
    receivers : tuple of Receiver
    """

    epoch_tai_ns: int
    span_s: tuple[float, float]
    frame: EarthFrame
    receivers: tuple[Receiver, ...]


@dataclass(frozen=True, eq=False)
class BoundMotion:
    """One motion on one arc.

    Parameters
    ----------
    name : str
    motion : Motion
        Gives paths and partial derivatives.
    candidates : callable
        `candidates(data: SearchData) -> (B, p)` parameter vectors to start from.
    states_batch : callable
        `states_batch(parameters (B, p), times_s (n,)) -> position, velocity (B, n, 3)` in GCRS, for the search.
    frame : {"GCRS", "ITRS"}
        Frame in which position and velocity are reported.
    priors : tuple of Prior
    earth : EarthFrame
    height_known : bool
        Whether a prior of the height was declared: without one, a mirror in height is possible.
    scanned : tuple of int
        Parameters that a derivative cannot lead far (times of turns: only the count that holds the turn feels it); they
        are scanned before each fit.
    """

    name: str
    motion: Motion
    candidates: Callable[[SearchData], np.ndarray]
    states_batch: Callable[[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray]]
    frame: str
    earth: EarthFrame
    priors: Sequence = field(default=())
    height_known: bool = True
    scanned: tuple[int, ...] = ()

    def state(self, path: Path, time_s: float = 0.0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return position [m], velocity [m/s] in `frame` at a time, and d(position, velocity) / d parameters (6, p)."""
        times = np.array([time_s])
        position, velocity, _ = path.states(times)
        d_position, d_velocity = path.partials(times)
        if self.frame == "GCRS":
            return position[0], velocity[0], np.vstack([d_position[0], d_velocity[0]])
        if not any(name.endswith("_m_s") for name in self.motion.parameter_names):
            # At rest on the ground: exactly zero, not what two rotations leave of it.
            rotation = self.earth.rotation(times)[0]
            at_rest = np.vstack([rotation.T @ d_position[0], np.zeros_like(d_position[0])])
            return rotation.T @ position[0], np.zeros(3), at_rest
        rotation = self.earth.rotation(times)[0]
        fixed_position, fixed_velocity = self.earth.to_itrs(times, position, velocity)
        # The Earth-fixed velocity is R^T (v - omega x r): its partials follow from those of r and v with the spin
        # taken from two epochs of the rotation itself.
        step = 0.5
        before, after = self.earth.rotation(np.array([time_s - step, time_s + step]))
        spin = (after - before) / (2 * step)
        jacobian = np.vstack([rotation.T @ d_position[0], rotation.T @ d_velocity[0] + spin.T @ d_position[0]])
        return fixed_position[0], fixed_velocity[0], jacobian
