"""Forty seeded mistakes in a pipeline file: each is named with its line, column, path and a hint, all in one message."""

from __future__ import annotations

import pytest

from shiftfix.api import DefinitionError, check_pipeline

GOOD = """shiftfix = 1
title = "Soup"
emitter_classes = ["maritime"]

[nodes.stock]
use = "kitchen.pantry"
params.items = ["water", "salt"]
params.portions = 4
params.cooling = "2 min"
params.heat = "low"

[nodes.soup]
use = "kitchen.cook"
inputs.things = ["stock"]

[nodes.menu]
use = "kitchen.serve"
inputs.dish = "soup"
"""

# What is replaced, by what, where the message points, and words that it must contain.
MISTAKES = [
    ("shiftfix = 1\n", "", "meal.toml:1:1", "format version is missing"),
    ("shiftfix = 1", "shiftfix = 2", "meal.toml:1:12: shiftfix", "unknown version"),
    ("shiftfix = 1", 'shiftfix = "1"', "meal.toml:1:12: shiftfix", "unknown version"),
    ("shiftfix = 1", "shiftfix = true", "meal.toml:1:12: shiftfix", "unknown version"),
    ('title = "Soup"', "title = 5", "meal.toml:2:9: title", "not a text"),
    ('title = "Soup"', 'titel = "Soup"', "meal.toml:2:1: titel", "did you mean title?"),
    ('title = "Soup"', 'title = "Soup"\nseed = -1', "meal.toml:3:8: seed", "whole number"),
    ('title = "Soup"', 'title = "Soup"\nseed = 1.5', "meal.toml:3:8: seed", "whole number"),
    ('title = "Soup"', 'title = "Soup', "meal.toml:2:", "not valid TOML"),
    ('["maritime"]', '["martime"]', "meal.toml:3:20: emitter_classes.0", "did you mean maritime?"),
    ('["maritime"]', '"maritime"', "meal.toml:3:19: emitter_classes", "not a list"),
    ("[nodes.stock]", "[nodes.stock.deep]", "meal.toml:5:1: nodes.stock", "does not say what it uses"),
    ('use = "kitchen.pantry"', "", "meal.toml:5:1: nodes.stock", "does not say what it uses"),
    ('use = "kitchen.pantry"', "use = 3", "meal.toml:6:7: nodes.stock.use", "does not say what it uses"),
    ('use = "kitchen.pantry"', 'use = "pantry"', "meal.toml:6:7: nodes.stock.use", "not a qualified node name"),
    ('use = "kitchen.pantry"', 'use = "kitchn.pantry"', "meal.toml:6:7: nodes.stock.use", "did you mean kitchen?"),
    (
        'use = "kitchen.pantry"',
        'use = "kitchen.pantri"',
        "meal.toml:6:7: nodes.stock.use",
        "did you mean kitchen.pantry?",
    ),
    ('use = "kitchen.pantry"', 'uses = "kitchen.pantry"', "meal.toml:6:1: nodes.stock.uses", "did you mean use?"),
    ("params.items =", "parms.items =", "meal.toml:7:1: nodes.stock.parms", "did you mean params?"),
    ("params.items =", "params.item =", "meal.toml:7:1: nodes.stock.params.item", "did you mean items?"),
    ('["water", "salt"]', '"water"', "meal.toml:7:16: nodes.stock.params.items", "not a list"),
    ('["water", "salt"]', '["water", 3]', "meal.toml:7:26: nodes.stock.params.items.1", "not a text"),
    ("portions = 4", 'portions = "4"', "meal.toml:8:19: nodes.stock.params.portions", "whole number"),
    ("portions = 4", "portions = 4.0", "meal.toml:8:19: nodes.stock.params.portions", "whole number"),
    ("portions = 4", "portions = 0", "meal.toml:8:19: nodes.stock.params.portions", "from 1 to 12"),
    ("portions = 4", "portions = 40", "meal.toml:8:19: nodes.stock.params.portions", "above its upper bound"),
    ('cooling = "2 min"', "cooling = 120", "meal.toml:9:18: nodes.stock.params.cooling", "bare number"),
    (
        'cooling = "2 min"',
        'cooling = "2 m"',
        "meal.toml:9:18: nodes.stock.params.cooling",
        "a quantity in m; needed is one in s",
    ),
    ('cooling = "2 min"', 'cooling = "3 h"', "meal.toml:9:18: nodes.stock.params.cooling", "above its upper bound"),
    (
        'cooling = "2 min"',
        'cooling = "2 min +/- 1 s"',
        "meal.toml:9:18: nodes.stock.params.cooling",
        "not allowed here",
    ),
    ('heat = "low"', 'heat = "lo"', "meal.toml:10:15: nodes.stock.params.heat", "did you mean low?"),
    ('heat = "low"', 'salted = "yes"', "meal.toml:10:17: nodes.stock.params.salted", "true or false"),
    ('heat = "low"', 'book = "/etc/passwd"', "meal.toml:10:15: nodes.stock.params.book", "only paths relative"),
    ('heat = "low"', 'book = "../*.txt"', "meal.toml:10:15: nodes.stock.params.book", "leaves the pipeline's folder"),
    ('inputs.things = ["stock"]', "", "meal.toml:12:1: nodes.soup", "input 'things' is not connected"),
    (
        'inputs.things = ["stock"]',
        'inputs.thing = ["stock"]',
        "meal.toml:14:1: nodes.soup.inputs.thing",
        "did you mean things?",
    ),
    (
        'inputs.things = ["stock"]',
        'inputs.things = ["stok"]',
        "meal.toml:14:18: nodes.soup.inputs.things.0",
        "did you mean stock?",
    ),
    (
        'inputs.things = ["stock"]',
        'inputs.things = ["stock.thing"]',
        "meal.toml:14:18: nodes.soup.inputs.things.0",
        "did you mean things?",
    ),
    (
        'inputs.things = ["stock"]',
        "inputs.things = []",
        "meal.toml:14:17: nodes.soup.inputs.things",
        "the list is empty",
    ),
    ('inputs.things = ["stock"]', "inputs.things = 7", "meal.toml:14:17: nodes.soup.inputs.things", "name of a node"),
    ('inputs.dish = "soup"', 'inputs.dish = "stock"', "meal.toml:18:15: nodes.menu.inputs.dish", "another type"),
    (
        'inputs.dish = "soup"',
        'inputs.dish = ["soup"]',
        "meal.toml:18:15: nodes.menu.inputs.dish",
        "takes one connection",
    ),
    ('inputs.dish = "soup"', 'inputs.dish = "menu"', "meal.toml:18:15: nodes.menu.inputs.dish", "has 0 outputs"),
    (
        'inputs.things = ["stock"]',
        'inputs.things = ["twin"]\n[nodes.twin]\nuse = "kitchen.twins"',
        "meal.toml:14:18",
        "has 2 outputs: name one",
    ),
    ("[nodes.menu]", '[nodes."menu!"]', "meal.toml:16:1: nodes.menu!", "bad node name"),
]


