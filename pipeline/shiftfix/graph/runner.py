"""One run from a pipeline file to a result and a run folder: prints nothing, never exits, independent in every thread."""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from shiftfix.errors import RunCancelled, ShiftfixError
from shiftfix.graph import provenance
from shiftfix.graph.definition import Definition, read_definition
from shiftfix.graph.events import Event
from shiftfix.graph.execute import Execution, execute, final_verdict, rejects_of, sources_of
from shiftfix.graph.registry import Registry
from shiftfix.tables.quantities import Quantity
from shiftfix.tables.schema import Table
from shiftfix.tables.solution import Solution
from shiftfix.tables.solution_document import solution_document


@dataclass(frozen=True)
class RunResult:
    """Result of a run.

    Parameters
    ----------
    exit_code : int
        As the command line gives it.
    verdict : str
        Of the solution; `finished` for a pipeline without one, `interrupted` or `failed` otherwise.
    solution : Solution or None
    document : dict or None
        Content of `solution.json`.
    tables : mapping of "node.output" to Table
    products : mapping of file name to bytes
    warnings : tuple of str
    run_folder : Path or None
    error : ShiftfixError or None
        What ended the run early.
    """

    exit_code: int
    verdict: str
    solution: Solution | None
    document: dict[str, Any] | None
    tables: Mapping[str, Table]
    products: Mapping[str, bytes]
    warnings: tuple[str, ...]
    run_folder: Path | None
    error: ShiftfixError | None


def run_pipeline(
    file: str | Path | Definition,
    *,
    out: str | Path | None = None,
    allow: Sequence[str | Path] = (),
    overrides: Sequence[str] = (),
    on_event: Callable[[Event], None] | None = None,
    cancel: threading.Event | None = None,
    seed: int | None = None,
    registry: Registry | None = None,
) -> RunResult:
    """Return the result of a pipeline.

    Parameters
    ----------
    file : path or Definition
    out : path, optional
        Run folder; without it nothing is written.
    allow, overrides : sequence
        As in `read_definition`.
    on_event : callable, optional
        Told every event, in the thread of the run.
    cancel : threading.Event, optional
        Set it to cancel; the run ends at the next check with what is finished.
    seed : int, optional
    registry : Registry, optional

    Raises
    ------
    DefinitionError, PluginError
        Before anything ran. What happens later stands in `error` of the result.
    """
    definition = (
        file
        if isinstance(file, Definition)
        else read_definition(file, allow=allow, overrides=overrides, registry=registry)
    )

    def check_cancelled() -> None:
        if cancel is not None and cancel.is_set():
            raise RunCancelled("the run was cancelled")

    observers = definition.registry.observers()

    def emit(event: Event) -> None:
        if on_event is not None:
            on_event(event)
        for manager in observers:
            try:
                manager.hook.shiftfix_run_event(event=event)
            except Exception as error:
                trouble.append(f"an observer failed at {event.kind}: {type(error).__name__}: {error}")

    trouble: list[str] = []
    folder = Path(out) if out is not None else None
    if folder is not None:
        _clear(folder)
    execution = execute(definition, emit=emit, check_cancelled=check_cancelled, folder=folder, seed=seed)
    return _finish(definition, execution, folder, definition.seed if seed is None else seed, trouble)


def _clear(folder: Path) -> None:
    """Remove the files that an earlier run listed in its record: a run folder holds one run only."""
    import json

    folder.mkdir(parents=True, exist_ok=True)
    try:
        listed = json.loads((folder / provenance.RECORD).read_text())["products"]
    except (OSError, ValueError, KeyError):
        listed = {}
    for name in [provenance.RECORD, provenance.SEAL, provenance.TIMING, *listed]:
        target = folder / name
        if ".." not in Path(name).parts and target.is_file():
            target.unlink()


def _finish(
    definition: Definition, execution: Execution, folder: Path | None, seed: int, trouble: list[str]
) -> RunResult:
    final = final_verdict(definition, execution)
    solution = final if isinstance(final, Solution) else None
    error = execution.error
    if error is not None:
        code = error.exit_code
        verdict = "interrupted" if isinstance(error, RunCancelled) else "failed"
    else:
        code = final.exit_code if final is not None else 0
        verdict = getattr(final, "verdict", "finished")
    document = None
    if solution is not None:
        document = solution_document(solution, title=definition.title, emitter_classes=definition.emitter_classes)
        execution.products["solution.json"] = provenance.json_text(document).encode()
        if folder is not None:
            provenance.write_atomically(folder / "solution.json", execution.products["solution.json"])
    warnings = (*execution.warnings, *trouble)
    if folder is not None:
        provenance.seal(folder, _record(definition, execution, folder, seed, verdict, code, warnings))
        timing = {name: round(r.seconds, 6) for name, r in execution.records.items()}
        provenance.write_atomically(folder / provenance.TIMING, provenance.json_text({"seconds": timing}))
    return RunResult(code, verdict, solution, document, execution.tables, execution.products, warnings, folder, error)


def _record(
    definition, execution: Execution, folder: Path, seed: int, verdict: str, code: int, warnings
) -> dict[str, Any]:
    home = definition.folders.home
    return {
        "schema": provenance.SCHEMA,
        "state": "interrupted"
        if isinstance(execution.error, RunCancelled)
        else "failed"
        if execution.error
        else "finished",
        "verdict": verdict,
        "exit_code": code,
        "title": definition.title,
        "pipeline": {
            "file": definition.path.name,
            "folder": Path(os.path.relpath(home, folder.resolve())).as_posix(),
            "sha256": provenance.sha256(definition.content),
            "overrides": list(definition.overrides),
        },
        "seed": seed,
        "versions": provenance.versions({n.registered.plugin.distribution for n in definition.nodes.values()}),
        "inputs": [{"name": name, "sha256": digest} for name, digest in sources_of(execution)],
        "products": {name: provenance.sha256(content) for name, content in sorted(execution.products.items())},
        "nodes": [
            {
                "name": r.name,
                "use": r.use,
                "plugin": r.plugin,
                "state": r.state,
                "params": {k: _plain(v, definition) for k, v in r.params.items()},
                "inputs": r.inputs,
                "outputs": r.outputs,
                "rows": r.rows,
                "warnings": r.warnings,
                "products": r.products,
            }
            for r in (execution.records[n] for n in definition.order)
        ],
        "earth_orientation": _orientation_name(execution),
        "warnings": list(warnings),
        "rejects": rejects_of(execution),
        "error": str(execution.error) if execution.error else "",
    }


def _orientation_name(execution: Execution) -> str:
    """Return the name of the Earth-orientation table that a node put on its output, else that of the bundled package."""
    from importlib import metadata

    for table in execution.tables.values():
        if type(table).__name__ == "EarthOrientation":
            return table.name
    try:
        return f"bundled: astropy-iers-data {metadata.version('astropy-iers-data')}"
    except metadata.PackageNotFoundError:
        return ""


def _plain(value: Any, definition: Definition) -> Any:
    if isinstance(value, Path):
        return definition.folders.display(value)
    if isinstance(value, Quantity):
        return {"value": value.value, "sigma": value.sigma}
    if isinstance(value, tuple | list):
        return [_plain(v, definition) for v in value]
    if isinstance(value, Mapping):
        return {str(k): _plain(v, definition) for k, v in value.items()}
    if isinstance(value, float) and value != value:
        return None
    return value if isinstance(value, str | int | float | bool | type(None)) else str(value)
