"""Earth-fixed motions turned to the GCRS: states and partial derivatives on the rotating Earth."""

from __future__ import annotations

import numpy as np

from shiftfix.physics.motion.states import States

_STEP_S = 1800.0


class TurningEarth:
    """The Earth's rotation with its angular velocity, for earth-fixed motions.

    The angular velocity in the GCRS is constant to 1e-11 of itself a second (precession, nutation, polar motion): it is
    taken from the rotation between times half an hour apart, exactly for a constant one, and runs linearly between
    the middles; the remaining error is below 1e-7 m/s on the ground.

    Parameters
    ----------
    frame : EarthFrame
        Gives `rotation(times_s)`, ITRS to GCRS, on its `span_s`.
    """

    def __init__(self, frame):
        self.frame = frame
        first, last = float(frame.span_s[0]), float(frame.span_s[1])
        last = max(last, first + 60.0)
        edges = np.linspace(first, last, 3 + int((last - first) / _STEP_S))
        rotation = frame.rotation(edges)
        turn = np.matmul(rotation[1:], rotation[:-1].transpose(0, 2, 1))
        axis = 0.5 * np.stack(
            [turn[:, 2, 1] - turn[:, 1, 2], turn[:, 0, 2] - turn[:, 2, 0], turn[:, 1, 0] - turn[:, 0, 1]], axis=1
        )
        sine = np.sqrt(np.einsum("ki,ki->k", axis, axis))
        step = np.diff(edges)
        velocity = axis * (np.arcsin(np.minimum(sine, 1.0)) / (sine * step))[:, None]
        ends = 1.5 * velocity[[0, -1]] - 0.5 * velocity[[1, -2]]
        self._knots = np.concatenate([edges[:1], 0.5 * (edges[1:] + edges[:-1]), edges[-1:]])
        self._velocity = np.concatenate([ends[:1], velocity, ends[1:]])

    def angular_velocity(self, times_s: np.ndarray) -> np.ndarray:
        """Return the angular velocity of the Earth in the GCRS, (n, 3) [rad/s]."""
        return np.stack([np.interp(times_s, self._knots, v) for v in self._velocity.T], axis=1)

    def states(
        self,
        times_s: np.ndarray,
        position: np.ndarray,
        velocity: np.ndarray | None = None,
        acceleration: np.ndarray | None = None,
    ) -> States:
        """Return GCRS states of earth-fixed ones.

        Parameters
        ----------
        times_s : ndarray (n,)
            Times past the epoch of the arc [s].
        position, velocity, acceleration : ndarray (..., n, 3) or None
            In ITRS axes, relative to the ground [m], [m/s], [m/s2]; None stands for zero.
        """
        rotation = self.frame.rotation(times_s)
        spin = self.angular_velocity(times_s)
        turned = _turn(rotation, position)
        carried = _cross(spin, turned)
        centripetal = _cross(spin, carried)
        if velocity is None:
            return States(turned, carried, centripetal)
        moving = _turn(rotation, velocity)
        total = centripetal + 2.0 * _cross(spin, moving)
        if acceleration is not None:
            total += _turn(rotation, acceleration)
        return States(turned, moving + carried, total)

    def partials(
        self, times_s: np.ndarray, d_position: np.ndarray, d_velocity: np.ndarray | None
    ) -> tuple[np.ndarray, np.ndarray]:
        """Return the derivatives of GCRS position and velocity for those of the earth-fixed ones, (n, 3, p) each."""
        rotation = self.frame.rotation(times_s)
        turned = np.matmul(rotation, d_position)
        x, y, z = (w[:, None] for w in self.angular_velocity(times_s).T)
        carried = np.empty_like(turned)
        carried[:, 0] = y * turned[:, 2] - z * turned[:, 1]
        carried[:, 1] = z * turned[:, 0] - x * turned[:, 2]
        carried[:, 2] = x * turned[:, 1] - y * turned[:, 0]
        if d_velocity is not None:
            carried += np.matmul(rotation, d_velocity)
        return turned, carried


def _cross(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Return the cross product; a third of the time of numpy's for a few thousand rows."""
    product = np.empty(np.broadcast_shapes(a.shape, b.shape))
    for i, j, k in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        product[..., i] = a[..., j] * b[..., k] - a[..., k] * b[..., j]
    return product


def _turn(rotation: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    """Return rotation (n, 3, 3) times vectors (..., n, 3)."""
    return np.matmul(rotation, np.asarray(vectors, dtype=float)[..., None])[..., 0]
