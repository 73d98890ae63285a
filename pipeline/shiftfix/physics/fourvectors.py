"""Four-vectors in one convention: signature (-, +, +, +), components (ct, x, y, z) in metres; frequency is -k.u.

Speeds are given as beta = v/c. The wave four-vector of a wave of angular frequency w travelling along n is
(w/c)(1, n); its contraction with an observer's four-velocity is the frequency that this observer measures.
"""

from __future__ import annotations

import numpy as np

METRIC = np.diag([-1.0, 1.0, 1.0, 1.0])


def contraction(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Return a.b of four-vectors (..., 4)."""
    a, b = np.asarray(a, float), np.asarray(b, float)
    return np.einsum("...i,...i->...", a[..., 1:], b[..., 1:]) - a[..., 0] * b[..., 0]


def four_velocity(beta: np.ndarray) -> np.ndarray:
    """Return the four-velocity over c, gamma (1, beta), of velocities (..., 3)."""
    beta = np.asarray(beta, float)
    gamma = 1.0 / np.sqrt(1.0 - np.einsum("...i,...i->...", beta, beta))
    return gamma[..., None] * np.concatenate([np.ones((*beta.shape[:-1], 1)), beta], axis=-1)


def wave_four_vector(frequency: np.ndarray, direction: np.ndarray) -> np.ndarray:
    """Return the wave four-vector in units of the frequency, f (1, n), of unit directions (..., 3)."""
    direction = np.asarray(direction, float)
    return np.asarray(frequency, float)[..., None] * np.concatenate(
        [np.ones((*direction.shape[:-1], 1)), direction], axis=-1
    )


def observed_frequency(wave: np.ndarray, velocity: np.ndarray) -> np.ndarray:
    """Return -k.u: the frequency of a wave for an observer of four-velocity u (over c)."""
    return -contraction(wave, velocity)


def boost(beta: np.ndarray) -> np.ndarray:
    """Return the matrix (4, 4) of the boost into a frame that moves with velocity `beta` (3,)."""
    beta = np.asarray(beta, float)
    square = float(beta @ beta)
    gamma = 1.0 / np.sqrt(1.0 - square)
    out = np.eye(4)
    out[0, 0] = gamma
    out[0, 1:] = out[1:, 0] = -gamma * beta
    if square > 0:
        # (gamma - 1)/beta**2 without cancellation at small beta.
        out[1:, 1:] += gamma**2 / (1.0 + gamma) * np.outer(beta, beta)
    return out


def rotation(matrix: np.ndarray) -> np.ndarray:
    """Return a spatial rotation (3, 3) as a matrix (4, 4) on four-vectors."""
    out = np.eye(4)
    out[1:, 1:] = matrix
    return out
