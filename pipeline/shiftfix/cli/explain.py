"""`shiftfix explain`: the resolved plan with every value, its unit and its origin."""

from __future__ import annotations

import click

from shiftfix.cli.options import pipeline_options, toml_text


@click.command("explain")
@pipeline_options
def command(file: str, allow: tuple[str, ...], overrides: tuple[str, ...], as_json: bool, debug: bool) -> int:
    """Show what FILE will do: order, connections, and each parameter with unit, value and origin.

    Example: shiftfix explain demo_tracks/tamsin_pass/pipeline.toml
    """
    import json

    from shiftfix.api import explain_pipeline

    plan = explain_pipeline(file, allow=allow, overrides=overrides)
    if as_json:
        click.echo(json.dumps(plan, indent=1, ensure_ascii=False))
        return 0
    click.echo(f"{plan['title'] or plan['file']}  (seed {plan['seed']})")
    for number, node in enumerate(plan["nodes"], 1):
        click.echo(f"\n{number}. {node['name']}: {node['use']}, {node['plugin']}\n   {node['summary']}")
        for port, sources in node["inputs"].items():
            click.echo(f"   input {port}: {', '.join(sources)}")
        for p in node["params"]:
            click.echo(f"   {p['name']} = {toml_text(p['value'], p['unit'])}   [{p['origin']}]  {p['meaning']}")
    return 0
