"""Overrides from the command line: `nodes.fix.params.motion=orbit`, the value in TOML or as plain text."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping, Sequence
from typing import Any

from shiftfix.errors import Problem


def plain_values(value: Any) -> Any:
    """Return tables and lists of a document as new dictionaries and lists."""
    if isinstance(value, Mapping):
        return {k: plain_values(v) for k, v in value.items()}
    return [plain_values(v) for v in value] if isinstance(value, list) else value


def apply_overrides(values: dict, overrides: Sequence[str]) -> tuple[dict[tuple, str], list[Problem]]:
    """Change values in place; return the changed paths with their texts, and the problems."""
    changed: dict[tuple, str] = {}
    problems = []
    for text in overrides:
        key, sign, raw = text.partition("=")
        parts = tuple(p.strip() for p in key.split("."))
        if not sign or not all(parts):
            problems.append(
                Problem(f"--set {text}", "not of the form PATH=VALUE", allowed="nodes.NODE.params.NAME=VALUE")
            )
            continue
        try:
            value = tomllib.loads(f"v = {raw}")["v"]
        except tomllib.TOMLDecodeError:
            value = raw
        nodes = values.get("nodes", {})
        if parts[0] == "nodes" and (len(parts) < 4 or not isinstance(nodes, dict) or parts[1] not in nodes):
            problems.append(
                Problem(
                    f"--set {text}",
                    "no such value in the pipeline file",
                    found=key,
                    allowed="nodes.NODE.params.NAME=VALUE",
                )
            )
            continue
        target: Any = values
        for part in parts[:-1]:
            target = target.setdefault(part, {}) if isinstance(target, dict) else None
        if not isinstance(target, dict):
            problems.append(Problem(f"--set {text}", "a value stands where a table is needed", found=key))
            continue
        target[parts[-1]] = value
        changed[parts] = text
    return changed, problems
