"""What the fit's covariance means: error ellipses, local axes, directions in words."""

from __future__ import annotations

import numpy as np
from scipy.stats import chi2

from shiftfix.estimation.fit import Fit


def ellipse(covariance_2x2: np.ndarray, level: float) -> dict[str, float]:
    """Return the ellipse of a probability level of a horizontal covariance (east, north) [m2].

    Returns
    -------
    dict
        semi_major_m, semi_minor_m and azimuth_deg of the major axis, clockwise from north, 0 to 180.
    """
    values, vectors = np.linalg.eigh(covariance_2x2)
    scale = np.sqrt(chi2.ppf(level, 2) * np.maximum(values, 0.0))
    east, north = vectors[:, 1]
    return {
        "semi_major_m": float(scale[1]),
        "semi_minor_m": float(scale[0]),
        "azimuth_deg": float(np.degrees(np.arctan2(east, north)) % 180.0),
    }


def local_axes(position: np.ndarray, velocity: np.ndarray) -> np.ndarray:
    """Return radial, along-track and cross-track unit vectors as rows."""
    radial = position / np.linalg.norm(position)
    cross = np.cross(position, velocity)
    cross = cross / max(np.linalg.norm(cross), 1e-300)
    return np.array([radial, np.cross(cross, radial), cross])


def describe_direction(vector: np.ndarray, axes: np.ndarray, names: tuple[str, str, str]) -> str:
    """Return a direction in words: shares of named axes (squares, sum 100 %), largest first, those below 1 % left out."""
    parts = axes @ vector
    size = np.linalg.norm(parts)
    if size == 0:
        return "no direction"
    shares = (parts / size) ** 2
    order = [k for k in np.argsort(-shares, kind="stable") if shares[k] > 0.01]
    if len(order) == 1 or shares[order[0]] > 0.985:
        return names[order[0]]
    return ", ".join(f"{shares[k]:.0%} {names[k]}" for k in order).replace("%", " %")


def nearest_distance(fit: Fit) -> float:
    """Return the shortest distance between emitter and receivers over the arc [m]."""
    return float(fit.forward.links(fit.path).distance_m.min())
