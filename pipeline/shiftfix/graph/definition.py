"""The pipeline file: read, checked in full before anything runs, every problem with file:line:column and its path."""

from __future__ import annotations

import difflib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from shiftfix.errors import DefinitionError, PluginError, Problem
from shiftfix.graph.build import cycle_of, run_order
from shiftfix.graph.motions import resolve_with_motion
from shiftfix.graph.overrides import apply_overrides, plain_values
from shiftfix.graph.parameters import Folders, Resolved
from shiftfix.graph.registry import RegisteredNode, Registry
from shiftfix.tables.cautions import EMITTER_CLASSES
from shiftfix.tables.located_toml import LocatedDocument, TomlSyntaxError, parse_located_toml

FORMAT = 1
_TOP = ("shiftfix", "title", "emitter_classes", "nodes", "seed")
_NODE = ("use", "inputs", "params")


@dataclass(frozen=True)
class Connection:
    """One input: the node and the output port that feed it."""

    node: str
    output: str


@dataclass(frozen=True)
class DefinedNode:
    """One node of a checked pipeline: its description, parameters and where each input comes from."""

    name: str
    registered: RegisteredNode
    params: Any
    resolved: tuple[Resolved, ...]
    inputs: Mapping[str, tuple[Connection, ...]]
    line: int = 0


@dataclass(frozen=True)
class Definition:
    """A checked pipeline.

    Parameters
    ----------
    path : Path
        The pipeline file.
    title : str
    emitter_classes : tuple of str
    nodes : mapping of name to DefinedNode
        In the order of the file.
    order : tuple of str
        Order in which they run.
    seed : int
    folders : Folders
    content : bytes
        Of the file, for its hash.
    overrides : tuple of str
    """

    path: Path
    title: str
    emitter_classes: tuple[str, ...]
    nodes: Mapping[str, DefinedNode]
    order: tuple[str, ...]
    seed: int
    folders: Folders
    content: bytes
    overrides: tuple[str, ...] = ()
    registry: Registry = field(default_factory=Registry)


def read_definition(
    path: str | Path,
    *,
    allow: Sequence[str | Path] = (),
    overrides: Sequence[str] = (),
    registry: Registry | None = None,
) -> Definition:
    """Return a checked pipeline file.

    Parameters
    ----------
    path : path
    allow : sequence of path
        Further folders in which files may lie.
    overrides : sequence of str
        `nodes.fix.params.motion=orbit`; the value is TOML, or a plain text.
    registry : Registry, optional

    Raises
    ------
    DefinitionError
        With all problems of the file.
    PluginError
        When a named plugin cannot be loaded.
    """
    path = Path(path)
    try:
        content = path.read_bytes()
    except OSError as error:
        raise DefinitionError(
            Problem(str(path), "the pipeline file cannot be read", found=error.strerror or str(error))
        ) from error
    try:
        document = parse_located_toml(content, path.name)
    except TomlSyntaxError as error:
        raise DefinitionError(error.problem) from error
    values = plain_values(document.values)
    changed, problems = apply_overrides(values, overrides)
    reader = _Reader(
        path, document, values, changed, Folders(path.parent, [Path(a) for a in allow]), registry or Registry()
    )
    reader.problems += problems
    return reader.read(content, tuple(overrides))


