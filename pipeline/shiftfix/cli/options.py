"""Options that several commands share."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import click

file_argument = click.argument("file", type=click.Path())
json_option = click.option("--json", "as_json", is_flag=True, help="Print the result as JSON.")
debug_option = click.option("--debug", is_flag=True, help="Show the traceback of a failure.")
allow_option = click.option(
    "--allow",
    multiple=True,
    metavar="FOLDER",
    type=click.Path(exists=True, file_okay=False),
    help="Allow files of this folder too; repeatable.",
)
set_option = click.option(
    "--set",
    "overrides",
    multiple=True,
    metavar="PATH=VALUE",
    help="Override a value, as in nodes.fix.params.loss=plain; repeatable.",
)


def toml_text(value: Any, unit: str = "") -> str:
    """Return a value as one writes it in a pipeline file, a quantity with its unit; `none` when it is not there."""
    if value is None:
        return "none"
    if unit and not isinstance(value, list | tuple):
        text = value if isinstance(value, str) else f"{value:.15g}"
        return json.dumps(" +/- ".join(f"{part} {unit}" if unit != "1" else part for part in text.split(" +/- ")))
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{k} = {toml_text(v)}" for k, v in value.items()) + " }" if value else "{}"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(toml_text(v, unit) for v in value) + "]"
    return json.dumps(value, ensure_ascii=False) if isinstance(value, str) else f"{value:.15g}"


def pipeline_options(function: Callable) -> Callable:
    """Add the file argument and the options of all commands that read a pipeline file."""
    for option in (debug_option, json_option, set_option, allow_option, file_argument):
        function = option(function)
    return function
