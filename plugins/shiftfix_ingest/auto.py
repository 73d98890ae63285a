"""Node `ingest.auto`: the one reader that recognises a file; never a guess between two."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from shiftfix.api import FrequencyTable, InputError, Problem, merge_frequency_tables, param
from shiftfix_ingest.source_files import open_sources


@dataclass(frozen=True)
class AutoParams:
    """Parameters of `ingest.auto`."""

    files: tuple = param("files of any kind that a reader recognises by its first bytes", path="files")
    options: dict = param("parameters for the readers, by qualified node name", default={})


def read_auto(inputs: Any, params: AutoParams, context: Any) -> dict[str, FrequencyTable]:
    """Return the rows of all files, each read by the one reader that recognises it.

    Raises
    ------
    InputError
        A file that is missing, empty or unreadable; one that no reader or more than one reader recognises: with who was
        asked and what each answered.
    """
    files, problems, _ = open_sources(params.files, context.display_path)
    chosen = []
    for file in files:
        answers = {}
        for name, spec in context.readers.items():
            if not any(port.table is FrequencyTable for port in spec.outputs.values()):
                continue
            try:
                answers[name] = "yes" if spec.recognise(file.path, file.data[:4096]) else "no"
            except Exception as error:
                answers[name] = f"failed ({type(error).__name__})"
        said = ", ".join(f"{n}: {a}" for n, a in sorted(answers.items()))
        yes = [n for n, a in answers.items() if a == "yes"]
        if len(yes) == 1:
            chosen.append((file, context.readers[yes[0]], yes[0]))
        elif yes:
            problems.append(
                Problem(
                    file.name,
                    "more than one reader recognises this file",
                    found=said,
                    remedy="name the node that you mean",
                )
            )
        else:
            problems.append(
                Problem(
                    file.name,
                    "no reader recognises this file",
                    found=said,
                    remedy="name a node (such as ingest.delimited), or install a plugin for this format",
                )
            )
    if problems:
        raise InputError(problems)
    tables = []
    for file, spec, name in chosen:
        given = dict(params.options.get(name, {}))
        field = "files" if "files" in spec.params.__dataclass_fields__ else "file"
        given[field] = context.display_path(file.path)
        built = context.parameters(spec.params, given, f"options.{name}")
        outputs = spec.function({}, built, context)
        tables += [t for t in outputs.values() if isinstance(t, FrequencyTable)]
    return {"frequencies": merge_frequency_tables(tables)}
