"""Solution: the answer with everything that defends it; every field is always there."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np

from shiftfix.tables.schema import Column, Table

VERDICTS: Mapping[str, int] = {
    "fix": 0,
    "not observable": 5,
    "not locatable by this method": 5,
    "not converged": 5,
    "quality failed": 5,
    "ambiguous": 6,
}
"""Verdict to exit code of the run."""

REMEDIES: Mapping[str, str] = {
    "fix": "",
    "ambiguous": "a pass or station with another geometry, a tighter prior of height, region or emitter drift, or knowledge "
    "from elsewhere",
    "not observable": "a station far from the others, another pass or a longer arc, or a prior (rest frequency, height, region)",
    "not locatable by this method": "a receiver that moves (ship, aircraft, satellite), or another kind of measurement",
    "not converged": "a longer arc or more stations; check that the declared motion fits the emitter",
    "quality failed": "look into residuals.csv: the declared motion, sideband and unit of each log, time scale and place of "
    "each station, more than one emitter",
}
"""Verdict to what would help, in words."""


@dataclass(frozen=True)
class Parameter:
    """One parameter of the solution: name with unit suffix, value, 1-sigma (None when not estimated) and its state.

    `kind` is estimated, fixed or considered; `informed_by` is data or prior.
    """

    name: str
    value: float
    sigma: float | None
    kind: str = "estimated"
    informed_by: str = "data"


@dataclass(frozen=True)
class StationResult:
    """One station in the solution; offsets are fractional, at the solution epoch, relative to the frequency datum."""

    station_id: str
    offset: float | None
    offset_sigma: float | None
    drift_per_s: float | None
    residual_rms_hz: float | None
    rows_used: int
    rows_rejected: int


@dataclass(frozen=True)
class Alternative:
    """Another state that fits: same frame, epoch and order as the solution, its odds, rms and place near the Earth."""

    state: Mapping[str, Any]
    odds: float
    rms: float
    geodetic: Mapping[str, Any] | None = None


@dataclass(frozen=True, eq=False, kw_only=True)
class Solution(Table):
    """Answer of a fix; `rows` holds the residuals, one row an observation, used or not.

    Refused solutions have the same fields, None where there is no value.

    Parameters
    ----------
    verdict : str
        A key of `VERDICTS`.
    verdict_text : str
        The verdict in one plain sentence, with the unobservable direction when refused.
    motion : str
    epoch_tai_ns : int
    epoch_utc : str
        The same epoch as UTC text ending in Z.
    frame : {"GCRS", "ITRS"}
    position_m, velocity_m_s : ndarray, shape (3,), or None
    covariance : ndarray, shape (6, 6), or None
        Of position and velocity, SI units; with `covariance_reason` when None.
    covariance_kind : str
        formal, scaled or widened: what was done to the formal covariance.
    geodetic : mapping or None
        latitude_deg, longitude_deg, height_m, ellipse_95 and ellipse_50 {semi_major_m, semi_minor_m, azimuth_deg};
        height_sigma_m; for a motion tied to the ground also speed_m_s, course_deg (clockwise from north) and climb_m_s.
    rest_frequency_hz, rest_frequency_sigma_hz, rest_frequency_drift_hz_s : float or None
    frequency_datum : str
        Which reference defines frequency.
    stations : tuple of StationResult
    parameters : tuple of Parameter
    chi_square : float or None
    degrees_of_freedom : int
    alternatives : tuple of Alternative
    odds : float or None
        Odds of the reported state among all listed.
    converged, rank_full, at_bound, second_minimum : bool
    condition : float or None
        Condition number of the scaled problem.
    iterations : int
    budget : mapping
        Parts of the error, 1-sigma of position in metres and velocity in m/s by source.
    findings, warnings, cautions : tuple of str
    unobservable : tuple of str
        Directions that the data do not see, in words.
    """

    columns: ClassVar[tuple[Column, ...]] = (
        Column("station_id", "text", "station"),
        Column("emitter_id", "text", "emitter", default=""),
        Column("time_tai_ns", "int", "reception time"),
        Column("interval_s", "float", "count interval"),
        Column("received_frequency_hz", "float", "as logged"),
        Column("model_frequency_hz", "float", "as the solution predicts", nullable=True),
        Column("residual_hz", "float", "logged minus predicted", nullable=True),
        Column("normalised_residual_1", "float", "whitened residual", nullable=True),
        Column("sigma_hz", "float", "1-sigma used", nullable=True),
        Column("weight_1", "float", "robust weight", nullable=True),
        Column("elevation_deg", "float", "elevation of the emitter at the station", nullable=True),
        Column("flag", "text", "use, downweight or reject"),
        Column("reason", "text", "reason of the flag", default=""),
        Column("source", "text", "file", default=""),
        Column("row_number", "int", "line", default=0),
    )
    verdict: str = "not converged"
    verdict_text: str = ""
    motion: str = ""
    epoch_tai_ns: int = 0
    epoch_utc: str = ""
    frame: str = "GCRS"
    position_m: np.ndarray | None = None
    velocity_m_s: np.ndarray | None = None
    covariance: np.ndarray | None = None
    covariance_reason: str = ""
    covariance_kind: str = "formal"
    geodetic: Mapping[str, Any] | None = None
    rest_frequency_hz: float | None = None
    rest_frequency_sigma_hz: float | None = None
    rest_frequency_drift_hz_s: float | None = None
    frequency_datum: str = ""
    stations: tuple[StationResult, ...] = ()
    parameters: tuple[Parameter, ...] = ()
    chi_square: float | None = None
    degrees_of_freedom: int = 0
    alternatives: tuple[Alternative, ...] = ()
    odds: float | None = None
    converged: bool = False
    rank_full: bool = False
    at_bound: bool = False
    second_minimum: bool = False
    condition: float | None = None
    iterations: int = 0
    budget: Mapping[str, Any] = field(default_factory=dict)
    findings: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()
    unobservable: tuple[str, ...] = ()

    @property
    def exit_code(self) -> int:
        """Exit code that this verdict gives a run."""
        return VERDICTS[self.verdict]
