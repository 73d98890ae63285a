"""Smooth oscillator models (constant, drift, random walk) from looks at known emitters, with their covariance."""

from __future__ import annotations

import numpy as np
import pandas as pd

from shiftfix.api import smooth_offsets


def smooth_rows(name, looks, params, receiver, epoch):
    """Return the offset history of one station under a smooth model: one row a stretch of at most a minute.

    The error that all rows of the station share (rest frequency of the known emitters, the constant itself) stands in
    `common_sigma_1`, the rest in `offset_sigma_1`.
    """
    middle_ns = (looks["tag_a"] + looks["tag_b"]) // 2
    times = (middle_ns - epoch) * 1e-9
    first, last = float(times.min()), float(times.max())
    count = int(np.clip(np.ceil((last - first) / 60.0), 1, 2000))
    edges = np.linspace(first - 30.0, last + 30.0, count + 1)
    grid = 0.5 * (edges[1:] + edges[:-1])
    answer = smooth_offsets(times, looks["rate"], looks["sigma"], grid, params.model, params.random_walk)
    common = float(np.hypot(answer.common_sigma, looks["rest_sigma"]))
    frame = pd.DataFrame(
        {
            "station_id": name,
            "time_tai_ns": epoch + np.round(grid * 1e9).astype(np.int64),
            "interval_s": np.diff(edges),
            "offset_1": answer.values,
            "offset_sigma_1": answer.own_sigma,
            "common_sigma_1": common,
            "known_emitters_1": len(np.unique(looks["emitter"])),
        }
    )
    words = [
        f"station {name}: offset {answer.values[len(grid) // 2]:.4e} +/- {np.hypot(common, answer.own_sigma.max()):.1e} in mid-span "
        f"({params.model}), residual spread {answer.scale:.2f} x stated, {answer.rejected} of {len(times)} looks left out"
    ]
    return frame, words
