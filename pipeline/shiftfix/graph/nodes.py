"""What a plugin hands over: node and motion descriptions, ports and parameter fields; plain data and functions."""

from __future__ import annotations

import dataclasses
import logging
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

import numpy as np


@dataclass(frozen=True)
class Port:
    """One input or output of a node.

    Parameters
    ----------
    table : type
        Table class that travels through the port.
    meaning : str
    optional : bool
        Whether an input may stay unconnected (the function then gets None).
    many : bool
        Whether an input takes a list of connections (the function then gets a tuple of tables, in the order of the file).
    """

    table: type
    meaning: str = ""
    optional: bool = False
    many: bool = False


@dataclass(frozen=True)
class NoParams:
    """Parameters of a node that has none."""


def param(
    meaning: str,
    *,
    default: Any = dataclasses.MISSING,
    unit: str = "",
    minimum: float | None = None,
    maximum: float | None = None,
    choices: tuple[str, ...] = (),
    sigma: bool = False,
    path: str = "",
    motion: str = "",
) -> Any:
    """Declare one parameter of a node: a dataclass field with meaning, unit, bounds and default.

    Parameters
    ----------
    meaning : str
        One line, shown by `shiftfix nodes` and `shiftfix explain`.
    default : object
        Default in SI (a number, not a text with unit); without it the parameter is required.
    unit : str
        SI unit of the value that the function receives: "Hz", "s", "m", "m/s", "deg", "K", "Pa", "dB", "1", "1/s".
        With a unit, the pipeline file must give a text with a unit ("158.3 MHz"); "" means a plain number, text or list.
    minimum, maximum : float, optional
        Closed bounds, SI.
    choices : tuple of str
        Closed list of values.
    sigma : bool
        Whether the quantity may carry "+/-": the function then receives a `Quantity` (value, sigma).
    path : {"", "file", "files"}
        Marks a path (confined to the pipeline's folder and --allow folders): "file" gives a `Path`, "files" a pattern or
        list of patterns that gives a sorted tuple of `Path`.
    motion : {"", "name", "options"}
        "name" marks the name of a motion that a plugin offers; "options" a table of that motion's own parameters. Both are
        checked with the pipeline file, before anything runs.
    """
    metadata = {
        "meaning": meaning,
        "unit": unit,
        "minimum": minimum,
        "maximum": maximum,
        "choices": choices,
        "sigma": sigma,
        "path": path,
        "motion": motion,
    }
    if default is dataclasses.MISSING:
        return field(metadata=metadata)
    if isinstance(default, dict | list):
        return field(default_factory=lambda: type(default)(default), metadata=metadata)
    return field(default=default, metadata=metadata)


class Cancel(Protocol):
    """Callable that raises `RunCancelled` when the run was cancelled."""

    def __call__(self) -> None: ...


@dataclass(frozen=True)
class NodeContext:
    """What a node function may use besides its inputs and parameters.

    Parameters
    ----------
    node : str
        Name of the node in the pipeline file.
    logger : logging.Logger
        Messages for the run's record; `warning` lines also go into `run.json`.
    random : numpy.random.Generator
        Seeded from the run's seed and the node's name.
    progress : callable
        `progress(fraction, text)`; fraction in 0..1 or None.
    check_cancelled : callable
        To be called in loops; raises RunCancelled.
    folder : pathlib.Path or None
        Folder for products of this node (inside the run folder); None when nothing is to be written. Use
        `write(name, bytes)` to have a file appear whole or not at all.
    write : callable
        `write(name, data)` stores a product (str or bytes) in `folder` atomically; without a folder it keeps it in memory.
    motions : mapping
        Motion name to MotionSpec, of all plugins that offer one.
    readers : mapping
        Node name to NodeSpec of every node with `recognise`, for `ingest.auto`.
    emitter_classes : tuple of str
        Declared in the pipeline file.
    title : str
    parameters : callable
        `parameters(cls, given, name)` builds a dataclass made with `param` from a table of the pipeline file (the value of
        the node's parameter `name`), with the same checks and messages as a node's own parameters.
    display_path : callable
        `display_path(path)` gives a path as the user wrote it: relative to the pipeline file, never absolute.
    """

    node: str
    logger: logging.Logger
    random: np.random.Generator
    progress: Callable[[float | None, str], None]
    check_cancelled: Cancel
    folder: Path | None
    write: Callable[[str, str | bytes], None]
    motions: Mapping[str, MotionSpec]
    readers: Mapping[str, NodeSpec]
    emitter_classes: tuple[str, ...] = ()
    title: str = ""
    parameters: Callable[[type, Mapping[str, Any], str], Any] = lambda cls, given, name: cls(**given)
    display_path: Callable[[Path], str] = str


NodeFunction = Callable[[Mapping[str, Any], Any, NodeContext], Mapping[str, Any]]


@dataclass(frozen=True)
class NodeSpec:
    """Description of one node.

    Parameters
    ----------
    name : str
        Short name; the pipeline file qualifies it with the plugin's entry-point name (`ingest.tdm`).
    summary : str
        One line.
    function : callable
        `function(inputs, params, context) -> mapping` with exactly the declared outputs.
    inputs, outputs : mapping of str to Port
    params : type
        Frozen dataclass whose fields were made by `param`.
    recognise : callable, optional
        `recognise(path, first_bytes) -> bool` for readers; must not open the file.
    """

    name: str
    summary: str
    function: NodeFunction
    inputs: Mapping[str, Port] = field(default_factory=dict)
    outputs: Mapping[str, Port] = field(default_factory=dict)
    params: type = NoParams
    recognise: Callable[[Path, bytes], bool] | None = None


@dataclass(frozen=True)
class MotionSpec:
    """Description of one motion that `solve` nodes can search and fit.

    Parameters
    ----------
    name : str
        As written in the pipeline file (`motion = "orbit"`).
    summary : str
    build : callable
        `build(params, scene) -> Motion` (see `shiftfix.estimation.motions`): a motion bound to one arc.
    params : type
        Frozen dataclass of options, made by `param`.
    """

    name: str
    summary: str
    build: Callable[[Any, Any], Any]
    params: type = NoParams
