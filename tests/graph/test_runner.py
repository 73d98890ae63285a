"""The runner with cooking recipes: it knows no physics, loses nothing, and leaves a folder that can be verified."""

from __future__ import annotations

import json
import threading

import pytest
import recipes

from shiftfix.api import (
    DefinitionError,
    NodeError,
    PluginError,
    Registry,
    VerificationError,
    list_plugins,
    run_pipeline,
    verify_run,
)

MEAL = """shiftfix = 1
title = "Soup"
[nodes.menu]
use = "kitchen.serve"
inputs.dish = "soup"
[nodes.stock]
use = "kitchen.pantry"
params.items = ["water", "salt"]
[nodes.garden]
use = "kitchen.pantry"
params = { items = ["leek"], cooling = "2 min" }
[nodes.soup]
use = "kitchen.cook"
inputs.things = ["stock", "garden.things"]
"""


@pytest.fixture
def meal(tmp_path):
    def write(text=MEAL):
        path = tmp_path / "meal.toml"
        path.write_text(text)
        return path

    return write


def test_recipes_run_in_order_and_say_so(meal, kitchen, tmp_path, capsys):
    events = []
    result = run_pipeline(meal(), out=tmp_path / "run", registry=kitchen, on_event=events.append)
    assert result.error is None and result.exit_code == 0 and result.verdict == "finished"
    assert (tmp_path / "run" / "menu.txt").read_text().splitlines()[:3] == ["water", "salt", "leek"]
    kinds = [(e.kind, e.node) for e in events if e.kind != "node_progress"]
    assert kinds[0] == ("run_started", "") and kinds[-1] == ("run_finished", "")
    finished = [n for k, n in kinds if k == "node_finished"]
    assert finished == ["stock", "garden", "soup", "menu"]
    assert ("node_warning", "soup") in kinds
    assert result.warnings == ("soup: the soup is hot",)
    assert capsys.readouterr() == ("", ""), "the runner prints nothing"


def test_same_input_twice_gives_the_same_bytes(meal, kitchen, tmp_path):
    for name in ("a", "b"):
        run_pipeline(meal(), out=tmp_path / name, registry=kitchen)
    files = sorted(p.name for p in (tmp_path / "a").iterdir())
    assert files == sorted(p.name for p in (tmp_path / "b").iterdir())
    for name in files:
        if name != "timing.json":
            assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
    run_pipeline(meal(), out=tmp_path / "c", registry=kitchen, seed=5)
    assert (tmp_path / "c" / "menu.txt").read_bytes() != (tmp_path / "a" / "menu.txt").read_bytes()


def test_two_runs_in_two_threads_do_not_meet(meal, kitchen, tmp_path):
    path, results = meal(), {}

    def work(name, seed):
        results[name] = run_pipeline(path, out=tmp_path / name, registry=kitchen, seed=seed)

    threads = [threading.Thread(target=work, args=(f"t{k}", k % 2)) for k in range(8)]
    for t in threads:
        t.start()
    for t in threads:
        t.join()
    menus = {n: (tmp_path / n / "menu.txt").read_text() for n in results}
    assert len(set(menus.values())) == 2
    assert menus["t0"] == menus["t2"] != menus["t1"] == menus["t3"]


@pytest.mark.parametrize(
    ("misdeed", "words"),
    [
        ("raise", "the pot boils over"),
        ("import", "pip install saffron, or"),
        ("name", "report this to the authors of toy-kitchen"),
        ("own", "report this to the authors of toy-kitchen"),
        ("wrong", "output 'dish' is missing"),
        ("surplus", "output 'crumbs' is not declared"),
        ("nothing", "gave no mapping"),
    ],
)
def test_failing_node_is_named_with_its_plugin(meal, kitchen, tmp_path, misdeed, words):
    result = run_pipeline(meal(MEAL + f'params.misdeed = "{misdeed}"\n'), out=tmp_path / "run", registry=kitchen)
    assert isinstance(result.error, NodeError) and result.exit_code == 7
    for word in ("node soup", "kitchen.cook", "toy-kitchen 1.2", words):
        assert word in str(result.error)
    record = verify_run(tmp_path / "run")
    assert record["state"] == "failed"
    assert {n["name"]: n["state"] for n in record["nodes"]}["soup"] == "failed"


def test_input_changed_in_place_is_refused_or_impossible(meal, kitchen, tmp_path):
    result = run_pipeline(meal(MEAL + 'params.misdeed = "change"\n'), out=tmp_path / "run", registry=kitchen)
    # pandas' copy-on-write refuses the write itself, or the fingerprint shows it: either way the node fails.
    assert isinstance(result.error, NodeError)


def test_two_nodes_that_make_one_product_are_told_to_the_user(meal, kitchen):
    text = MEAL + '[nodes.again]\nuse = "kitchen.serve"\ninputs.dish = "soup"\n'
    result = run_pipeline(meal(text), registry=kitchen)
    assert isinstance(result.error, DefinitionError) and result.exit_code == 3
    assert "nodes.again: node 'menu' made a product called 'menu.txt' already" in str(result.error)


def test_products_stay_in_the_run_folder(meal, kitchen, tmp_path):
    text = MEAL.replace('inputs.dish = "soup"', 'inputs.dish = "soup"\nparams.misdeed = "escape"')
    result = run_pipeline(meal(text), out=tmp_path / "run", registry=kitchen)
    assert isinstance(result.error, NodeError) and "plain relative name" in str(result.error)
    assert not (tmp_path / "menu.txt").exists()


