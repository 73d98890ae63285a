"""Opening files: what cannot be opened becomes a problem beside the others; the same bytes are used once."""

from __future__ import annotations

import gzip
import hashlib
from pathlib import Path

import pytest

from shiftfix_ingest.source_files import SourceFile, binary_problem, head_text, open_sources, repeat_problems


def test_files_and_problems_come_together(tmp_path):
    (tmp_path / "good.csv").write_bytes(b"t,f\n1,2\n")
    (tmp_path / "packed.csv.gz").write_bytes(gzip.compress(b"t,f\n3,4\n"))
    (tmp_path / "members.gz").write_bytes(gzip.compress(b"t,f\n") + gzip.compress(b"5,6\n"))
    (tmp_path / "empty.csv").write_bytes(b"")
    (tmp_path / "nothing.gz").write_bytes(gzip.compress(b""))
    (tmp_path / "cut.gz").write_bytes(gzip.compress(b"t,f\n" * 99)[:-9])
    (tmp_path / "damaged.gz").write_bytes(gzip.compress(b"t,f\n" * 99)[:12] + b"\x07" * 20)
    (tmp_path / "folder").mkdir()
    (tmp_path / "again.csv").write_bytes(b"t,f\n1,2\n")
    names = "good.csv packed.csv.gz members.gz empty.csv nothing.gz cut.gz damaged.gz folder none.csv again.csv".split()
    files, problems, notes = open_sources([tmp_path / n for n in names], lambda path: f"logs/{path.name}")
    assert [(f.name, f.data) for f in files] == [
        ("logs/good.csv", b"t,f\n1,2\n"),
        ("logs/packed.csv.gz", b"t,f\n3,4\n"),
        ("logs/members.gz", b"t,f\n5,6\n"),
    ]
    assert files[1].sha256 == hashlib.sha256((tmp_path / "packed.csv.gz").read_bytes()).hexdigest()
    assert [(p.where, p.what) for p in problems] == [
        ("logs/empty.csv", "the file is empty"),
        ("logs/nothing.gz", "the packed file is empty"),
        ("logs/cut.gz", "the gzip file is truncated or damaged"),
        ("logs/damaged.gz", "the gzip file is truncated or damaged"),
        ("logs/folder", "is a folder, not a file"),
        ("logs/none.csv", "no such file"),
    ]
    assert notes == ["logs/again.csv holds the same bytes as logs/good.csv and is used once"]
    refused = repeat_problems(notes, "refuse")
    assert refused[0].where == "logs/again.csv" and 'on_repeat = "ignore"' in refused[0].remedy
    assert repeat_problems(notes, "ignore") == []


def test_one_path_is_as_good_as_a_list(tmp_path):
    (tmp_path / "a").write_bytes(b"x")
    assert open_sources(tmp_path / "a")[0][0].data == b"x"


def test_a_packed_file_that_grows_without_measure_is_left_packed(tmp_path):
    """60 MB of one byte pack to 60 kB, a thousand to one; a log of the same size packs to some 15 MB."""
    (tmp_path / "bomb.gz").write_bytes(gzip.compress(b"0" * 60_000_000, 9))
    files, problems, _ = open_sources([tmp_path / "bomb.gz"], lambda path: path.name)
    assert not files and "grows too large" in str(problems[0]) and "200 times its size" in problems[0].allowed
    (tmp_path / "small.gz").write_bytes(gzip.compress(b"0" * 40_000_000, 9))
    assert len(open_sources([tmp_path / "small.gz"])[0][0].data) == 40_000_000


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"t,f\n\0", "the file is binary"),
        (b"\x01\x02" * 10 + b"text" * 10, "the file is binary"),
        (b"PK\x03\x04rest", "is a zip archive"),
        (b"BZh91AY&SY", "is a bzip2 archive"),
        (b"\xfd7zXZ\x00\x00", "is a xz archive"),
        (b"t,f\r\n\t1\x1a", None),
        ("Höhe;1\n".encode(), None),
    ],
)
def test_binary_content(data, words):
    problem = binary_problem(SourceFile(Path("f"), "f", "", data), "delimited text")
    assert (problem is None) if words is None else (words in str(problem) and problem.allowed == "delimited text")


def test_head_of_a_packed_file():
    assert head_text(gzip.compress(b"CCSDS_TDM_VERS = 2.0\n" * 500)[:60]).startswith("CCSDS_TDM_VERS")
    assert head_text(b"\xef\xbb\xbfabc") == "abc"
    assert head_text(b"\x1f\x8bnot gzip") == ""
