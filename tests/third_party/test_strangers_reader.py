"""A stranger's distribution: built, installed into a fresh environment, found without configuration, run in a pipeline."""

from __future__ import annotations

import json
import subprocess
import sys
import venv
from pathlib import Path

import pytest

HERE = Path(__file__).parent
DEMO = HERE.parents[1] / "demo_tracks" / "tamsin_pass"


@pytest.fixture(scope="module")
def environment(tmp_path_factory):
    folder = tmp_path_factory.mktemp("fresh")
    venv.create(folder / "venv", with_pip=True, symlinks=True)
    python = folder / "venv" / "bin" / "python"
    site = subprocess.run(
        [python, "-c", "import sysconfig; print(sysconfig.get_path('purelib'))"], capture_output=True, text=True
    ).stdout.strip()
    # The packages of the running environment are lent by path: the test needs no registry and no second download.
    (Path(site) / "lent.pth").write_text(
        "\n".join(p for p in sys.path if "site-packages" in p or p.endswith(("pipeline", "plugins"))) + "\n"
    )
    wheel = folder / "wheel"
    build = [
        sys.executable,
        "-m",
        "pip",
        "wheel",
        "-q",
        "--no-deps",
        "--no-build-isolation",
        "--no-index",
        "-w",
        wheel,
        HERE / "example",
    ]
    made = subprocess.run(build, capture_output=True, text=True)
    assert made.returncode == 0, made.stderr
    install = [python, "-m", "pip", "install", "-q", "--no-deps", "--no-index", next(wheel.glob("*.whl"))]
    done = subprocess.run(install, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return python


def shiftfix(python, *arguments, cwd):
    command = [python, "-m", "shiftfix.cli.main", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, cwd=cwd)


def test_reader_is_short_and_appears_by_itself(environment, tmp_path):
    assert len((HERE / "example" / "src" / "veldane_log.py").read_text().splitlines()) <= 60
    plugins = {p["name"]: p for p in json.loads(shiftfix(environment, "plugins", "--json", cwd=tmp_path).stdout)}
    assert plugins["veldane"]["distribution"] == "veldane-log" and plugins["veldane"]["version"] == "0.4"
    assert "veldane.vrx1" in shiftfix(environment, "nodes", cwd=tmp_path).stdout


def test_its_log_is_solved_in_a_pipeline(environment, tmp_path):
    """The demo pass with one station's log in the stranger's format gives the same orbit within its error."""
    for name in ("stations.toml", "orrel_head.csv", "bastle_fen.tdm"):
        (tmp_path / name).write_bytes((DEMO / name).read_bytes())
    lines = ["VRX1 station=QUOIN date=2026-03-01 dial=437262500"]
    for row in (DEMO / "quoin_skerry.txt").read_text().splitlines()[2:]:
        time, offset = row.split(";")
        hour, minute, second = time[11:-1].split(":")
        lines.append(
            f"{int(hour) * 3600 + int(minute) * 60 + float(second) + 0.5} {float(offset.replace(',', '.')) * 1e3:.3f} ok"
        )
    lines.insert(5, "76170.5 0.0 noisy")
    (tmp_path / "quoin.vrx").write_text("\n".join(lines) + "\n")
    text = (DEMO / "pipeline.toml").read_text()
    start, stop = text.index("[nodes.quoin]"), text.index("[nodes.bastle]")
    node = '[nodes.quoin]\nuse = "veldane.vrx1"\nparams.files = "*.vrx"\n\n[nodes.named]\nuse = "screen.select"\n'
    node += 'inputs.frequencies = "quoin"\nparams.name_emitter = "TAMSIN-1"\n\n'
    text = text[:start] + node + text[stop:].replace('"quoin"', '"named"')
    (tmp_path / "pipeline.toml").write_text(text)
    answer = shiftfix(environment, "run", "pipeline.toml", "--json", cwd=tmp_path)
    assert answer.returncode == 0, answer.stderr
    record = json.loads((tmp_path / "runs" / "pipeline" / "run.json").read_text())
    assert any(
        r["source"] == "quoin.vrx" and r["row_number"] == 6 and "noisy" in r["reason"] for r in record["rejects"]
    )
    assert next(n for n in record["nodes"] if n["use"] == "veldane.vrx1")["plugin"] == "veldane-log 0.4"
    quoin = next(s for s in json.loads(answer.stdout)["stations"] if s["station_id"] == "QUOIN")
    assert abs(quoin["offset"] - 3e-8) < 5 * quoin["offset_sigma"]


def test_its_errors_are_named(environment, tmp_path):
    (tmp_path / "x.vrx").write_text("something else\n")
    (tmp_path / "p.toml").write_text(
        'shiftfix = 1\n[nodes.log]\nuse = "veldane.vrx1"\nparams.files = ["x.vrx", "y.vrx"]\n'
    )
    answer = shiftfix(environment, "run", "p.toml", cwd=tmp_path)
    assert answer.returncode == 4
    assert "x.vrx:1: not a VRX1 log" in answer.stderr and "y.vrx:1" in answer.stderr
    (tmp_path / "x.vrx").write_text("VRX1 station=A date=2026-03-01 dial=1e8\nbroken\n")
    answer = shiftfix(environment, "run", "p.toml", "--set", "nodes.log.params.files=x.vrx", cwd=tmp_path)
    assert answer.returncode == 7
    assert "veldane-log 0.4" in answer.stderr and "Traceback" not in answer.stderr
