"""`shiftfix nodes`: what can stand in a pipeline file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import click

from shiftfix.cli.options import debug_option, json_option, toml_text


@click.command("nodes")
@click.argument("name", required=False)
@json_option
@debug_option
def command(name: str | None, as_json: bool, debug: bool) -> int:
    """List all nodes and motions, or describe the node (such as ingest.tdm) or motion (such as orbit) NAME.

    \b
    Examples:
      shiftfix nodes solve.fix
      shiftfix nodes surface
    """
    import json

    from shiftfix.api import describe_motion, describe_node, list_motions, list_nodes

    if name and "." not in name:
        motion = describe_motion(name)
        if as_json:
            click.echo(json.dumps(motion, indent=1, ensure_ascii=False))
            return 0
        click.echo(f"motion {motion['name']}: {motion['summary']}")
        for p in motion["options"]:
            click.echo(_line("motion_options", p))
        return 0
    if name:
        node = describe_node(name)
        if as_json:
            click.echo(json.dumps(node, indent=1, ensure_ascii=False))
            return 0
        click.echo(f"{node['name']}: {node['summary']}\n  from {node['plugin']}")
        for side in ("inputs", "outputs"):
            for port in node[side]:
                extra = ", optional" if port["optional"] else ""
                extra += ", takes a list" if port["many"] else ""
                click.echo(f"  {side[:-1]} {port['name']}: {port['table']}{extra}  {port['meaning']}")
        for p in node["params"]:
            click.echo(_line("params", p))
        return 0
    nodes, motions = list_nodes(), list_motions()
    if as_json:
        click.echo(json.dumps({"nodes": nodes, "motions": motions}, indent=1, ensure_ascii=False))
        return 0
    width = max((len(n["name"]) for n in nodes), default=0)
    for node in nodes:
        click.echo(f"{node['name']:<{width}}  {node['summary']}")
    click.echo("\nmotions")
    for motion in motions:
        click.echo(f"{motion['name']:<{width}}  {motion['summary']}")
    return 0


def _line(table: str, p: Mapping[str, Any]) -> str:
    unit = f" [{p['unit']}]" if p["unit"] and p["unit"] != "1" else ""
    default = "required" if p["required"] else f"default {toml_text(p['default'], p['unit'])}"
    choices = f"  (one of {', '.join(p['choices'])})" if p["choices"] else ""
    return f"  {table}.{p['name']}{unit}, {default}: {p['meaning']}{choices}"
