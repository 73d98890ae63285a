"""Everything public, for plugin authors and embedders: one flat list; anything that is not in it may change.

Names are resolved on first use, so that importing this module stays cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_EXPORTS: dict[str, str] = {
    # errors
    "CoverageError": "shiftfix.errors",
    "DataWarning": "shiftfix.errors",
    "DefinitionError": "shiftfix.errors",
    "InputError": "shiftfix.errors",
    "NodeError": "shiftfix.errors",
    "ObservabilityError": "shiftfix.errors",
    "PluginError": "shiftfix.errors",
    "Problem": "shiftfix.errors",
    "RunCancelled": "shiftfix.errors",
    "SchemaError": "shiftfix.errors",
    "ShiftfixError": "shiftfix.errors",
    "TimeScaleError": "shiftfix.errors",
    "VerificationError": "shiftfix.errors",
    # tables
    "Alternative": "shiftfix.tables.solution",
    "Column": "shiftfix.tables.schema",
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
    "param": "shiftfix.graph.nodes",
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
