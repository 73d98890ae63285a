"""Values as `nodes` and `explain` show them: one can paste them back into a pipeline file."""

from __future__ import annotations

import tomllib

import pytest

from shiftfix.api import describe_motion, describe_node, list_motions, list_nodes, parse_quantity
from shiftfix.cli.options import toml_text


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (None, "Hz", "none"),
        (True, "", "true"),
        (3e-9, "1/s", '"3e-09 1/s"'),
        (1e-11, "1", '"1e-11"'),
        ("0 +/- 30", "m", '"0 m +/- 30 m"'),
        ([1.5, 2.0], "s", '["1.5 s", "2 s"]'),
        ({"a": "x", "b": [1, False]}, "", '{ a = "x", b = [1, false] }'),
        ("", "", '""'),
        ({}, "", "{}"),
    ],
)
def test_a_value_is_shown_as_it_is_written(value, unit, text):
    assert toml_text(value, unit) == text
    if value is not None:
        tomllib.loads(f"v = {text}")


def test_every_default_with_a_unit_can_be_pasted_back():
    described = [describe_node(n["name"])["params"] for n in list_nodes()]
    described += [describe_motion(m["name"])["options"] for m in list_motions()]
    checked = 0
    for p in (p for params in described for p in params):
        if not p["unit"] or p["default"] in (None, []):
            continue
        quantity = parse_quantity(tomllib.loads(f"v = {toml_text(p['default'], p['unit'])}")["v"], p["unit"], sigma_allowed=True)
        shown = p["default"].split(" +/- ") if isinstance(p["default"], str) else [p["default"]]
        assert [quantity.value, quantity.sigma][: len(shown)] == [float(s) for s in shown], p["name"]
        checked += 1
    assert checked > 20
