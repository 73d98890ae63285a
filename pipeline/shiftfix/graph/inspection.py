"""What embedders and the command line may ask of an environment and of a pipeline file without running it."""

from __future__ import annotations

import dataclasses
import difflib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from shiftfix.errors import DefinitionError, Problem
from shiftfix.graph.definition import Definition, read_definition
from shiftfix.graph.nodes import MotionSpec, NodeSpec, Port
from shiftfix.graph.registry import PluginEntry, Registry
from shiftfix.tables.quantities import Quantity


def list_plugins(registry: Registry | None = None) -> tuple[PluginEntry, ...]:
    """Return every plugin found, none imported."""
    return (registry or Registry()).entries()


def list_nodes(registry: Registry | None = None) -> list[dict[str, str]]:
    """Return name, summary and plugin of every node that can be loaded."""
    nodes = (registry or Registry()).nodes()
    return [
        {"name": n.qualified_name, "summary": n.spec.summary, "plugin": f"{n.plugin.distribution} {n.plugin.version}"}
        for n in nodes
    ]


def list_motions(registry: Registry | None = None) -> list[dict[str, str]]:
    """Return name and summary of every motion."""
    motions = (registry or Registry()).motions()
    return [{"name": name, "summary": motions[name].summary} for name in sorted(motions)]


def describe_node(name: str, registry: Registry | None = None) -> dict[str, Any]:
    """Return ports and parameters of one node as plain data."""
    registry = registry or Registry()
    known = {n.qualified_name: n for n in registry.nodes()}
    if name not in known:
        close = difflib.get_close_matches(name, known, 1)
        raise DefinitionError(
            Problem(name, "no such node", allowed=", ".join(known), remedy=f"did you mean {close[0]}?" if close else "")
        )
    node = known[name]
    return {
        "name": name,
        "summary": node.spec.summary,
        "plugin": f"{node.plugin.distribution} {node.plugin.version}",
        "inputs": _ports(node.spec.inputs),
        "outputs": _ports(node.spec.outputs),
        "params": _params(node.spec),
    }


def describe_motion(name: str, registry: Registry | None = None) -> dict[str, Any]:
    """Return summary and options of one motion as plain data."""
    motions = (registry or Registry()).motions()
    if name not in motions:
        close = difflib.get_close_matches(name, sorted(motions), 1)
        remedy = f"did you mean {close[0]}?" if close else "nodes are called PLUGIN.NODE"
        raise DefinitionError(Problem(name, "no such motion", allowed=", ".join(sorted(motions)), remedy=remedy))
    return {"name": name, "summary": motions[name].summary, "options": _params(motions[name])}


def _ports(ports: Mapping[str, Port]) -> list[dict[str, Any]]:
    return [
        {"name": n, "table": p.table.__name__, "meaning": p.meaning, "optional": p.optional, "many": p.many}
        for n, p in ports.items()
    ]


def _params(spec: NodeSpec | MotionSpec) -> list[dict[str, Any]]:
    out = []
    for field in dataclasses.fields(spec.params):
        required = field.default is dataclasses.MISSING and field.default_factory is dataclasses.MISSING
        default = (
            None if required else field.default if field.default is not dataclasses.MISSING else field.default_factory()
        )
        meta = field.metadata
        out.append(
            {
                "name": field.name,
                "required": required,
                "default": shown(default),
                "unit": meta.get("unit", ""),
                "meaning": meta.get("meaning", ""),
                "choices": list(meta.get("choices", ())),
                "minimum": meta.get("minimum"),
                "maximum": meta.get("maximum"),
            }
        )
    return out


def shown(value: Any) -> Any:
    """Return a parameter value as plain data for people and JSON."""
    if isinstance(value, Quantity):
        return f"{value.value:.15g}" + (f" +/- {value.sigma:.6g}" if value.sigma is not None else "")
    if isinstance(value, tuple | list):
        return [shown(v) for v in value]
    if isinstance(value, Path):
        return value.name
    if isinstance(value, Mapping):
        return {k: shown(v) for k, v in value.items()}
    return value


def check_pipeline(
    file: str | Path,
    *,
    allow: Sequence[str | Path] = (),
    overrides: Sequence[str] = (),
    registry: Registry | None = None,
) -> Definition:
    """Return the checked definition of a pipeline file; raises DefinitionError with all its problems."""
    return read_definition(file, allow=allow, overrides=overrides, registry=registry)


def explain_pipeline(
    file: str | Path,
    *,
    allow: Sequence[str | Path] = (),
    overrides: Sequence[str] = (),
    registry: Registry | None = None,
) -> dict[str, Any]:
    """Return the resolved plan as plain data: nodes in running order, each value with unit and origin."""
    definition = read_definition(file, allow=allow, overrides=overrides, registry=registry)
    nodes = []
    for name in definition.order:
        node = definition.nodes[name]
        params = []
        for r in node.resolved:
            value = r.value
            if isinstance(value, Path):
                value = definition.folders.display(value)
            elif isinstance(value, tuple) and value and isinstance(value[0], Path):
                value = [definition.folders.display(v) for v in value]
            params.append(
                {"name": r.name, "value": shown(value), "unit": r.unit, "origin": r.origin, "meaning": r.meaning}
            )
        plugin = node.registered.plugin
        nodes.append(
            {
                "name": name,
                "use": node.registered.qualified_name,
                "summary": node.registered.spec.summary,
                "plugin": f"{plugin.distribution} {plugin.version}",
                "inputs": {p: [f"{c.node}.{c.output}" for c in group] for p, group in node.inputs.items()},
                "params": params,
            }
        )
    return {
        "file": definition.path.name,
        "title": definition.title,
        "emitter_classes": list(definition.emitter_classes),
        "seed": definition.seed,
        "nodes": nodes,
    }
