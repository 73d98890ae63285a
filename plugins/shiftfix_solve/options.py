"""Parameters of the nodes and motions of this plugin, with units, bounds and meaning."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import Quantity, param


@dataclass(frozen=True)
class SearchParams:
    """Parameters of `solve.search`."""

    motion: str = param(
        "motion of the emitter: orbit, surface, fixed, polynomial or one from a plugin", motion="name"
    )
    motion_options: dict = param("options of that motion, as a table", default={}, motion="options")
    emitter: str = param("emitter to solve for; needed when the table holds several", default="")
    rest_frequency: Quantity | None = param(
        "declared rest frequency with its 1-sigma", default=None, unit="Hz", minimum=0.0, sigma=True
    )
    station_model: str = param(
        "station oscillators in the search", default="constant", choices=("constant", "drift", "calibrated")
    )
    emitter_model: str = param("emitter's oscillator in the search", default="constant", choices=("constant", "drift"))
    emitter_drift_sigma: float = param("1-sigma of the emitter's drift", default=3e-9, unit="1/s", minimum=0.0)
    earth_orientation: str = param(
        "table: refuse times outside it; degraded: UT1 = UTC, no polar motion, error widened",
        default="table",
        choices=("table", "degraded"),
    )
    keep: int = param("largest number of starting states handed on", default=16, minimum=1, maximum=200)


@dataclass(frozen=True)
class FixParams:
    """Parameters of `solve.fix`."""

    emitter: str = param("emitter to solve for; needed when the table holds several", default="")
    motion: str = param("motion to fit; empty takes that of the starting states", default="", motion="name")
    station_model: str = param(
        "station oscillators: constant or drift; random_walk; piecewise: one offset an arc; calibrated: from `offsets` alone",
        default="constant",
        choices=("constant", "drift", "random_walk", "piecewise", "calibrated"),
    )
    emitter_model: str = param("emitter's oscillator", default="constant", choices=("constant", "drift", "random_walk"))
    station_drift_sigma: float = param("prior 1-sigma of a station's drift", default=1e-12, unit="1/s", minimum=0.0)
    emitter_drift_sigma: float = param("prior 1-sigma of the emitter's drift", default=3e-9, unit="1/s", minimum=0.0)
    station_walk: float = param(
        "random walk of a station's frequency, 1 sigma after one second", default=1e-11, unit="1", minimum=0.0
    )
    emitter_walk: float = param(
        "random walk of the emitter's frequency, 1 sigma after one second", default=1e-10, unit="1", minimum=0.0
    )
    emitter_steps: tuple[str, ...] = param("UTC times at which the emitter's frequency may step", default=())
    step_sigma: float = param("prior 1-sigma of such a step", default=1e-6, unit="1", minimum=0.0)
    datum: str = param("auto, or the station whose reference defines frequency", default="auto")
    noise: str = param(
        "declared: keep the stated weights, widen the error when residuals contradict them; estimated: re-weight by the "
        "noise that the residuals show",
        default="declared",
        choices=("declared", "estimated"),
    )
    loss: str = param(
        "robust: gates and weights; plain: every row at full weight", default="robust", choices=("robust", "plain")
    )
    keep_all: bool = param("give every row its full weight, whatever its residual (as `loss = plain`)", default=False)
    downweight_beyond: float = param(
        "normalised residual beyond which a row loses weight", default=3.0, minimum=1.0, maximum=100.0
    )
    reject_beyond: float = param(
        "normalised residual beyond which a row is rejected", default=6.0, minimum=2.0, maximum=1000.0
    )
    elevation_mask: float = param(
        "rows of ground stations below this elevation are left out",
        default=-90.0,
        unit="deg",
        minimum=-90.0,
        maximum=80.0,
    )
    elevation_weighting: str = param(
        "none; sine: the 1-sigma of rows of ground stations grows as 1/sin(elevation)",
        default="none",
        choices=("none", "sine"),
    )
    troposphere: str = param(
        "none, or the delay of a standard atmosphere", default="standard", choices=("none", "standard")
    )
    zenith_delay_sigma: float = param("considered error of the zenith delay", default=0.05, unit="m", minimum=0.0)
    vertical_tec_sigma: float = param(
        "considered vertical electron content, in 1e16 per square metre", default=0.0, minimum=0.0
    )
    loading_sigma: float = param(
        "considered height of ground stations that varies within hours (ocean loading, remainder of the tide)",
        default=0.02,
        unit="m",
        minimum=0.0,
    )
    force_model_sigma: float = param(
        "considered unmodelled accelerations of an orbit, as a multiple of the omitted gravity field",
        default=1.0,
        minimum=0.0,
    )
    emitter_antenna_sigma: float = param(
        "considered distance of a satellite's antenna from its centre of mass", default=1.0, unit="m", minimum=0.0
    )
    emitter_flicker: float = param(
        "considered slow variations of the emitter's frequency that its model leaves out, as an amplitude",
        default=0.0,
        unit="1",
        minimum=0.0,
    )
    common_time_sigma: float = param(
        "considered time-tag error that all stations share", default=0.0, unit="s", minimum=0.0
    )
    consider_time: bool = param("consider the time-tag sigma of each station", default=True)
    consider_coordinates: bool = param("consider the coordinate sigma of each station", default=True)
    odds_threshold: float = param(
        "odds of the best solution below which the answer is ambiguous", default=0.95, minimum=0.5, maximum=1.0
    )
    earth_orientation: str = param(
        "table: refuse times outside it; degraded: UT1 = UTC, no polar motion, error widened",
        default="table",
        choices=("table", "degraded"),
    )


@dataclass(frozen=True)
class OrbitOptions:
    """Options of the motion `orbit`."""

    radiation_scale_sigma: float = param(
        "1-sigma of the radiation-pressure scale about 1 (area and mass are unknown); 0 keeps the nominal one",
        default=0.5,
        minimum=0.0,
    )
    drag_scale_sigma: float = param(
        "1-sigma of the drag scale about 1; 0 keeps the nominal one", default=0.0, minimum=0.0
    )
    drag: bool = param("whether air drag acts", default=True)


@dataclass(frozen=True)
class SearchRegion:
    """Where a search begins: options of every motion near the ground."""

    centre_latitude: float | None = param(
        "centre of the search region", default=None, unit="deg", minimum=-90.0, maximum=90.0
    )
    centre_longitude: float | None = param(
        "centre of the search region", default=None, unit="deg", minimum=-360.0, maximum=360.0
    )
    radius: float | None = param(
        "radius of the search region; default: from the stations, or what all receivers see",
        default=None,
        unit="m",
        minimum=1.0,
    )


@dataclass(frozen=True)
class SurfaceOptions(SearchRegion):
    """Options of the motion `surface`."""

    height: Quantity = param(
        "ellipsoidal height and its 1-sigma",
        default=Quantity(0.0, 30.0),
        unit="m",
        minimum=-500.0,
        maximum=9000.0,
        sigma=True,
    )
    legs: int = param("number of legs of constant course and speed", default=1, minimum=1, maximum=6)
    turn_times: tuple[str, ...] = param("UTC times of the turns; empty: estimated", default=())
    speed_sigma: float = param("prior 1-sigma of each velocity component", default=30.0, unit="m/s", minimum=1e-3)


@dataclass(frozen=True)
class FixedOptions(SearchRegion):
    """Options of the motion `fixed`."""

    height: Quantity = param(
        "ellipsoidal height and its 1-sigma",
        default=Quantity(0.0, 300.0),
        unit="m",
        minimum=-500.0,
        maximum=9000.0,
        sigma=True,
    )


@dataclass(frozen=True)
class PolynomialOptions(SearchRegion):
    """Options of the motion `polynomial`."""

    degree: int = param("1: constant velocity, 2: constant acceleration", default=1, minimum=1, maximum=2)
    height: Quantity | None = param(
        "ellipsoidal height at the epoch and its 1-sigma",
        default=None,
        unit="m",
        minimum=-500.0,
        maximum=1e5,
        sigma=True,
    )
    speed_sigma: float = param("prior 1-sigma of each velocity component", default=400.0, unit="m/s", minimum=1e-3)
    acceleration_sigma: float = param(
        "prior 1-sigma of each acceleration component", default=3.0, unit="m/s2", minimum=1e-6
    )
