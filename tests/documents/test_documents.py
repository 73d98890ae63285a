"""Documents against the program: every node, command and file that the README names is there; its examples run."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest

from shiftfix.api import Registry, check_pipeline, run_pipeline
from shiftfix.cli.main import _COMMANDS
from shiftfix.cli.summary import summary_lines

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


def test_the_station_book_that_is_shown_can_be_read(tmp_path):
    book = next(b for b in blocks("toml") if b.startswith("[stations."))
    (tmp_path / "book.toml").write_text(book)
    (tmp_path / "p.toml").write_text('shiftfix = 1\n[nodes.s]\nuse = "ingest.stations"\nparams.file = "book.toml"\n')
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 0, result.error
    assert list(result.tables["s.stations"].array("station_id")) == ["QUOIN"]


def test_embedding_example_runs(monkeypatch, capsys):
    monkeypatch.chdir(ROOT)
    example = next(b for b in blocks("python") if "run_pipeline(" in b)
    exec(compile(example, "README.md", "exec"), {})
    assert capsys.readouterr().out.startswith("fix 0\n")


def numbers_apart(text):
    """Return the words of a text with a mark for each number, and the numbers."""
    number = r"[-+]?\d+(?:\.\d+)?(?:e[-+]\d+)?"
    return re.sub(number, "#", " ".join(text.split())), [float(n) for n in re.findall(number, text)]


@pytest.fixture(scope="module")
def run_once():
    return run_pipeline(ROOT / "demo_tracks" / "tamsin_pass" / "pipeline.toml")


def shown_after(words):
    """Return the first indented block of the README after some words."""
    return re.search(r"\n\n((?:    .*\n)+)", README[README.index(words) :])[1]


def test_what_one_sees_is_what_one_sees(run_once):
    shown = shown_after("## What one sees")
    words, values = numbers_apart(shown)
    seen = "\n".join([*summary_lines(run_once.document), "run folder: runs/pipeline"])
    found_words, found = numbers_apart(seen)
    assert words == found_words
    # Other processors and libraries round differently: a thousandth, at most one unit, is not worth a word.
    assert len(found) == len(values)
    for value, shown_value in zip(found, values, strict=True):
        assert abs(value - shown_value) <= max(0.01, min(1e-3 * abs(shown_value), 1.0)), (value, shown_value)


def test_the_refusal_that_is_shown_is_the_refusal(run_once):
    whole = (ROOT / "demo_tracks" / "tamsin_pass" / "pipeline.toml").read_text()
    assert '["orrel", "quoin", "bastle"]' in whole
    alone = [f"nodes.{n}.inputs.frequencies=orrel" for n in ("starts", "fix")]
    result = run_pipeline(ROOT / "demo_tracks" / "tamsin_pass" / "pipeline.toml", overrides=alone)
    assert result.exit_code == 5
    shown = shown_after("With Orrel Head's log alone")
    words, _ = numbers_apart(shown)
    found, _ = numbers_apart("\n".join(summary_lines(result.document)))
    assert words in found


def test_the_reader_that_is_shown_is_the_one_that_is_tested():
    example = ROOT / "tests" / "third_party" / "example"
    assert (example / "src" / "veldane_log.py").read_text() in blocks("python")
    entry = next(b for b in blocks("toml") if "entry-points" in b)
    declared = tomllib.loads((example / "pyproject.toml").read_text())["project"]["entry-points"]
    assert tomllib.loads(entry)["project"]["entry-points"] == declared


def test_every_run_file_and_emitter_class_is_named(run_once):
    from shiftfix.tables.cautions import EMITTER_CLASSES

    assert all(f"`{name}`" in README for name in (*run_once.products, "run.json", "timing.json"))
    assert all(f"`{name}`" in README for name in EMITTER_CLASSES)


def test_exit_codes_are_those_of_the_verdicts_and_errors():
    import shiftfix.errors as errors
    from shiftfix.tables.solution import VERDICTS

    section = " ".join(README[README.index("## Exit codes") : README.index("## In another program")].split())
    stated = {int(n): text for n, text in re.findall(r"(\d+) ([a-z][^;.]*)", section)}
    assert set(stated) == {0, 1, 2, 3, 4, 5, 6, 7, 8, 130}
    for verdict, code in VERDICTS.items():
        assert verdict in stated[code]
    raised = {c.exit_code for c in vars(errors).values() if isinstance(c, type) and issubclass(c, errors.ShiftfixError)}
    assert raised <= set(stated)


def test_no_document_speaks_of_how_it_came_about():
    texts = {p: p.read_text() for p in (*ROOT.glob("*.md"), *ROOT.glob("demo_tracks/*/*.md"), *ROOT.glob(".changes/*.md"))}
    assert len(texts) >= 5
    for path, text in texts.items():
        assert not re.search(r"\bissues? #?\d|\bTODO\b|\bFIXME\b|/home/|/work/|\bagent\b", text), path


def test_every_demo_scene_is_checked_and_explained():
    for pipeline in (ROOT / "demo_tracks").glob("*/pipeline.toml"):
        assert check_pipeline(pipeline)
        assert (pipeline.parent / "README.md").is_file() and (pipeline.parent / "truth.json").is_file()
