"""Everything public, for plugin authors and embedders: one flat list; anything that is not in it may change.

Names are resolved on first use, so that importing this module stays cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_EXPORTS: dict[str, str] = {
    # errors
    "CoverageError": "shiftfix.errors",
    "DefinitionError": "shiftfix.errors",
    "InputError": "shiftfix.errors",
    "NodeError": "shiftfix.errors",
    "PluginError": "shiftfix.errors",
    "Problem": "shiftfix.errors",
    "RunCancelled": "shiftfix.errors",
    "SchemaError": "shiftfix.errors",
    "ShiftfixError": "shiftfix.errors",
    "VerificationError": "shiftfix.errors",
    # tables
    "Alternative": "shiftfix.tables.solution",
    "Column": "shiftfix.tables.schema",
    "EmitterTable": "shiftfix.tables.emitters",
    "EarthOrientation": "shiftfix.tables.orientation",
    "Ephemeris": "shiftfix.tables.ephemeris",
    "FrequencyTable": "shiftfix.tables.frequencies",
    "OffsetTable": "shiftfix.tables.offsets",
    "Parameter": "shiftfix.tables.solution",
    "Quantity": "shiftfix.tables.quantities",
    "Reject": "shiftfix.tables.frequencies",
    "Solution": "shiftfix.tables.solution",
    "Source": "shiftfix.tables.frequencies",
    "StartTable": "shiftfix.tables.starts",
    "StationResult": "shiftfix.tables.solution",
    "StationTable": "shiftfix.tables.stations",
    "Table": "shiftfix.tables.schema",
    "merge_frequency_tables": "shiftfix.tables.frequencies",
    # nodes
    "MotionSpec": "shiftfix.graph.nodes",
    "NodeContext": "shiftfix.graph.nodes",
    "NodeSpec": "shiftfix.graph.nodes",
    "NoParams": "shiftfix.graph.nodes",
    "Port": "shiftfix.graph.nodes",
    "hookimpl": "shiftfix.graph.hookspecs",
    "param": "shiftfix.graph.nodes",
    # pipelines
    "Event": "shiftfix.graph.events",
    "Registry": "shiftfix.graph.registry",
    "RunResult": "shiftfix.graph.runner",
    "check_pipeline": "shiftfix.graph.inspection",
    "describe_motion": "shiftfix.graph.inspection",
    "describe_node": "shiftfix.graph.inspection",
    "explain_pipeline": "shiftfix.graph.inspection",
    "list_motions": "shiftfix.graph.inspection",
    "list_nodes": "shiftfix.graph.inspection",
    "list_plugins": "shiftfix.graph.inspection",
    "run_pipeline": "shiftfix.graph.runner",
    "verify_run": "shiftfix.graph.provenance",
    # rim
    "LocatedDocument": "shiftfix.tables.located_toml",
    "TomlSyntaxError": "shiftfix.tables.located_toml",
    "cautions_for": "shiftfix.tables.cautions",
    "length_text": "shiftfix.tables.readings",
    "measured_text": "shiftfix.tables.readings",
    "odds_text": "shiftfix.tables.readings",
    "parse_located_toml": "shiftfix.tables.located_toml",
    "parse_quantity": "shiftfix.tables.quantities",
    "place_text": "shiftfix.tables.readings",
    "read_located_toml": "shiftfix.tables.located_toml",
    "solution_document": "shiftfix.tables.solution_document",
    "solution_schema": "shiftfix.tables.solution_document",
    "value_text": "shiftfix.tables.readings",
    # estimation and physics, for motions, calibration and solving
    "ArcScene": "shiftfix.estimation.motions",
    "BoundMotion": "shiftfix.estimation.motions",
    "ClockModels": "shiftfix.estimation.nuisance",
    "Considered": "shiftfix.estimation.considered",
    "EarthFrame": "shiftfix.physics.frames",
    "Fit": "shiftfix.estimation.fit",
    "FitSettings": "shiftfix.estimation.fit",
    "FixedMotion": "shiftfix.physics.motion.fixed",
    "Forces": "shiftfix.physics.motion.forces",
    "ForwardModel": "shiftfix.estimation.forward",
    "Gates": "shiftfix.estimation.editing",
    "HeightPrior": "shiftfix.estimation.priors",
    "Media": "shiftfix.estimation.forward",
    "Observations": "shiftfix.estimation.observations",
    "OrbitMotion": "shiftfix.physics.motion.orbit",
    "PolynomialMotion": "shiftfix.physics.motion.polynomial",
    "Receiver": "shiftfix.estimation.receivers",
    "SPEED_OF_LIGHT_M_S": "shiftfix.physics.constants",
    "SampledPath": "shiftfix.physics.motion.sampled",
    "SurfaceMotion": "shiftfix.physics.motion.surface",
    "ValuePrior": "shiftfix.estimation.priors",
    "bundled_earth_orientation": "shiftfix.tables.bundled_orientation",
    "clock_history": "shiftfix.estimation.calibration",
    "earth_frame": "shiftfix.estimation.stations",
    "known_log_ratio": "shiftfix.estimation.calibration",
    "periodic_relativity_s": "shiftfix.estimation.calibration",
    "sampled_path": "shiftfix.estimation.stations",
    "smooth_offsets": "shiftfix.estimation.calibration",
    "station_entries": "shiftfix.estimation.stations",
    "station_receiver": "shiftfix.estimation.stations",
    "circular_orbits": "shiftfix.estimation.candidates",
    "Answer": "shiftfix.estimation.answer",
    "AnswerSettings": "shiftfix.estimation.answer",
    "ellipse": "shiftfix.estimation.covariance",
    "enu_axes": "shiftfix.physics.geodesy",
    "fit_arc": "shiftfix.estimation.fit",
    "geodetic_from_itrs": "shiftfix.physics.geodesy",
    "ground_places": "shiftfix.estimation.candidates",
    "ground_receiver": "shiftfix.estimation.receivers",
    "itrs_from_geodetic": "shiftfix.physics.geodesy",
    "observations": "shiftfix.estimation.observations",
    "refine": "shiftfix.estimation.search",
    "search_data": "shiftfix.estimation.search",
    "solve_arc": "shiftfix.estimation.answer",
    "tai_ns_from_calendar": "shiftfix.physics.timescales",
    "tai_ns_from_gps": "shiftfix.physics.timescales",
    "tai_ns_from_posix": "shiftfix.physics.timescales",
    "tai_ns_from_texts": "shiftfix.physics.timescales",
    "tai_ns_from_utc": "shiftfix.physics.timescales",
    "utc_text": "shiftfix.physics.timescales",
}

__all__ = sorted(_EXPORTS)


def __getattr__(name: str) -> Any:
    if name not in _EXPORTS:
        raise AttributeError(f"shiftfix.api has no public name {name!r}")
    value = getattr(import_module(_EXPORTS[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return __all__
