"""Documents against the program: every node, command and file that the README names is there; its examples run."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest

from shiftfix.api import Registry, check_pipeline
from shiftfix.cli.main import _COMMANDS

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
GUIDE = (ROOT / "DEVELOPERS.md").read_text()


def blocks(language):
    return re.findall(rf"```{language}\n(.*?)```", README, re.S)


def test_both_commands_stand_in_the_readme():
    assert (
        "python3 -m venv .venv && .venv/bin/pip install -q '.[report]' && .venv/bin/shiftfix run demo_tracks/tamsin_pass/pipeline.toml"
        in README
    )
    assert "python3 -m venv .venv && .venv/bin/pip install -q -e '.[test]' && .venv/bin/pytest -q" in README


def test_named_nodes_and_commands_exist():
    nodes = {n.qualified_name for n in Registry().nodes()}
    named = set(re.findall(r"\b(?:ingest|screen|calibrate|solve|report)\.[a-z_]+\b", README + GUIDE)) - {"report.txt"}
    assert named - nodes == set()
    assert set(re.findall(r"`shiftfix ([a-z]+)", README)) <= set(_COMMANDS)


@pytest.mark.parametrize("text", [README, GUIDE], ids=["README", "DEVELOPERS"])
def test_named_files_exist(text):
    for name in re.findall(r"`((?:tests|demo_tracks|pipeline|plugins|physics|estimation|tables)/[\w./-]+)`", text):
        candidates = [ROOT / name, ROOT / "pipeline" / "shiftfix" / name]
        assert any(c.exists() for c in candidates), name


def test_example_pipeline_is_valid(tmp_path):
    text = next(b for b in blocks("toml") if b.startswith("shiftfix = 1"))
    path = tmp_path / "p.toml"
    path.write_text(text)
    assert check_pipeline(path).order[-1] == "text"


def test_other_toml_examples_parse():
    assert len([tomllib.loads(b) for b in blocks("toml")]) >= 3


def test_embedding_example_runs(monkeypatch, capsys):
    monkeypatch.chdir(ROOT)
    exec(compile(blocks("python")[0], "README.md", "exec"), {})
    assert capsys.readouterr().out.startswith("fix 0\n")


def test_every_demo_scene_is_checked_and_explained():
    for pipeline in (ROOT / "demo_tracks").glob("*/pipeline.toml"):
        assert check_pipeline(pipeline)
        assert (pipeline.parent / "README.md").is_file() and (pipeline.parent / "truth.json").is_file()