class _Reader:
    """Walks one document and collects every problem."""

    def __init__(
        self, path, document: LocatedDocument, values: dict, changed: dict, folders: Folders, registry: Registry
    ) -> None:
        self.path, self.document, self.values, self.changed = path, document, values, changed
        self.folders, self.registry = folders, registry
        self.problems: list[Problem] = []

    def where(self, *path: Any, key: bool = False) -> str:
        if tuple(path) in self.changed:
            return f"--set {self.changed[tuple(path)]}"
        line, column = self.document.key_place(tuple(path)) if key else self.document.place(tuple(path))
        return f"{self.path.name}:{line}:{column}"

    def add(self, path: tuple, what: str, *, key: bool = False, **more: str) -> None:
        self.problems.append(Problem(f"{self.where(*path, key=key)}: {'.'.join(map(str, path))}", what, **more))

    def read(self, content: bytes, overrides: tuple[str, ...]) -> Definition:
        values = self.values
        for name in values:
            if name not in _TOP:
                self.add(
                    (name,), "unknown key", key=True, found=name, allowed=", ".join(_TOP), remedy=_closest(name, _TOP)
                )
        self._version(values)
        title = values.get("title", "")
        if not isinstance(title, str):
            self.add(("title",), "not a text", found=repr(title), remedy="put it in quotes")
        seed = values.get("seed", 0)
        if isinstance(seed, bool) or not isinstance(seed, int) or seed < 0:
            self.add(("seed",), "not a whole number of at least 0", found=repr(seed))
        classes = self._classes(values.get("emitter_classes", []))
        nodes = values.get("nodes", {})
        if not isinstance(nodes, dict) or not nodes:
            self.add(
                ("nodes",) if "nodes" in values else (), "no nodes are defined", allowed="one table [nodes.NAME] a node"
            )
            nodes = {}
        described = {name: self._describe(name, body) for name, body in nodes.items()}
        wired = {name: self._wire(name, nodes[name], described) for name in described if described[name]}
        links = {name: {c.node for group in inputs.values() for c in group} for name, inputs in wired.items()}
        cycle = cycle_of(links)
        if cycle:
            name = cycle[0]
            self.add(
                ("nodes", name, "inputs"),
                "the nodes feed each other in a circle",
                found=" -> ".join([*cycle, cycle[0]]),
            )
        if self.problems:
            raise DefinitionError(sorted(self.problems, key=lambda p: _line(p.where)))
        defined = {
            name: DefinedNode(
                name,
                described[name][0],
                described[name][1],
                described[name][2],
                wired[name],
                self.document.place(("nodes", name))[0],
            )
            for name in described
        }
        return Definition(
            self.path, title, classes, defined, run_order(links), seed, self.folders, content, overrides, self.registry
        )

    def _version(self, values: dict) -> None:
        if "shiftfix" not in values:
            self.add(
                (),
                "the format version is missing",
                allowed=f"shiftfix = {FORMAT}",
                remedy=f"begin the file with shiftfix = {FORMAT}",
            )
        elif values["shiftfix"] != FORMAT or isinstance(values["shiftfix"], bool):
            self.add(
                ("shiftfix",),
                "unknown version of the pipeline format",
                found=repr(values["shiftfix"]),
                allowed=str(FORMAT),
            )

    def _classes(self, given: Any) -> tuple[str, ...]:
        if not isinstance(given, list):
            self.add(("emitter_classes",), "not a list", found=repr(given), allowed=", ".join(EMITTER_CLASSES))
            return ()
        for k, name in enumerate(given):
            if name not in EMITTER_CLASSES:
                self.add(
                    ("emitter_classes", k),
                    "unknown emitter class",
                    found=repr(name),
                    allowed=", ".join(EMITTER_CLASSES),
                    remedy=_closest(name, EMITTER_CLASSES),
                )
        return tuple(str(g) for g in given)

    def _describe(self, name: str, body: Any) -> tuple | None:
        here = ("nodes", name)
        if not isinstance(body, dict):
            self.add(here, "a node is a table", found=repr(body), allowed=f"[nodes.{name}] with use, inputs, params")
            return None
        if not name.replace("_", "a").isalnum() or not name.isascii():
            self.add(here, "bad node name", key=True, found=name, allowed="letters, digits and _")
        for key in body:
            if key not in _NODE:
                self.add(
                    (*here, key),
                    "unknown key of a node",
                    key=True,
                    found=key,
                    allowed=", ".join(_NODE),
                    remedy=_closest(key, _NODE),
                )
        use = body.get("use")
        if not isinstance(use, str):
            self.add(
                (*here, "use") if "use" in body else here,
                "the node does not say what it uses",
                found=repr(use) if use is not None else "",
                allowed='use = "plugin.node"',
            )
            return None
        registered = self._find(here, use)
        if registered is None:
            return None
        params = body.get("params", {})
        if not isinstance(params, dict):
            self.add((*here, "params"), "parameters are a table", found=repr(params), allowed="params.NAME = VALUE")
            return None
        built, resolved, problems = resolve_with_motion(
            registered.spec.params,
            params,
            self.registry.motions(),
            node_path=f"nodes.{name}",
            place=lambda path, key: self.where(*here, "params", *path, key=key),
            origin=lambda p: f"{self.where(*here, 'params', p)}",
            folders=self.folders,
        )
        self.problems += problems
        return registered, built, resolved

    def _find(self, here: tuple, use: str) -> RegisteredNode | None:
        plugin, dot, _ = use.partition(".")
        if not dot:
            self.add(
                (*here, "use"),
                "not a qualified node name",
                found=use,
                allowed="plugin.node, as `shiftfix nodes` lists them",
            )
            return None
        if plugin not in self.registry.names():
            names = self.registry.names()
            self.add(
                (*here, "use"),
                f"no plugin is called {plugin!r}",
                found=use,
                allowed=", ".join(names),
                remedy=_closest(plugin, names)
                or "install the distribution that has it; `shiftfix plugins` lists what is there",
            )
            return None
        try:
            return self.registry.node(use)
        except KeyError:
            known = [n.qualified_name for n in self.registry.load(plugin)]
            self.add((*here, "use"), "no such node", found=use, allowed=", ".join(known), remedy=_closest(use, known))
        except PluginError as error:
            raise PluginError(
                [
                    Problem(f"{self.where(*here, 'use')}: {p.where}", p.what, p.found, p.allowed, p.remedy)
                    for p in error.problems
                ]
            ) from error
        return None

    def _wire(self, name: str, body: dict, described: dict) -> dict[str, tuple[Connection, ...]]:
        spec = described[name][0].spec
        here = ("nodes", name, "inputs")
        given = body.get("inputs", {})
        if not isinstance(given, dict):
            self.add(here, "inputs are a table", found=repr(given), allowed='inputs.PORT = "NODE"')
            return {}
        out: dict[str, tuple[Connection, ...]] = {}
        for port in given:
            if port not in spec.inputs:
                self.add(
                    (*here, port),
                    "no such input",
                    key=True,
                    found=port,
                    allowed=", ".join(spec.inputs) or "none: this node has no inputs",
                    remedy=_closest(port, spec.inputs),
                )
        for port, description in spec.inputs.items():
            if port not in given:
                if not description.optional:
                    self.add(
                        here if "inputs" in body else here[:2],
                        f"input {port!r} is not connected",
                        allowed=description.table.__name__,
                        remedy=f'add inputs.{port} = "NODE" ({description.meaning})',
                    )
                continue
            raw = given[port]
            sources = raw if isinstance(raw, list) and description.many else [raw]
            if isinstance(raw, list) and not description.many:
                self.add((*here, port), "this input takes one connection, not a list", found=repr(raw))
                continue
            if not sources:
                self.add((*here, port), "the list is empty")
            found = [
                self._connect((*here, port, k) if isinstance(raw, list) else (*here, port), s, description, described)
                for k, s in enumerate(sources)
            ]
            out[port] = tuple(c for c in found if c)
        return out

    def _connect(self, path: tuple, source: Any, description, described: dict) -> Connection | None:
        if not isinstance(source, str):
            self.add(path, "a connection is the name of a node", found=repr(source), allowed='"NODE" or "NODE.OUTPUT"')
            return None
        node, dot, output = source.partition(".")
        if node not in described:
            self.add(
                path,
                f"no node is called {node!r}",
                found=source,
                allowed=", ".join(described),
                remedy=_closest(node, described),
            )
            return None
        if described[node] is None:
            return None
        outputs = described[node][0].spec.outputs
        if not dot:
            if len(outputs) != 1:
                self.add(
                    path,
                    f"node {node!r} has {len(outputs)} outputs: name one",
                    found=source,
                    allowed=", ".join(f"{node}.{o}" for o in outputs) or "none: it only makes files",
                )
                return None
            output = next(iter(outputs))
        elif output not in outputs:
            self.add(
                path,
                f"node {node!r} has no output {output!r}",
                found=source,
                allowed=", ".join(f"{node}.{o}" for o in outputs),
                remedy=_closest(output, outputs),
            )
            return None
        table = outputs[output].table
        if not issubclass(table, description.table):
            self.add(
                path,
                "the table is of another type",
                found=f"{table.__name__} from {node}.{output}",
                allowed=description.table.__name__,
            )
            return None
        return Connection(node, output)


def _closest(name: Any, known: Any) -> str:
    close = difflib.get_close_matches(str(name), list(known), 1, 0.6)
    return f"did you mean {close[0]}?" if close else ""


def _line(where: str) -> tuple[int, int]:
    found = re.search(r":(\d+):(\d+): ", where)
    return (int(found[1]), int(found[2])) if found else (0, 0)
