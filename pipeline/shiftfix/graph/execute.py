"""Execution of a checked pipeline: node by node, with seeded generators, events, cancellation and a record of everything."""

from __future__ import annotations

import hashlib
import logging
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np

from shiftfix.errors import DefinitionError, NodeError, Problem, RunCancelled, ShiftfixError
from shiftfix.graph.build import consumers
from shiftfix.graph.definition import DefinedNode, Definition
from shiftfix.graph.events import Event
from shiftfix.graph.nodes import NodeContext
from shiftfix.graph.parameters import resolve_parameters
from shiftfix.graph.provenance import write_atomically
from shiftfix.tables.schema import Table


@dataclass
class NodeRecord:
    """What happened to one node."""

    name: str
    use: str
    plugin: str
    params: dict[str, Any]
    state: str = "waiting"
    inputs: dict[str, list[str]] = field(default_factory=dict)
    outputs: dict[str, str] = field(default_factory=dict)
    rows: dict[str, int] = field(default_factory=dict)
    warnings: list[str] = field(default_factory=list)
    products: dict[str, str] = field(default_factory=dict)
    seconds: float = 0.0


@dataclass
class Execution:
    """State of a run; complete when `error` is None and every node finished."""

    tables: dict[str, Table] = field(default_factory=dict)
    records: dict[str, NodeRecord] = field(default_factory=dict)
    products: dict[str, bytes] = field(default_factory=dict)
    error: ShiftfixError | None = None

    @property
    def warnings(self) -> list[str]:
        """All warnings, each with its node."""
        return [f"{r.name}: {w}" for r in self.records.values() for w in r.warnings]


class _Recorder(logging.Handler):
    def __init__(self, record: NodeRecord, emit: Callable[[Event], None]) -> None:
        super().__init__(logging.WARNING)
        self.record, self.tell = record, emit

    def emit(self, entry: logging.LogRecord) -> None:
        text = entry.getMessage()
        self.record.warnings.append(text)
        self.tell(Event("node_warning", self.record.name, text=text))


def execute(
    definition: Definition,
    *,
    emit: Callable[[Event], None] = lambda event: None,
    check_cancelled: Callable[[], None] = lambda: None,
    folder: Path | None = None,
    seed: int | None = None,
) -> Execution:
    """Return the execution of a pipeline; an error of shiftfix ends it and stands in `error`.

    Parameters
    ----------
    definition : Definition
    emit : callable
        Told every event.
    check_cancelled : callable
        Raises RunCancelled.
    folder : Path, optional
        Run folder for products; without it they are kept in memory only.
    seed : int, optional
        In place of the seed of the file.
    """
    out = Execution()
    for name, node in definition.nodes.items():
        plugin = node.registered.plugin
        out.records[name] = NodeRecord(
            name,
            node.registered.qualified_name,
            f"{plugin.distribution} {plugin.version}",
            {r.name: r.value for r in node.resolved},
        )
    emit(Event("run_started", text=definition.title, details={"nodes": list(definition.order)}))
    try:
        for name in definition.order:
            check_cancelled()
            _run_node(
                definition,
                definition.nodes[name],
                out,
                emit,
                check_cancelled,
                folder,
                definition.seed if seed is None else seed,
            )
    except KeyboardInterrupt:
        out.error = RunCancelled(Problem("run", "interrupted", remedy="the finished nodes stand in the run folder"))
    except ShiftfixError as error:
        out.error = error
    if isinstance(out.error, RunCancelled):
        emit(Event("run_cancelled"))
    else:
        emit(Event("run_finished", details={"error": type(out.error).__name__ if out.error else ""}))
    return out


