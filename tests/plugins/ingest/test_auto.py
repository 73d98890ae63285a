"""`ingest.auto`: the one reader that recognises a file, or the list of who was asked."""

from __future__ import annotations

from pathlib import Path

from shiftfix.api import run_pipeline

DEMO = Path(__file__).parents[3] / "demo_tracks" / "tamsin_pass"


def run(folder, files, extra=""):
    (folder / "p.toml").write_text(f'shiftfix = 1\n[nodes.a]\nuse = "ingest.auto"\nparams.files = {files}\n{extra}')
    return run_pipeline(folder / "p.toml")


def test_unanimous_reader_is_used(tmp_path):
    (tmp_path / "pass.dat").write_bytes((DEMO / "bastle_fen.tdm").read_bytes())
    result = run(tmp_path, '"pass.dat"', 'params.options = { "ingest.tdm" = { sigma = "2 Hz" } }\n')
    assert result.error is None, result.error
    assert set(result.tables["a.frequencies"].array("station_id")) == {"BASTLE"}


def test_who_was_asked_and_what_each_said(tmp_path):
    (tmp_path / "x.dat").write_text("just words\n")
    (tmp_path / "e.dat").write_text("")
    result = run(tmp_path, '["x.dat", "e.dat", "none.dat"]')
    assert result.exit_code == 4
    for words in (
        "x.dat: no reader recognises this file",
        "ingest.rinex: no",
        "ingest.tdm: no",
        "e.dat: the file is empty",
        "none.dat: no such file",
    ):
        assert words in str(result.error), str(result.error)
