"""Two-body motion in universal variables, and Keplerian elements; vectorised over any leading axes."""

from __future__ import annotations

import numpy as np


def _stumpff(z: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the Stumpff functions c2 and c3."""
    small = np.abs(z) < 1e-2
    safe = np.where(small, 1.0, z)
    root = np.sqrt(np.abs(safe))
    with np.errstate(over="ignore", invalid="ignore"):
        positive = safe > 0
        c2 = np.where(positive, (1.0 - np.cos(root)) / safe, (np.cosh(np.where(positive, 0.0, root)) - 1.0) / -safe)
        c3 = np.where(positive, (root - np.sin(root)) / root**3, (np.sinh(np.where(positive, 0.0, root)) - root) / root**3)
    c2_series = 1 / 2 - z / 24 + z**2 / 720 - z**3 / 40320
    c3_series = 1 / 6 - z / 120 + z**2 / 5040 - z**3 / 362880
    return np.where(small, c2_series, c2), np.where(small, c3_series, c3)


def propagate(
    position: np.ndarray, velocity: np.ndarray, times_s: np.ndarray, gm: float
) -> tuple[np.ndarray, np.ndarray]:
    """Return position and velocity after `times_s`; shapes broadcast: (..., 3) with (...,).

    Notes
    -----
    Universal Kepler equation by a safeguarded Newton iteration to 1e-13 of the anomaly (Battin 1999, sec. 4.5).
    """
    position, velocity = np.asarray(position, float), np.asarray(velocity, float)
    times = np.asarray(times_s, float)
    shape = np.broadcast_shapes(position.shape[:-1], velocity.shape[:-1], times.shape)
    r0 = np.sqrt(np.einsum("...i,...i->...", position, position))
    root = np.sqrt(gm)
    sigma = np.einsum("...i,...i->...", position, velocity) / root
    alpha = 2.0 / r0 - np.einsum("...i,...i->...", velocity, velocity) / gm
    r0, sigma, alpha, t = (np.broadcast_to(a, shape) for a in (r0, sigma, alpha, times))
    # Start: mean motion for ellipses (whole turns included), the rectilinear guess otherwise.
    chi = np.where(alpha * r0 > 1e-6, root * np.abs(alpha) * t, root * t / r0)
    # Far out on a hyperbola the anomaly grows with the logarithm of time (Vallado, algorithm 8; from memory).
    open_axis = np.sqrt(1.0 / np.where(alpha < 0.0, -alpha, 1.0))
    sign = np.where(t < 0.0, -1.0, 1.0)
    below = sigma * root + sign * root * open_axis * (1.0 - r0 * alpha)
    ratio = -2.0 * gm * alpha * t / np.where(below == 0.0, 1.0, below)
    far = sign * open_axis * np.log(np.maximum(ratio, 1.0))
    chi = np.where((alpha * r0 < -1e-6) & (ratio > 3.0) & (np.abs(far) < np.abs(chi)), far, chi)
    bound = 10.0 / np.sqrt(np.maximum(np.abs(alpha), 1e-300))
    for _ in range(40):
        square = chi * chi
        z = alpha * square
        c2, c3 = _stumpff(z)
        f = sigma * square * c2 + (1.0 - alpha * r0) * chi * square * c3 + r0 * chi - root * t
        r = square * c2 + sigma * chi * (1.0 - z * c3) + r0 * (1.0 - z * c2)
        step = np.clip(-f / np.where(r > 0, r, np.inf), -bound, bound)
        chi = chi + step
        if np.abs(step).max(initial=0.0) <= 1e-13 * np.abs(chi).max(initial=1.0):
            break
    square = chi * chi
    z = alpha * square
    c2, c3 = _stumpff(z)
    r = square * c2 + sigma * chi * (1.0 - z * c3) + r0 * (1.0 - z * c2)
    f = 1.0 - square * c2 / r0
    g = t - chi * square * c3 / root
    f_dot = root / (r * r0) * chi * (z * c3 - 1.0)
    g_dot = 1.0 - square * c2 / r
    return (
        f[..., None] * position + g[..., None] * velocity,
        f_dot[..., None] * position + g_dot[..., None] * velocity,
    )


def elements_from_state(position: np.ndarray, velocity: np.ndarray, gm: float) -> dict[str, np.ndarray]:
    """Return osculating elements: semi_major_axis_m, eccentricity_1, inclination_rad, node_rad, argument_rad, anomaly_rad.

    Angles in 0 .. 2 pi; the anomaly is the true one. For circular or equatorial orbits node and argument follow the
    usual limits (x axis, ascending node) and carry no information.
    """
    r, v = np.asarray(position, float), np.asarray(velocity, float)
    radius = np.linalg.norm(r, axis=-1)
    h = np.cross(r, v)
    node = np.stack([-h[..., 1], h[..., 0], np.zeros_like(radius)], -1)
    node_size = np.linalg.norm(node, axis=-1)
    node = np.where(node_size[..., None] > 1e-12 * np.linalg.norm(h, axis=-1)[..., None], node, np.array([1.0, 0.0, 0.0]))
    node = node / np.linalg.norm(node, axis=-1)[..., None]
    e = np.cross(v, h) / gm - r / radius[..., None]
    eccentricity = np.linalg.norm(e, axis=-1)
    normal = h / np.linalg.norm(h, axis=-1)[..., None]
    third = np.cross(normal, node)
    dot = lambda a, b: np.einsum("...i,...i->...", a, b)  # noqa: E731
    argument = np.where(eccentricity > 1e-12, np.arctan2(dot(e, third), dot(e, node)), 0.0)
    latitude = np.arctan2(dot(r, third), dot(r, node))
    turn = 2.0 * np.pi
    return {
        "semi_major_axis_m": 1.0 / (2.0 / radius - dot(v, v) / gm),
        "eccentricity_1": eccentricity,
        "inclination_rad": np.arctan2(np.hypot(h[..., 0], h[..., 1]), h[..., 2]),
        "node_rad": np.arctan2(node[..., 1], node[..., 0]) % turn,
        "argument_rad": argument % turn,
        "anomaly_rad": (latitude - argument) % turn,
    }
