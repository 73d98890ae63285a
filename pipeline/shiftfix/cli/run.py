"""`shiftfix run`: run a pipeline, show progress on a terminal's stderr, print the answer on stdout."""

from __future__ import annotations

import click

from shiftfix.cli.options import pipeline_options


@click.command("run")
@pipeline_options
@click.option("--out", type=click.Path(file_okay=False), help="Run folder; runs/NAME-OF-THE-FILE when absent.")
@click.option("--seed", type=click.IntRange(0), help="Seed in place of that of the file.")
@click.option("--keep-all", is_flag=True, help="Use every row: no flag, gate or weight leaves one out.")
@click.option("--quiet", is_flag=True, help="No progress, no warnings on stderr.")
def command(
    file: str,
    allow: tuple[str, ...],
    overrides: tuple[str, ...],
    as_json: bool,
    debug: bool,
    out: str | None,
    seed: int | None,
    quiet: bool,
    keep_all: bool,
) -> int:
    """Run the pipeline FILE and write its run folder.

    \b
    Examples:
      shiftfix run demo_tracks/tamsin_pass/pipeline.toml
      shiftfix run night.toml --out archive/2026-03-01 --set nodes.fix.params.loss=plain --json
    """
    import sys
    from pathlib import Path

    from shiftfix.cli.progress import observer
    from shiftfix.cli.summary import summary_lines
    from shiftfix.graph.definition import read_definition
    from shiftfix.graph.provenance import json_text
    from shiftfix.graph.runner import run_pipeline

    folder = Path(out) if out else Path("runs") / Path(file).stem
    if keep_all:
        definition = read_definition(file, allow=allow, overrides=overrides)
        overrides = (
            *overrides,
            *(
                f"nodes.{n}.params.keep_all=true"
                for n, node in definition.nodes.items()
                if hasattr(node.params, "keep_all")
            ),
        )
    show = observer(sys.stderr, quiet)
    try:
        with show:
            result = run_pipeline(file, out=folder, allow=allow, overrides=overrides, seed=seed, on_event=show)
    except OSError as error:
        # Input files are opened inside nodes, which wrap their errors: what comes here is the run folder.
        text = f"the run folder {folder} cannot be written: {error.strerror or error}"
        raise click.BadParameter(text, param_hint="--out") from error
    if not quiet:
        for warning in result.warnings:
            click.echo(f"warning: {warning}", err=True)
    if result.error is not None:
        if debug:
            raise result.error
        notes = getattr(result.error, "__notes__", [])
        click.echo("\n".join([str(result.error), *notes]), err=True)
        click.echo(f"run folder: {folder}", err=True)
        if as_json:
            click.echo(
                json_text({"verdict": result.verdict, "exit_code": result.exit_code, "error": str(result.error)}),
                nl=False,
            )
        return result.exit_code
    if as_json:
        click.echo(json_text(result.document or {"verdict": result.verdict, "exit_code": result.exit_code}), nl=False)
    elif result.document:
        click.echo("\n".join(summary_lines(result.document)))
        click.echo(f"run folder: {folder}")
    else:
        click.echo(f"{result.verdict}; run folder: {folder}")
    return result.exit_code