def _run_node(
    definition, node: DefinedNode, out: Execution, emit, check_cancelled, folder: Path | None, seed: int
) -> None:
    record = out.records[node.name]
    spec, plugin = node.registered.spec, node.registered.plugin
    where = f"node {node.name} ({node.registered.qualified_name} of {plugin.distribution} {plugin.version})"
    inputs: dict[str, Any] = {}
    for port, description in spec.inputs.items():
        connected = node.inputs.get(port)
        if connected is None:
            inputs[port] = None
            continue
        tables = tuple(out.tables[f"{c.node}.{c.output}"] for c in connected)
        record.inputs[port] = [t.fingerprint() for t in tables]
        inputs[port] = tables if description.many else tables[0]
    emit(Event("node_started", node.name))
    logger = logging.Logger(f"shiftfix.{node.name}", logging.INFO)
    logger.addHandler(_Recorder(record, emit))
    digest = hashlib.sha256(f"{seed}:{node.name}".encode()).digest()

    def write(name: str, data: str | bytes) -> None:
        if not name or name.startswith(("/", ".")) or ".." in Path(name).parts or "\\" in name:
            raise NodeError(Problem(where, "a product must have a plain relative name", found=name))
        content = data.encode("utf-8") if isinstance(data, str) else bytes(data)
        if name in record.products:
            raise NodeError(Problem(where, f"the node made a product called {name!r} twice"))
        if name in out.products:
            maker = next(r.name for r in out.records.values() if name in r.products)
            raise DefinitionError(
                Problem(
                    f"nodes.{node.name}",
                    f"node {maker!r} made a product called {name!r} already",
                    found=node.registered.qualified_name,
                    remedy="give one of them another name, as with params.name",
                )
            )
        out.products[name] = content
        record.products[name] = hashlib.sha256(content).hexdigest()
        if folder is not None:
            write_atomically(folder / name, content)

    def parameters(cls: type, given: Mapping[str, Any], name: str) -> Any:
        built, _, problems = resolve_parameters(
            cls,
            given,
            node_path=f"nodes.{node.name}",
            place=lambda path, key: definition.path.name,
            origin=lambda p: "",
            folders=definition.folders,
            below=f"params.{name}",
        )
        if problems:
            raise DefinitionError(problems)
        return built

    context = NodeContext(
        node=node.name,
        logger=logger,
        random=np.random.default_rng(np.frombuffer(digest, dtype=np.uint64)),
        progress=lambda fraction, text="": emit(Event("node_progress", node.name, fraction, text)),
        check_cancelled=check_cancelled,
        folder=folder,
        write=write,
        motions=definition.registry.motions(),
        readers=definition.registry.readers(),
        emitter_classes=definition.emitter_classes,
        title=definition.title,
        parameters=parameters,
        display_path=definition.folders.display,
    )
    begin = time.perf_counter()
    record.state = "running"
    try:
        outputs = spec.function(MappingProxyType(inputs), node.params, context)
        _check_outputs(where, spec, outputs)
        for port, tables in inputs.items():
            if tables is None:
                continue
            now = [t.fingerprint() for t in (tables if isinstance(tables, tuple) else (tables,))]
            if now != record.inputs[port]:
                raise NodeError(
                    Problem(where, f"the node changed its input {port!r} in place", remedy="work on a copy")
                )
    except RunCancelled:
        record.state = "interrupted"
        raise
    except KeyboardInterrupt:
        record.state = "interrupted"
        raise
    except ShiftfixError as error:
        record.state = "failed"
        emit(Event("node_failed", node.name, text=str(error)))
        if not isinstance(error, NodeError):
            error.add_note(f"in node {node.name}")
        raise
    except Exception as error:
        record.state = "failed"
        emit(Event("node_failed", node.name, text=f"{type(error).__name__}: {error}"))
        shapes = ", ".join(f"{p}: {len(t)} rows" for p, t in inputs.items() if isinstance(t, Table))
        # Only a module that is not there can be installed; a name that a module lacks is a fault of the plugin.
        library = (getattr(error, "name", None) or "").partition(".")[0] if isinstance(error, ModuleNotFoundError) else ""
        if library and library != plugin.module.partition(".")[0]:
            remedy = f"a library is missing: pip install {library}, or the distribution that provides it"
        else:
            remedy = f"report this to the authors of {plugin.distribution}"
        raise NodeError(
            Problem(where, f"failed with {type(error).__name__}: {error}", found=shapes, remedy=remedy)
        ) from error
    finally:
        record.seconds = time.perf_counter() - begin
    for port, table in outputs.items():
        out.tables[f"{node.name}.{port}"] = table
        record.outputs[port] = table.fingerprint()
        record.rows[port] = len(table)
    record.state = "finished"
    emit(
        Event("node_finished", node.name, 1.0, details={"rows": dict(record.rows), "seconds": round(record.seconds, 3)})
    )


def _check_outputs(where: str, spec, outputs: Any) -> None:
    if not isinstance(outputs, Mapping):
        raise NodeError(
            Problem(
                where,
                "gave no mapping of outputs",
                found=type(outputs).__name__,
                allowed=", ".join(spec.outputs) or "{}",
            )
        )
    problems = [Problem(where, f"output {name!r} is missing") for name in spec.outputs if name not in outputs]
    problems += [Problem(where, f"output {name!r} is not declared") for name in outputs if name not in spec.outputs]
    problems += [
        Problem(
            where,
            f"output {name!r} is of another type",
            found=type(outputs[name]).__name__,
            allowed=port.table.__name__,
        )
        for name, port in spec.outputs.items()
        if name in outputs and not isinstance(outputs[name], port.table)
    ]
    if problems:
        raise NodeError(problems)


def final_verdict(definition: Definition, execution: Execution) -> Table | None:
    """Return the table that decides the exit code: the last one with an `exit_code` that no other such table builds on."""
    links = {n: {c.node for group in d.inputs.values() for c in group} for n, d in definition.nodes.items()}
    deciding = {
        name: table for name, table in execution.tables.items() if isinstance(getattr(table, "exit_code", None), int)
    }
    last = None
    for name in definition.order:
        for key, table in deciding.items():
            if key.partition(".")[0] == name and not any(
                k.partition(".")[0] in consumers(links, name) for k in deciding
            ):
                last = table
    return last


def sources_of(execution: Execution) -> list[tuple[str, str]]:
    """Return name and SHA-256 of every file that a reader reported, once, in order."""
    found: dict[tuple[str, str], None] = {}
    for table in execution.tables.values():
        for source in getattr(table, "sources", ()):
            found[(source.name, source.sha256)] = None
    return list(found)


def rejects_of(execution: Execution) -> list[dict[str, Any]]:
    """Return every row that a reader rejected, once."""
    found: dict[tuple, dict[str, Any]] = {}
    for table in execution.tables.values():
        for r in getattr(table, "rejects", ()):
            found[(r.source, r.row_number, r.reason)] = {
                "source": r.source,
                "row_number": r.row_number,
                "reason": r.reason,
            }
    return list(found.values())
