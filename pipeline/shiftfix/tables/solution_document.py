"""`solution.json`: the document of a Solution, with a published, versioned schema (`solution.schema.json`)."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from importlib import resources
from typing import Any

import numpy as np

from shiftfix.tables.cautions import cautions_for
from shiftfix.tables.solution import REMEDIES, Solution

SCHEMA_VERSION = 1


def solution_schema() -> dict[str, Any]:
    """Return the JSON Schema (2020-12) of the document."""
    return json.loads(resources.files("shiftfix.tables").joinpath("solution.schema.json").read_text("utf-8"))


def solution_document(solution: Solution, *, title: str, emitter_classes: Sequence[str]) -> dict[str, Any]:
    """Return the document of a solution; a refused one has the same keys, null where there is no value.

    Parameters
    ----------
    solution : Solution
    title : str
    emitter_classes : sequence of str
        With the received frequency they decide which cautions are added to those of the solution.

    Notes
    -----
    A covariance with a value that is not finite is no covariance: it becomes null, with the reason.
    """
    cautions = tuple(dict.fromkeys((*cautions_for(emitter_classes, _received_hz(solution)), *solution.cautions)))
    covariance, reason = solution.covariance, solution.covariance_reason
    if covariance is not None and not np.isfinite(covariance).all():
        covariance, reason = None, "the covariance has values that are not finite"
    state = {"position_m": _list(solution.position_m), "velocity_m_s": _list(solution.velocity_m_s)}
    document = {
        "schema_version": SCHEMA_VERSION,
        "title": title,
        "emitter_classes": list(emitter_classes),
        "verdict": solution.verdict,
        "verdict_text": solution.verdict_text,
        "remedy": REMEDIES[solution.verdict],
        "exit_code": solution.exit_code,
        "motion": solution.motion,
        "epoch_utc": solution.epoch_utc,
        "frame": solution.frame,
        "state": state,
        "covariance": None if covariance is None else [_list(row) for row in covariance],
        "covariance_reason": reason,
        "covariance_kind": solution.covariance_kind,
        "geodetic": _clean(solution.geodetic),
        "rest_frequency_hz": solution.rest_frequency_hz,
        "rest_frequency_sigma_hz": solution.rest_frequency_sigma_hz,
        "rest_frequency_drift_hz_s": solution.rest_frequency_drift_hz_s,
        "frequency_datum": solution.frequency_datum,
        "stations": [vars(s) for s in solution.stations],
        "parameters": [vars(p) for p in solution.parameters],
        "chi_square": solution.chi_square,
        "degrees_of_freedom": solution.degrees_of_freedom,
        "odds": solution.odds,
        "alternatives": [vars(a) for a in solution.alternatives],
        "converged": solution.converged,
        "rank_full": solution.rank_full,
        "at_bound": solution.at_bound,
        "second_minimum": solution.second_minimum,
        "condition": solution.condition,
        "iterations": solution.iterations,
        "unobservable": list(solution.unobservable),
        "budget": _clean(solution.budget),
        "findings": list(solution.findings),
        "warnings": list(solution.warnings),
        "cautions": list(cautions),
    }
    return _clean(document)


def _received_hz(solution: Solution) -> float | None:
    received = solution.array("received_frequency_hz")
    return float(np.median(received)) if len(received) else None


def _list(values: np.ndarray | None) -> list[float] | None:
    return None if values is None else [float(v) for v in values]


def _clean(value: Any) -> Any:
    """Return JSON types only; a number that is not finite becomes null."""
    if isinstance(value, Mapping):
        return {str(k): _clean(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_clean(v) for v in value]
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