@pytest.mark.parametrize("number", range(len(MISTAKES)))
def test_each_mistake_is_named_at_its_place(number, tmp_path, kitchen):
    old, new, where, words = MISTAKES[number]
    assert old in GOOD
    path = tmp_path / "meal.toml"
    path.write_text(GOOD.replace(old, new, 1))
    with pytest.raises(DefinitionError) as caught:
        check_pipeline(path, registry=kitchen)
    named = [p for p in caught.value.problems if p.where.startswith(where) and words in str(p)]
    assert named, str(caught.value)


MOTION = """shiftfix = 1
[nodes.stations]
use = "ingest.stations"
params.file = "s.toml"
[nodes.log]
use = "ingest.tdm"
params.files = "*.tdm"
[nodes.starts]
use = "solve.search"
inputs = { frequencies = "log", stations = "stations" }
params.motion = "surface"
params.motion_options = { legs = 2, height = "0 m +/- 5 m" }
[nodes.fix]
use = "solve.fix"
inputs = { frequencies = "log", stations = "stations", starts = "starts" }
"""


@pytest.mark.parametrize(
    ("old", "new", "where", "words"),
    [
        ('"surface"', '"surfce"', "p.toml:11:17: nodes.starts.params.motion:", "did you mean surface?"),
        ("legs = 2", "legs = 0", "p.toml:12:34: nodes.starts.params.motion_options.legs:", "from 1 to 6"),
        ("legs = 2", "leg = 2", "p.toml:12:27: nodes.starts.params.motion_options.leg:", "did you mean legs?"),
        ('"0 m +/- 5 m"', "0.0", "p.toml:12:46: nodes.starts.params.motion_options.height:", "bare number"),
        ('starts = "starts" }', 'starts = "starts" }\nparams.motion = "orbits"', "p.toml:16:17: nodes.fix.params.motion:", "orbit?"),
    ],
)
def test_motions_and_their_options_are_checked_with_the_file(old, new, where, words, tmp_path):
    path = tmp_path / "p.toml"
    path.write_text(MOTION)
    assert check_pipeline(path)
    path.write_text(MOTION.replace(old, new, 1))
    with pytest.raises(DefinitionError) as caught:
        check_pipeline(path)
    assert [str(p) for p in caught.value.problems if str(p).startswith(where) and words in str(p)], str(caught.value)
    assert len(caught.value.problems) == 1


