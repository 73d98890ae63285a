"""`ingest.auto`: the one reader that recognises a file, or the list of who was asked."""

from __future__ import annotations

import gzip
from dataclasses import dataclass, replace
from pathlib import Path

import pytest

from shiftfix.api import DefinitionError, FrequencyTable, InputError, NodeSpec, Port, param, run_pipeline
from shiftfix_ingest.auto import AutoParams, read_auto

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


def test_packed_and_repeated_files(tmp_path):
    (tmp_path / "a.gz").write_bytes(gzip.compress((DEMO / "bastle_fen.tdm").read_bytes()))
    (tmp_path / "b.gz").write_bytes((tmp_path / "a.gz").read_bytes())
    options = 'params.options = { "ingest.tdm" = { sigma = "2 Hz" } }\n'
    alone = run(tmp_path, '"a.gz"', options)
    assert alone.error is None, alone.error
    twice = run(tmp_path, '"*.gz"', options)
    assert twice.exit_code == 4 and "b.gz: the same file is given twice" in str(twice.error)
    noted = run(tmp_path, '"*.gz"', options + 'params.on_repeat = "ignore"\n')
    one, two = (r.tables["a.frequencies"] for r in (alone, noted))
    assert two.rows.equals(one.rows) and [n for n in two.notes if n not in one.notes] == [
        "b.gz holds the same bytes as a.gz and is used once"
    ]


def test_a_file_of_another_table_is_named_as_that(tmp_path):
    (tmp_path / "x.oem").write_text("CCSDS_OEM_VERS = 2.0\nCREATION_DATE = 2026-03-02T00:00:00Z\n")
    result = run(tmp_path, '"x.oem"')
    assert result.exit_code == 4 and "ingest.oem: yes, but gives Ephemeris" in str(result.error)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ('{ "ingest.tmd" = {} }', "did you mean ingest.tdm?"),
        ('{ "ingest.tdm" = 5 }', "not a table of parameters"),
        ('{ "ingest.tdm" = { sigmma = "2 Hz" } }', "did you mean sigma?"),
        ('{ "ingest.tdm" = { sigma = "2 s" } }', "needed is one in Hz"),
    ],
)
def test_options_are_checked(tmp_path, options, words):
    (tmp_path / "pass.tdm").write_bytes((DEMO / "bastle_fen.tdm").read_bytes())
    result = run(tmp_path, '"pass.tdm"', f"params.options = {options}\n")
    assert isinstance(result.error, DefinitionError) and words in str(result.error), str(result.error)


@dataclass(frozen=True)
class ToyParams:
    files: tuple = param("logs", path="files")


def toy(answer, error=None):
    def read(inputs, params, context):
        raise error or AssertionError("a reader that was not chosen was called")

    def recognise(path, first_bytes):
        if isinstance(answer, Exception):
            raise answer
        return answer(first_bytes)

    outputs = {"frequencies": Port(FrequencyTable, "received frequencies")}
    return NodeSpec("toy", "toy", read, outputs=outputs, params=ToyParams, recognise=recognise)


def test_two_yes_are_refused_and_a_reader_that_fails_says_so(tmp_path, context):
    (tmp_path / "log.dat").write_bytes(b"VRX1 rest")
    readers = {
        "a.one": toy(lambda head: head.startswith(b"VRX1")),
        "b.two": toy(lambda head: len(head) == 9),
        "c.no": toy(lambda head: False),
        "d.broken": toy(ValueError("bad head")),
    }
    with pytest.raises(InputError) as caught:
        read_auto({}, AutoParams(files=(tmp_path / "log.dat",)), replace(context, readers=readers))
    text = str(caught.value)
    assert "log.dat: more than one reader recognises this file" in text
    assert "a.one: yes; b.two: yes; c.no: no; d.broken: failed (ValueError: bad head)" in text


def test_readers_see_the_bytes_on_disk(tmp_path, context):
    """A reader that cannot unpack must not be handed what it could not read."""
    (tmp_path / "log.gz").write_bytes(gzip.compress(b"VRX1 rest"))
    readers = {"a.one": toy(lambda head: head.startswith(b"VRX1"))}
    with pytest.raises(InputError, match="no reader recognises this file"):
        read_auto({}, AutoParams(files=(tmp_path / "log.gz",)), replace(context, readers=readers))


def test_problems_of_all_readers_come_at_once(tmp_path, context):
    for name in ("p", "q"):
        (tmp_path / f"{name}.dat").write_bytes(name.encode())
    readers = {
        "a.p": toy(lambda head: head == b"p", InputError("p is unusable")),
        "a.q": toy(lambda head: head == b"q", InputError("q is unusable")),
    }
    files = (tmp_path / "p.dat", tmp_path / "q.dat", tmp_path / "none.dat")
    with pytest.raises(InputError) as caught:
        read_auto({}, AutoParams(files=files), replace(context, readers=readers))
    text = str(caught.value)
    assert "p is unusable" in text and "q is unusable" in text and "none.dat: no such file" in text
