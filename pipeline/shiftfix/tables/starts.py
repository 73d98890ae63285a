"""StartTable: candidate states from a search, with weights, for one declared motion."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np

from shiftfix.tables.schema import Column, Table


@dataclass(frozen=True, eq=False, kw_only=True)
class StartTable(Table):
    """Candidate parameter vectors of one motion, best first.

    Parameters
    ----------
    motion : str
        Name of the motion, as registered by a plugin.
    motion_params : mapping
        Its options, as in the pipeline file.
    epoch_tai_ns : int
        Epoch to which the parameters refer.
    parameter_names : tuple of str
        Names with unit suffix, in the order of `parameters`.
    parameters : ndarray, shape (rows, p)
        One candidate a row.
    rest_frequency_hz, rest_frequency_sigma_hz : float
        Declared prior of the rest frequency; NaN when none.
    findings : tuple of str
        What the search saw.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("weight_1", "float", "relative weight, sum 1", minimum=0.0),
        Column("rms_1", "float", "root mean square of the normalised residuals", minimum=0.0),
        Column("origin", "text", "where the candidate came from", default="search"),
    )
    motion: str = ""
    motion_params: Mapping[str, Any] = field(default_factory=dict)
    epoch_tai_ns: int = 0
    parameter_names: tuple[str, ...] = ()
    parameters: np.ndarray = field(default_factory=lambda: np.empty((0, 0)))
    rest_frequency_hz: float = float("nan")
    rest_frequency_sigma_hz: float = float("nan")
    findings: tuple[str, ...] = ()
