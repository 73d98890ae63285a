"""The kit on first-party nodes, on the stranger's reader, and on readers with one fault each."""

from __future__ import annotations

import dataclasses
import importlib.util
import os
from pathlib import Path

import pytest

from shiftfix.api import FrequencyTable, NodeSpec, Port, Registry, Source
from shiftfix.testing.conformance import check_node, check_reader

ROOT = Path(__file__).parents[2]


@pytest.mark.parametrize("node", Registry().nodes(), ids=lambda n: n.qualified_name)
def test_first_party_nodes_are_described(node):
    check_node(node.spec)


@pytest.fixture(scope="module")
def stranger():
    spec = importlib.util.spec_from_file_location("veldane_log", ROOT / "tests/third_party/example/src/veldane_log.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture
def sample(tmp_path):
    path = tmp_path / "good.vrx"
    path.write_text("VRX1 station=A date=2026-03-01 dial=1e8\n1.5 10 ok\n2.5 11 noisy\n3.5 12 ok\n")
    return path


def test_strangers_reader_passes(stranger, sample, tmp_path):
    spec = stranger.shiftfix_nodes()[0]
    check_node(spec)
    check_reader(spec, stranger.Params(files=(sample,)), tmp_path)


def test_first_party_text_reader_passes(tmp_path):
    from shiftfix_ingest.delimited_params import DelimitedParams

    path = tmp_path / "log.csv"
    path.write_text("t,f\n2026-03-01T12:00:00Z,100000000\n2026-03-01T12:00:10Z,100000001\n")
    params = DelimitedParams(
        files=(path,),
        columns={"time": "t", "frequency": "f"},
        units={"frequency": "Hz"},
        time_scale="UTC",
        sigma=1.0,
        station="A",
    )
    check_reader(Registry().node("ingest.delimited").spec, params, tmp_path)


FAULTS = {
    "prints": lambda good: lambda i, p, c: (print("reading"), good(i, p, c))[1],
    "changes folder": lambda good: lambda i, p, c: (os.chdir("/"), good(i, p, c))[1],
    "surplus output": lambda good: lambda i, p, c: {**good(i, p, c), "extra": None},
    "wrong type": lambda good: lambda i, p, c: {"frequencies": 3},
    "loses rows": lambda good: (
        lambda i, p, c: {"frequencies": _changed(good(i, p, c), sources=(Source("f", "0" * 64, 3, 1, 1),))}
    ),
    "no sources": lambda good: lambda i, p, c: {"frequencies": _changed(good(i, p, c), sources=())},
    "swallows a missing file": lambda good: (
        lambda i, p, c: good(i, p, c) if p.files[0].name == "good.vrx" else _empty()
    ),
    "fails with another error": lambda good: lambda i, p, c: good(i, p, c) if p.files[0].name == "good.vrx" else 1 / 0,
}


def _changed(outputs, **changes):
    return dataclasses.replace(outputs["frequencies"], **changes)


def _empty():
    return {"frequencies": FrequencyTable()}


@pytest.mark.parametrize("fault", FAULTS)
def test_each_fault_is_caught(fault, stranger, sample, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    good = stranger.shiftfix_nodes()[0]
    spec = dataclasses.replace(good, function=FAULTS[fault](good.function))
    with pytest.raises((AssertionError, ZeroDivisionError)):
        check_reader(spec, stranger.Params(files=(sample,)), tmp_path)


def test_undescribed_nodes_are_caught():
    with pytest.raises(AssertionError, match="say what it is"):
        check_node(NodeSpec("x", "reads", lambda i, p, c: {}, outputs={"f": Port(FrequencyTable)}))
    with pytest.raises(AssertionError, match="one line"):
        check_node(NodeSpec("x", "", lambda i, p, c: {}))
