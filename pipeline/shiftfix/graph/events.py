"""Events of a run: what an observer is told, in order."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

KINDS = (
    "run_started",
    "node_started",
    "node_progress",
    "node_warning",
    "node_finished",
    "node_failed",
    "run_finished",
    "run_cancelled",
)


@dataclass(frozen=True)
class Event:
    """One event.

    Parameters
    ----------
    kind : str
        One of `KINDS`.
    node : str
        Node of the pipeline file, empty for the run itself.
    fraction : float or None
        Part done, 0 to 1, in node_progress.
    text : str
    details : mapping
        Counts and the like, JSON types only.
    """

    kind: str
    node: str = ""
    fraction: float | None = None
    text: str = ""
    details: Mapping[str, Any] = field(default_factory=dict)
