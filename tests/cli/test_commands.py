"""The command line as its user meets it: exit codes, stdout and stderr, JSON, no traceback, a fast start."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from shiftfix.api import cautions_for
from shiftfix.cli.main import one_thread
from shiftfix.cli.summary import summary_lines
from shiftfix.tables.cautions import EMITTER_CLASSES

DEMO = Path(__file__).parents[2] / "demo_tracks" / "tamsin_pass"
ENVIRONMENT = {**os.environ, "OMP_NUM_THREADS": "1"}


def shiftfix(*arguments, cwd):
    command = [sys.executable, "-m", "shiftfix.cli.main", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, cwd=cwd, env=ENVIRONMENT, timeout=120)


@pytest.fixture(scope="module")
def done(tmp_path_factory):
    folder = tmp_path_factory.mktemp("run")
    return folder, shiftfix("run", DEMO / "pipeline.toml", cwd=folder)


def test_run_delivers_a_fix(done):
    folder, answer = done
    assert answer.returncode == 0, answer.stderr
    lines = answer.stdout.splitlines()
    assert lines[1].startswith("FIX") and lines[-1] == "run folder: runs/pipeline"
    assert "\x1b" not in answer.stdout + answer.stderr, "no colour away from a terminal"
    files = {p.name for p in (folder / "runs" / "pipeline").iterdir()}
    assert files == {"run.json", "run.json.sha256", "timing.json", "solution.json", "report.txt", "residuals.csv"}
    document = json.loads((folder / "runs" / "pipeline" / "solution.json").read_text())
    assert document["verdict"] == "fix" and document["exit_code"] == 0


def test_verify_then_one_changed_byte(done):
    folder, _ = done
    assert shiftfix("verify", "runs/pipeline", cwd=folder).returncode == 0
    path = folder / "runs" / "pipeline" / "residuals.csv"
    content = bytearray(path.read_bytes())
    content[1000] ^= 4
    path.write_bytes(content)
    answer = shiftfix("verify", "runs/pipeline", cwd=folder)
    assert answer.returncode == 8 and "residuals.csv" in answer.stderr and "Traceback" not in answer.stderr
    assert json.loads(shiftfix("verify", "runs/pipeline", "--json", cwd=folder).stdout)["unchanged"] is False


def test_json_is_the_document(tmp_path):
    answer = shiftfix("run", DEMO / "pipeline.toml", "--json", "--quiet", cwd=tmp_path)
    assert json.loads(answer.stdout)["verdict"] == "fix" and answer.stderr == ""


def test_check_explain_nodes_plugins(tmp_path):
    assert "valid" in shiftfix("check", DEMO / "pipeline.toml", cwd=tmp_path).stdout
    plan = json.loads(shiftfix("explain", DEMO / "pipeline.toml", "--json", cwd=tmp_path).stdout)
    assert all(p["origin"] for n in plan["nodes"] for p in n["params"])
    assert "origin" not in shiftfix("explain", DEMO / "pipeline.toml", cwd=tmp_path).stderr
    names = {n["name"] for n in json.loads(shiftfix("nodes", "--json", cwd=tmp_path).stdout)["nodes"]}
    assert {"ingest.tdm", "solve.fix", "calibrate.known_emitters", "report.text"} <= names
    assert "params.motion" in shiftfix("nodes", "solve.search", cwd=tmp_path).stdout
    plugins = json.loads(shiftfix("plugins", "--json", cwd=tmp_path).stdout)
    assert {p["name"]: p["state"] for p in plugins}["solve"] == "found", "listed, not imported"
    assert {p["state"] for p in json.loads(shiftfix("plugins", "--probe", "--json", cwd=tmp_path).stdout)} == {"loaded"}


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (["rum"], 2, "Did you mean 'run'?"),
        (["run"], 2, "Missing argument"),
        (["run", "none.toml"], 3, "cannot be read"),
        (["check", "bad.toml"], 3, "bad.toml:2:5"),
        (["nodes", "solve.fx"], 3, "did you mean solve.fix?"),
        (["nodes", "orbits"], 3, "did you mean orbit?"),
        (["run", DEMO / "pipeline.toml", "--set", "nodes.text.params.name=../x"], 3, "a file in the run folder"),
        (["run", DEMO / "pipeline.toml", "--out", "bad.toml/run"], 2, "bad.toml/run cannot be written: Not a directory"),
        (["verify", "."], 8, "a folder with run.json"),
        (["run", "empty_input.toml"], 4, "the file is empty"),
    ],
)
def test_failures_have_their_codes_and_no_traceback(tmp_path, arguments, code, words):
    (tmp_path / "bad.toml").write_text("shiftfix = 1\nx = = 3\n")
    (tmp_path / "empty.toml").write_text("")
    (tmp_path / "empty_input.toml").write_text(
        'shiftfix = 1\n[nodes.s]\nuse = "ingest.stations"\nparams.file = "empty.toml"\n'
    )
    answer = shiftfix(*arguments, cwd=tmp_path)
    assert answer.returncode == code, answer.stderr
    assert words in answer.stderr and "Traceback" not in answer.stderr
    assert "Traceback" in shiftfix("run", "empty_input.toml", "--debug", cwd=tmp_path).stderr


def test_help_loads_nothing_heavy(tmp_path):
    code = (
        "import sys; sys.argv=['shiftfix','--help']\nfrom shiftfix.cli.main import main\n"
        "try: main()\nexcept SystemExit: pass\n"
        "heavy = ('numpy','pandas','scipy','shiftfix.api','rich','networkx')\nprint([m for m in heavy if m in sys.modules])"
    )
    answer = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=tmp_path)
    assert answer.stdout.splitlines()[-1] == "[]"
    assert "Exit codes" in answer.stdout
    for name in ("run", "check", "explain", "nodes", "plugins", "verify"):
        assert shiftfix(name, "--help", cwd=tmp_path).returncode == 0


def test_linear_algebra_has_one_thread_unless_the_user_says_otherwise(tmp_path):
    given = {"PATH": "x"}
    one_thread(given)
    assert given["OPENBLAS_NUM_THREADS"] == given["OMP_NUM_THREADS"] == "1"
    for name in ("OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        own = {name: "4"}
        one_thread(own)
        assert own == {name: "4"}
    bare = {k: v for k, v in os.environ.items() if not k.endswith("_NUM_THREADS")}
    code = "import sys; sys.argv=['shiftfix','--help']\nfrom shiftfix.cli.main import main\n"
    code += "try: main()\nexcept SystemExit: pass\nimport os; print(os.environ['OPENBLAS_NUM_THREADS'])"
    answer = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=tmp_path, env=bare)
    assert answer.stdout.splitlines()[-1] == "1", answer.stderr


def test_interrupt_leaves_a_partial_run_that_verifies(tmp_path):
    text = (DEMO.parent / "stuck_key" / "pipeline.toml").read_text()
    for name in ("stations.toml", "emitters.toml", "monitoring_log.csv"):
        (tmp_path / name).write_bytes((DEMO.parent / "stuck_key" / name).read_bytes())
    (tmp_path / "p.toml").write_text(text)
    process = subprocess.Popen(
        [sys.executable, "-m", "shiftfix.cli.main", "run", "p.toml"],
        cwd=tmp_path,
        env=ENVIRONMENT,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    time.sleep(3.0)
    process.send_signal(signal.SIGINT)
    _, errors = process.communicate(timeout=60)
    assert process.returncode == 130 and "Traceback" not in errors
    record = json.loads((tmp_path / "runs" / "p" / "run.json").read_text())
    assert record["state"] == "interrupted"
    assert shiftfix("verify", "runs/p", cwd=tmp_path).returncode == 0


def document(**changes):
    base = {
        "verdict": "ambiguous",
        "verdict_text": "2 solutions fit; odds 0.60, 0.40",
        "remedy": "r " * 200,
        "title": "A title " * 20,
        "epoch_utc": "2026-03-01T12:00:00Z",
        "motion": "orbit",
        "frame": "GCRS",
        "state": {"position_m": [7e6, 0, 0], "velocity_m_s": [0, 7.5e3, 0]},
        "geodetic": {
            "latitude_deg": -41.0,
            "longitude_deg": -26.0,
            "height_m": 5e5,
            "ellipse_95": {"semi_major_m": 12345.0, "semi_minor_m": 10.0, "azimuth_deg": 5.0},
        },
        "budget": {"total": {"position_m": 100.0, "velocity_m_s": 0.1}},
        "rest_frequency_hz": 437e6,
        "rest_frequency_sigma_hz": 0.1,
        "frequency_datum": "d " * 200,
        "odds": 0.6,
        "alternatives": [{"state": {"position_m": [7e6, 1e5, 0], "velocity_m_s": [0, 0, 0]}, "odds": 0.4, "rms": 1.0}]
        * 5,
        "warnings": ["w " * 200] * 9,
        "findings": ["f"] * 9,
        "cautions": ["c " * 200],
    }
    return base | changes


def test_summary_fits_a_terminal():
    refused = document(
        verdict="not observable",
        state={"position_m": None, "velocity_m_s": None},
        geodetic=None,
        odds=None,
        alternatives=[],
        rest_frequency_hz=None,
        verdict_text="v " * 400,
    )
    far = document(geodetic=None, state={"position_m": [7e11, 1e11, -3e11], "velocity_m_s": [0, 7.5e3, 0]})
    every = document(cautions=list(cautions_for(EMITTER_CLASSES)), verdict_text="v " * 400)
    for given in (document(), refused, far, every):
        lines = summary_lines(given)
        assert len(lines) <= 24 and max(map(len, lines)) <= 80
        assert sum(line.startswith("caution: ") for line in lines) >= 1
    text = "\n".join(summary_lines(document()))
    assert "odds 0.400: 100 km away" in text and "latitude -41.00 deg, longitude -26.00 deg" in text
    assert "position  (7e+08 km, 1e+08 km, -3e+08 km) in GCRS" in summary_lines(far)
    assert "would help: r r" in "\n".join(summary_lines(refused))


@pytest.mark.parametrize("declared", [("distress",), ("distress", "maritime", "space"), EMITTER_CLASSES])
def test_the_most_urgent_caution_is_never_cut(declared):
    texts = cautions_for(declared)
    shown = " ".join(line.strip() for line in summary_lines(document(cautions=list(texts))))
    assert texts[0] in shown, "in full"
    for text in texts[1 : len(declared)]:
        assert text.split(". ")[0] in shown or not text[:6].isupper()