@pytest.mark.parametrize(
    ("given", "allowed"),
    [
        ({"minimum": 0.0, "unit": "Hz"}, ", 0 Hz or more"),
        ({"maximum": 90.0, "unit": "deg"}, ", 90 deg or less"),
        ({"minimum": 1, "maximum": 12}, ", from 1 to 12"),
        ({"minimum": 0.5, "maximum": 1.0, "unit": "1"}, ", from 0.5 to 1"),
        ({}, ""),
    ],
)
def test_bounds_are_said_with_their_unit(given, allowed):
    from shiftfix.graph.parameters import _bounds

    assert _bounds(given) == allowed


def test_there_are_forty_and_the_good_file_passes(tmp_path, kitchen):
    assert len(MISTAKES) >= 40
    path = tmp_path / "meal.toml"
    path.write_text(GOOD)
    assert check_pipeline(path, registry=kitchen).order == ("stock", "soup", "menu")


def test_all_problems_come_in_one_message_in_the_order_of_the_file(tmp_path, kitchen):
    text = GOOD
    for number in (5, 9, 23, 27, 34):
        text = text.replace(*MISTAKES[number][:2], 1)
    path = tmp_path / "meal.toml"
    path.write_text(text)
    with pytest.raises(DefinitionError) as caught:
        check_pipeline(path, registry=kitchen)
    lines = [int(p.where.split(":")[1]) for p in caught.value.problems]
    assert len(lines) == 5 and lines == sorted(lines)


def test_circle_is_shown(tmp_path, kitchen):
    text = 'shiftfix = 1\n[nodes.a]\nuse = "kitchen.serve"\ninputs.dish = "b"\n'
    text += '[nodes.b]\nuse = "kitchen.cook"\ninputs.things = ["c"]\n'
    path = tmp_path / "meal.toml"
    path.write_text(text + '[nodes.c]\nuse = "kitchen.cook"\ninputs.things = ["b"]\n')
    with pytest.raises(DefinitionError) as caught:
        check_pipeline(path, registry=kitchen)
    assert "another type" in str(caught.value)


def test_symlink_out_of_the_folder_is_refused_unless_allowed(tmp_path, kitchen):
    outside = tmp_path / "outside"
    outside.mkdir()
    (outside / "r.txt").write_text("x")
    inside = tmp_path / "inside"
    inside.mkdir()
    (inside / "link").symlink_to(outside)
    path = inside / "meal.toml"
    path.write_text(GOOD.replace('heat = "low"', 'book = "link/*.txt"'))
    with pytest.raises(DefinitionError, match="leaves the pipeline's folder"):
        check_pipeline(path, registry=kitchen)
    assert check_pipeline(path, registry=kitchen, allow=[outside])


@pytest.mark.parametrize("raw", ["~/x", "a\\\\b", "C:/x", "file://x"])
def test_hostile_paths_are_refused(tmp_path, kitchen, raw):
    path = tmp_path / "meal.toml"
    path.write_text(GOOD.replace('heat = "low"', f'book = "{raw}"'))
    with pytest.raises(DefinitionError, match="only paths relative"):
        check_pipeline(path, registry=kitchen)


def test_override_changes_a_value_and_says_so(tmp_path, kitchen):
    from shiftfix.api import explain_pipeline

    path = tmp_path / "meal.toml"
    path.write_text(GOOD)
    plan = explain_pipeline(path, registry=kitchen, overrides=["nodes.stock.params.heat=high"])
    heat = next(p for p in plan["nodes"][0]["params"] if p["name"] == "heat")
    assert heat["value"] == "high" and heat["origin"] == "--set nodes.stock.params.heat=high"
    for bad in ("nodes.stok.params.heat=high", "heat", "nodes.stock.params.heat=hot", "nodes.stock.use"):
        with pytest.raises(DefinitionError, match="--set"):
            check_pipeline(path, registry=kitchen, overrides=[bad])


def test_every_default_has_its_origin(tmp_path, kitchen):
    from shiftfix.api import explain_pipeline

    path = tmp_path / "meal.toml"
    path.write_text(GOOD)
    params = {p["name"]: p for p in explain_pipeline(path, registry=kitchen)["nodes"][0]["params"]}
    assert params["salted"]["origin"] == "default"
    assert (
        params["cooling"]["origin"] == "meal.toml:9:18"
        and params["cooling"]["value"] == 120.0
        and params["cooling"]["unit"] == "s"
    )
