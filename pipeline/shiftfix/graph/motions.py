"""Motions in a pipeline file: the name is one that a plugin offers, the options are those of that motion."""

from __future__ import annotations

import dataclasses
import difflib
from collections.abc import Callable, Mapping
from typing import Any

from shiftfix.errors import Problem
from shiftfix.graph.nodes import MotionSpec
from shiftfix.graph.parameters import Folders, Resolved, resolve_parameters


def resolve_with_motion(
    cls: type,
    given: Mapping[str, Any],
    motions: Mapping[str, MotionSpec],
    *,
    node_path: str,
    place: Callable[[tuple, bool], str],
    origin: Callable[[str], str],
    folders: Folders,
) -> tuple[Any, tuple[Resolved, ...], list[Problem]]:
    """Return what `resolve_parameters` returns, the motion that the parameters name and its options checked too.

    Parameters
    ----------
    cls, given, node_path, place, origin, folders
        As in `resolve_parameters`; fields made with `param(..., motion="name")` and `param(..., motion="options")` are
        looked at. An empty name means that the node takes the motion from elsewhere.
    motions : mapping of str to MotionSpec
        Read only when a motion is named: reading it may import plugins.
    """
    built, resolved, problems = resolve_parameters(
        cls, given, node_path=node_path, place=place, origin=origin, folders=folders
    )
    if built is None:
        return built, resolved, problems
    fields = {f.metadata["motion"]: f.name for f in dataclasses.fields(cls) if f.metadata.get("motion")}
    name = getattr(built, fields["name"]) if "name" in fields else ""
    if name and name not in motions:
        known = sorted(motions)
        close = difflib.get_close_matches(name, known, 1)
        problems.append(
            Problem(
                f"{place((fields['name'],), False)}: {node_path}.params.{fields['name']}",
                f"no motion is called {name!r}",
                found=name,
                allowed=", ".join(known),
                remedy=f"did you mean {close[0]}?" if close else "",
            )
        )
    elif name and "options" in fields:
        key = fields["options"]
        _, _, problems = resolve_parameters(
            motions[name].params,
            getattr(built, key),
            node_path=node_path,
            place=lambda path, of_key: place((key, *path), of_key),
            origin=origin,
            folders=folders,
            below=f"params.{key}",
        )
    return (None if problems else built), resolved, problems
