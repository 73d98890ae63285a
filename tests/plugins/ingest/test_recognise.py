"""Each reader knows its own files by their first bytes and no other reader's."""

from __future__ import annotations

import gzip
from pathlib import Path

import pytest
from rinex_files import Scene, rinex

from shiftfix_ingest.plugin import shiftfix_nodes

TDM = "CCSDS_TDM_VERS = 2.0\nCREATION_DATE = 2026-03-02T00:00:00Z\n"
SAMPLES = {
    "rinex 2": ("rinex", rinex(Scene(epochs=2), 2.11)),
    "rinex 3": ("rinex", rinex(Scene(epochs=2), 3.04)),
    "tdm": ("tdm", TDM),
    "tdm after blank lines": ("tdm", "\n\n" + TDM),
    "tdm xml": ("tdm", '<?xml version="1.0" encoding="UTF-8"?>\n<tdm id="CCSDS_TDM_VERS" version="2.0">'),
    "tdm ndm xml": (
        "tdm",
        '<?xml version="1.0"?>\n<ndm:tdm xmlns:ndm="urn:ccsds:schema:ndmxml" id="CCSDS_TDM_VERS" version="2.0">',
    ),
    "oem": ("oem", TDM.replace("TDM", "OEM")),
    "oem xml": ("oem", '<?xml version="1.0"?>\n<oem id="CCSDS_OEM_VERS" version="3.0">'),
    "sp3": ("sp3", "#cP2026  3  1  0  0  0.00000000      96 ORBIT IGb14 HLM  IGS\n"),
    "navigation": (None, rinex(Scene(epochs=2), 2.11).replace("OBSERVATION DATA", "NAVIGATION DATA ")),
    "opm": (None, TDM.replace("TDM", "OPM")),
    "text": (None, "station;time;frequency\nMERR;2026-03-01T06:00:00Z;437150000\n"),
    "toml": (None, '[[station]]\nid = "MERR"\n'),
    "empty": (None, ""),
    "binary": (None, "\x7fELF\x02\x01\x00\x00"),
    "comment": (None, "# CCSDS_TDM_VERS = 2.0\n"),
}
READERS = {node.name: node for node in shiftfix_nodes() if node.recognise}


@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize("sample", SAMPLES)
def test_exactly_the_right_reader_says_yes(sample, packed):
    owner, text = SAMPLES[sample]
    head = gzip.compress(text.encode()) if packed else text.encode()
    answers = [name for name, node in READERS.items() if node.recognise(Path("file"), head[:4096])]
    assert answers == ([owner] if owner else [])


def test_hatanaka_is_recognised():
    import hatanaka

    head = hatanaka.rnx2crx(rinex(Scene(), 2.11).encode())[:4096]
    assert [n for n, node in READERS.items() if node.recognise(Path("x.26d"), head)] == ["rinex"]


def test_cut_head_of_a_packed_file_is_enough():
    text = rinex(Scene(epochs=40), 3.04)
    assert READERS["rinex"].recognise(Path("x.gz"), gzip.compress(text.encode())[:512])


def test_public_files(shared_data):
    owners = {"tdm": "tdm", "obs": "rinex", "truth": "sp3"}
    for path in shared_data.rglob("*"):
        owner = owners.get(path.parent.name)
        if path.parent.name == "odm":
            owner = (
                "oem"
                if "oem" in path.name or "testcase" in path.name and "OEM_VERS" in path.read_text()[:400]
                else None
            )
        if path.is_file():
            with path.open("rb") as stream:
                head = stream.read(4096)
            answers = [n for n, node in READERS.items() if node.recognise(path, head)]
            assert answers == ([owner] if owner else []), path.name
