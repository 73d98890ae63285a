"""Options that several commands share."""

from __future__ import annotations

from collections.abc import Callable

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


def pipeline_options(function: Callable) -> Callable:
    """Add the file argument and the options of all commands that read a pipeline file."""
    for option in (debug_option, json_option, set_option, allow_option, file_argument):
        function = option(function)
    return function
