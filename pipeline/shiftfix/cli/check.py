"""`shiftfix check`: everything that can be wrong with a pipeline file, at once; no data are touched."""

from __future__ import annotations

import click

from shiftfix.cli.options import pipeline_options


@click.command("check")
@pipeline_options
def command(file: str, allow: tuple[str, ...], overrides: tuple[str, ...], as_json: bool, debug: bool) -> int:
    """Check FILE: nodes, connections, units, bounds and paths; all problems come in one message.

    Example: shiftfix check demo_tracks/tamsin_pass/pipeline.toml
    """
    import json

    from shiftfix.errors import DefinitionError
    from shiftfix.graph.definition import read_definition

    try:
        definition = read_definition(file, allow=allow, overrides=overrides)
    except DefinitionError as error:
        if not as_json:
            raise
        click.echo(json.dumps({"valid": False, "problems": [vars(p) for p in error.problems]}, indent=1))
        return error.exit_code
    if as_json:
        click.echo(json.dumps({"valid": True, "nodes": list(definition.order), "problems": []}, indent=1))
    else:
        click.echo(f"{definition.path.name}: valid, {len(definition.nodes)} nodes: {' -> '.join(definition.order)}")
    return 0
