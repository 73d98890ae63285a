"""`shiftfix plugins`: every plugin of this environment, broken ones with their own error."""

from __future__ import annotations

import click

from shiftfix.cli.options import debug_option, json_option


@click.command("plugins")
@click.option("--probe", is_flag=True, help="Import each plugin and show the error of those that fail.")
@json_option
@debug_option
def command(probe: bool, as_json: bool, debug: bool) -> int:
    """List the plugins with distribution, version and state; without --probe none is imported.

    A plugin whose module cannot be found is listed as broken either way.
    """
    import json

    from shiftfix.graph.registry import Registry

    registry = Registry()
    entries = registry.probed() if probe else registry.entries()
    if as_json:
        click.echo(json.dumps([vars(e) for e in entries], indent=1))
        return 0
    for entry in entries:
        click.echo(f"{entry.name:<12} {entry.distribution} {entry.version}  {entry.state}  {entry.module}")
        if entry.error:
            click.echo("    " + entry.error.replace("\n", "\n    "))
    return 0
