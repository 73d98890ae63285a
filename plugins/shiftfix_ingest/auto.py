"""Node `ingest.auto`: the one reader that recognises a file; never a guess between two."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

from shiftfix.api import DefinitionError, FrequencyTable, InputError, Problem, merge_frequency_tables, param
from shiftfix_ingest.source_files import SourceFile, open_sources, repeat_problems

_HEAD_BYTES = 4096


@dataclass(frozen=True)
class AutoParams:
    """Parameters of `ingest.auto`."""

    files: tuple = param("files of any kind that a reader recognises by its first bytes", path="files")
    options: dict = param("parameters for the readers, by qualified node name", default={})
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )


def read_auto(inputs: Any, params: AutoParams, context: Any) -> dict[str, FrequencyTable]:
    """Return the rows of all files, each read by the one reader that recognises it.

    Raises
    ------
    InputError
        A file that is missing, empty or unreadable; one that no reader or more than one reader recognises: with who was
        asked and what each answered.
    DefinitionError
        Options for a reader that does not exist.
    """
    _check_options(params, context)
    files, problems, notes = open_sources(params.files, context.display_path)
    problems += repeat_problems(notes, params.on_repeat)
    chosen = []
    for file in files:
        name, problem = _reader(file, context.readers)
        if problem:
            problems.append(problem)
        else:
            chosen.append((file, name))
    tables = []
    for file, name in chosen:
        context.check_cancelled()
        spec = context.readers[name]
        given = dict(params.options.get(name, {}))
        field = "files" if "files" in spec.params.__dataclass_fields__ else "file"
        given[field] = context.display_path(file.path)
        built = context.parameters(spec.params, given, f"options.{name}")
        try:
            outputs = spec.function({port: None for port in spec.inputs}, built, context)
        except InputError as error:
            problems += error.problems
            continue
        tables += [t for t in outputs.values() if isinstance(t, FrequencyTable)]
    if problems:
        raise InputError(problems)
    table = merge_frequency_tables(tables)
    return {"frequencies": replace(table, notes=(*table.notes, *notes))}


def _check_options(params: AutoParams, context: Any) -> None:
    out = []
    for name, given in params.options.items():
        where = f"nodes.{context.node}.params.options.{name}"
        if name not in context.readers:
            close = difflib.get_close_matches(name, context.readers, 1)
            out.append(
                Problem(
                    where,
                    "options for a reader that does not exist",
                    found=name,
                    allowed=", ".join(sorted(context.readers)),
                    remedy=f"did you mean {close[0]}?" if close else "",
                )
            )
        elif not isinstance(given, Mapping):
            out.append(Problem(where, "not a table of parameters", found=repr(given)))
    if out:
        raise DefinitionError(out)


def _reader(file: SourceFile, readers: Mapping[str, Any]) -> tuple[str, Problem | None]:
    """Return the name of the one reader of frequencies that says yes, or what everybody said."""
    with open(file.path, "rb") as stream:
        head = stream.read(_HEAD_BYTES)
    answers, yes = {}, []
    for name, spec in readers.items():
        frequencies = any(port.table is FrequencyTable for port in spec.outputs.values())
        try:
            answer = "yes" if spec.recognise(file.path, head) else "no"
        except Exception as error:
            answer = f"failed ({type(error).__name__}: {error})"
        if answer == "yes" and frequencies:
            yes.append(name)
        if answer == "yes" and not frequencies:
            answer = "yes, but gives " + ", ".join(port.table.__name__ for port in spec.outputs.values())
        answers[name] = answer
    if len(yes) == 1:
        return yes[0], None
    return "", Problem(
        file.name,
        "more than one reader recognises this file" if yes else "no reader recognises this file",
        found="; ".join(f"{n}: {a}" for n, a in sorted(answers.items())),
        allowed="exactly one yes",
        remedy="name the node that you mean"
        if yes
        else "name a node (such as ingest.delimited, with its columns), or install a plugin for this format",
    )
