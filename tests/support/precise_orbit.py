"""Error of a solution against a precise orbit that the solution did not use."""

from __future__ import annotations

import numpy as np

from shiftfix.api import bundled_earth_orientation, earth_frame, sampled_path


def against(solution, ephemeris, satellite):
    """Return position error [m], velocity error [m/s] and the normalised error squared of the six-state."""
    frame, _ = earth_frame(solution.epoch_tai_ns, (-12000.0, 12000.0), bundled_earth_orientation())
    truth = sampled_path(ephemeris, satellite, frame, solution.epoch_tai_ns).states(np.zeros(1))
    position = solution.position_m - truth.position[0]
    velocity = solution.velocity_m_s - truth.velocity[0]
    error = np.concatenate([position, velocity])
    # Scaled before it is solved: metres and millimetres a second differ by thousands.
    scale = np.sqrt(np.diag(solution.covariance))
    normalised = error / scale
    correlation = solution.covariance / np.outer(scale, scale)
    return (
        float(np.linalg.norm(position)),
        float(np.linalg.norm(velocity)),
        float(normalised @ np.linalg.solve(correlation, normalised)),
    )
