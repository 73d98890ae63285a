"""`shiftfix verify`: one changed byte anywhere in a run folder or its inputs is found."""

from __future__ import annotations

import click

from shiftfix.cli.options import debug_option, json_option


@click.command("verify")
@click.argument("run", type=click.Path(exists=True, file_okay=False))
@json_option
@debug_option
def command(run: str, as_json: bool, debug: bool) -> int:
    """Compare the run folder RUN, its pipeline file and its inputs with the recorded hashes.

    Example: shiftfix verify runs/pipeline
    """
    import json

    from shiftfix.errors import VerificationError
    from shiftfix.graph.provenance import verify_run

    try:
        record = verify_run(run)
    except VerificationError as error:
        if not as_json:
            raise
        click.echo(json.dumps({"unchanged": False, "problems": [vars(p) for p in error.problems]}, indent=1))
        return error.exit_code
    count = len(record["products"]) + len(record["inputs"]) + 2
    if as_json:
        click.echo(json.dumps({"unchanged": True, "files": count, "problems": []}, indent=1))
    else:
        click.echo(f"unchanged: {count} files match the record of the run")
    return 0
