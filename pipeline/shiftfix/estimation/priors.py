"""Prior statements on motion parameters as whitened rows: residuals and their partial derivatives."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from shiftfix.physics import geodesy


class Prior(Protocol):
    """A statement about the motion parameters with a Gaussian error."""

    def rows(self, parameters: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return residuals (k,) = (statement - value) / sigma and d residuals / d parameters (k, p)."""
        ...

    def batch(self, parameters: np.ndarray) -> np.ndarray:
        """Return the residuals of many parameter vectors, (B, p) -> (B, k)."""
        ...


@dataclass(frozen=True)
class ValuePrior:
    """One parameter is `mean` +/- `sigma` (SI units of the parameter)."""

    index: int
    mean: float
    sigma: float

    def rows(self, parameters: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        jacobian = np.zeros((1, parameters.size))
        jacobian[0, self.index] = 1.0 / self.sigma
        return np.array([(parameters[self.index] - self.mean) / self.sigma]), jacobian

    def batch(self, parameters: np.ndarray) -> np.ndarray:
        return (parameters[:, self.index : self.index + 1] - self.mean) / self.sigma


@dataclass(frozen=True)
class HeightPrior:
    """The ellipsoidal height of an ITRS position (parameters 0 to 2, metres) is `mean` +/- `sigma` metres."""

    mean: float
    sigma: float

    def rows(self, parameters: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        latitude, longitude, height = geodesy.geodetic_from_itrs(parameters[:3])
        up = np.array([np.cos(latitude) * np.cos(longitude), np.cos(latitude) * np.sin(longitude), np.sin(latitude)])
        jacobian = np.zeros((1, parameters.size))
        jacobian[0, :3] = up / self.sigma
        return np.array([(float(height) - self.mean) / self.sigma]), jacobian

    def batch(self, parameters: np.ndarray) -> np.ndarray:
        return (geodesy.geodetic_from_itrs(parameters[:, :3])[2][:, None] - self.mean) / self.sigma


def stacked(priors: Sequence[Prior], parameters: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the rows of all priors: residuals (k,) and partials (k, p); empty when there are none."""
    if not priors:
        return np.empty(0), np.empty((0, parameters.size))
    parts = [prior.rows(parameters) for prior in priors]
    return np.concatenate([r for r, _ in parts]), np.vstack([j for _, j in parts])
