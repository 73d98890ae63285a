"""The three hooks of shiftfix. A plugin is a module in the entry-point group `shiftfix.plugins` that implements some.

from shiftfix.api import NodeSpec, hookimpl

@hookimpl
def shiftfix_nodes():
    return (NodeSpec(name="my_log", summary="...", function=read_my_log, ...),)
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import pluggy

if TYPE_CHECKING:
    from shiftfix.graph.events import Event
    from shiftfix.graph.nodes import MotionSpec, NodeSpec

GROUP = "shiftfix.plugins"
hookspec = pluggy.HookspecMarker("shiftfix")
hookimpl = pluggy.HookimplMarker("shiftfix")


@hookspec
def shiftfix_nodes() -> Sequence[NodeSpec]:
    """Return the nodes that this plugin offers; the pipeline file calls them `<entry point>.<name>`."""


@hookspec
def shiftfix_motions() -> Sequence[MotionSpec]:
    """Return the motions that this plugin offers to search and fit; their names are unique over all plugins."""


@hookspec
def shiftfix_run_event(event: Event) -> None:
    """Observe an event of a run. Must return quickly; an exception in it is recorded as a warning, never stops a run."""
