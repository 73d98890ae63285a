"""Simple emitters in closed form: uniform and accelerated straight motion, one for each row."""

import numpy as np

from shiftfix.physics.motion.states import States


class UniformPaths:
    """Row i moves uniformly from position[i] at time zero with velocity[i]."""

    def __init__(self, position, velocity):
        self.position, self.velocity = np.asarray(position, float), np.asarray(velocity, float)

    def states(self, times_s):
        moved = self.position + self.velocity * np.asarray(times_s)[:, None]
        return States(moved, np.broadcast_to(self.velocity, moved.shape), np.zeros_like(moved))


class AcceleratedPath:
    """One body with constant acceleration."""

    def __init__(self, position, velocity, acceleration):
        self.start = [np.asarray(a, float) for a in (position, velocity, acceleration)]

    def states(self, times_s):
        t = np.atleast_1d(times_s)[:, None]
        x, v, a = self.start
        return States(x + v * t + 0.5 * a * t**2, v + a * t, np.broadcast_to(a, (t.size, 3)))


def random_directions(random, count):
    """Return unit vectors spread evenly over the sphere, (count, 3)."""
    out = random.standard_normal((count, 3))
    return out / np.linalg.norm(out, axis=1)[:, None]


def random_velocities(random, count, largest_beta):
    """Return velocities over c with sizes spread evenly on a logarithmic scale from 1e-7 to `largest_beta`."""
    size = np.exp(random.uniform(np.log(1e-7), np.log(largest_beta), count))
    return size[:, None] * random_directions(random, count)