def test_cancelling_leaves_a_valid_partial_folder(meal, kitchen, tmp_path):
    recipes.gate.clear()
    cancel = threading.Event()
    threading.Thread(target=lambda: (recipes.gate.wait(10), cancel.set())).start()
    result = run_pipeline(
        meal(MEAL + 'params.misdeed = "wait"\n'), out=tmp_path / "run", registry=kitchen, cancel=cancel
    )
    assert result.exit_code == 130 and result.verdict == "interrupted"
    record = verify_run(tmp_path / "run")
    assert record["state"] == "interrupted"
    states = {n["name"]: n["state"] for n in record["nodes"]}
    assert states == {"stock": "finished", "garden": "finished", "soup": "interrupted", "menu": "waiting"}


def test_keyboard_interrupt_is_a_cancelled_run(meal, kitchen, tmp_path):
    result = run_pipeline(meal(MEAL + 'params.misdeed = "interrupt"\n'), out=tmp_path / "run", registry=kitchen)
    assert result.exit_code == 130
    assert verify_run(tmp_path / "run")["state"] == "interrupted"


def test_exit_code_comes_from_the_last_table_that_has_one(meal, kitchen):
    assert run_pipeline(meal(MEAL + 'params.misdeed = "ambiguous"\n'), registry=kitchen).exit_code == 6


def test_old_products_do_not_survive_a_new_run(meal, kitchen, tmp_path):
    run_pipeline(meal(), out=tmp_path / "run", registry=kitchen)
    run_pipeline(meal(MEAL + 'params.misdeed = "raise"\n'), out=tmp_path / "run", registry=kitchen)
    assert not (tmp_path / "run" / "menu.txt").exists()
    verify_run(tmp_path / "run")


@pytest.mark.parametrize("name", ["menu.txt", "run.json", "run.json.sha256", "../meal.toml"])
def test_verify_finds_one_changed_byte(meal, kitchen, tmp_path, name):
    run_pipeline(meal(), out=tmp_path / "run", registry=kitchen)
    verify_run(tmp_path / "run")
    path = tmp_path / "run" / name
    content = bytearray(path.read_bytes())
    content[len(content) // 2] ^= 1
    path.write_bytes(content)
    with pytest.raises(VerificationError):
        verify_run(tmp_path / "run")


def test_verify_finds_what_is_missing_or_added(meal, kitchen, tmp_path):
    run_pipeline(meal(), out=tmp_path / "run", registry=kitchen)
    (tmp_path / "run" / "menu.txt").unlink()
    (tmp_path / "run" / "note.txt").write_text("x")
    with pytest.raises(VerificationError) as caught:
        verify_run(tmp_path / "run")
    assert "missing" in str(caught.value) and "not listed" in str(caught.value)


def test_record_says_what_went_in(meal, kitchen, tmp_path):
    run_pipeline(meal(), out=tmp_path / "run", registry=kitchen, overrides=["nodes.stock.params.portions=3"])
    record = json.loads((tmp_path / "run" / "run.json").read_text())
    assert record["seed"] == 0 and record["pipeline"]["overrides"] == ["nodes.stock.params.portions=3"]
    stock = next(n for n in record["nodes"] if n["name"] == "stock")
    assert stock["params"]["portions"] == 3 and stock["plugin"] == "toy-kitchen 1.2"
    assert {"python", "numpy"} <= set(record["versions"])
    assert all(len(f) == 64 for n in record["nodes"] for f in n["outputs"].values())


def test_broken_and_clashing_plugins_are_listed_with_their_own_error(point):
    import recipes as module

    registry = Registry(
        (
            point("kitchen", module),
            point("cellar", ImportError("No module named 'barrel'"), "old-cellar", "0.3"),
            point("garden", module, "garden-a", "1"),
            point("garden", module, "garden-b", "2", "other.plugin"),
        )
    )
    assert {e.name: e.state for e in list_plugins(registry)} == {
        "kitchen": "found",
        "cellar": "found",
        "garden": "clashing",
    }
    states = {(e.name, e.distribution): (e.state, e.error) for e in registry.probed()}
    assert states["kitchen", "toy-kitchen"][0] == "loaded"
    assert states["cellar", "old-cellar"][0] == "broken" and "barrel" in states["cellar", "old-cellar"][1]
    assert "garden-a 1 and garden-b 2" in states["garden", "garden-a"][1]
    with pytest.raises(PluginError):
        registry.load("garden")


def test_unknown_hooks_are_refused(point):
    module = type("Module", (), {"shiftfix_recipes": staticmethod(lambda: ())})
    with pytest.raises(PluginError, match="unknown hook shiftfix_recipes"):
        Registry((point("kitchen", module),)).load("kitchen")


def test_motion_of_the_same_name_twice_is_an_error(point):
    from shiftfix.api import MotionSpec, hookimpl

    def module():
        @hookimpl
        def shiftfix_motions():
            return (MotionSpec("hop", "hops", lambda o, s: None),)

        return type("Module", (), {"shiftfix_motions": staticmethod(shiftfix_motions)})

    registry = Registry((point("one", module()), point("two", module(), "other")))
    registry.load("one")
    with pytest.raises(PluginError, match="offered by toy-kitchen too"):
        registry.load("two")


def test_missing_module_is_seen_without_importing():
    from importlib.metadata import EntryPoint

    points = (
        EntryPoint("ghost", "no_such_module.plugin", "shiftfix.plugins"),
        EntryPoint("half", "shiftfix.no_such", "shiftfix.plugins"),
    )
    states = {e.name: (e.state, e.error) for e in Registry(points).entries()}
    assert states["ghost"][0] == states["half"][0] == "broken"
    assert "no_such_module" in states["ghost"][1] and "shiftfix.no_such" in states["half"][1]
