"""Conformance of a stranger's node: named checks that a plugin author runs on an own node, with pytest or without.

    from shiftfix.testing.conformance import check_node, check_reader

    def test_my_reader(tmp_path):
        check_node(MY_SPEC)
        check_reader(MY_SPEC, Params(files=(sample,)), tmp_path)

Each check raises AssertionError that says what the contract wants. Types and facts are checked, never words.
"""

from __future__ import annotations

import contextlib
import dataclasses
import io
import logging
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from shiftfix.errors import InputError
from shiftfix.graph.nodes import NodeContext, NodeSpec
from shiftfix.tables.frequencies import FrequencyTable
from shiftfix.tables.quantities import UNITS
from shiftfix.tables.schema import Table


def check_node(spec: NodeSpec) -> None:
    """Check the description of a node: summary, ports, parameters."""
    assert isinstance(spec, NodeSpec), "shiftfix_nodes returns NodeSpec objects"
    assert spec.summary and "\n" not in spec.summary, "the summary is one line"
    for name, port in {**spec.inputs, **spec.outputs}.items():
        assert isinstance(port.table, type) and issubclass(port.table, Table), (
            f"port {name}: a Table class travels through it"
        )
        assert port.meaning, f"port {name}: say what it is"
    assert dataclasses.is_dataclass(spec.params) and spec.params.__dataclass_params__.frozen, (
        "params is a frozen dataclass"
    )
    for field in dataclasses.fields(spec.params):
        assert field.metadata.get("meaning"), f"parameter {field.name}: made by `param`, with a meaning"
        unit = field.metadata.get("unit", "")
        assert not unit or unit in UNITS, f"parameter {field.name}: unit {unit!r} is one of {', '.join(UNITS)}"


def context_for(folder: Path) -> NodeContext:
    """Return a context for calling a node function outside a run: products stay in memory, paths are shown by name."""
    return NodeContext(
        node="checked",
        logger=logging.Logger("conformance"),
        random=np.random.default_rng(0),
        progress=lambda fraction, text="": None,
        check_cancelled=lambda: None,
        folder=folder,
        write=lambda name, data: None,
        motions={},
        readers={},
        display_path=lambda path: Path(path).name,
    )


def call(spec: NodeSpec, params: Any, folder: Path, inputs: Mapping[str, Any] | None = None) -> dict[str, Table]:
    """Call a node and check what holds for every call: declared outputs, inputs unchanged, silence, same folder."""
    given = dict(inputs or {})
    before = {k: v.fingerprint() for k, v in given.items() if isinstance(v, Table)}
    here, out = os.getcwd(), io.StringIO()
    with contextlib.redirect_stdout(out):
        outputs = dict(spec.function(given, params, context_for(folder)))
    assert out.getvalue() == "", "a node prints nothing"
    assert os.getcwd() == here, "a node does not change the working directory"
    assert set(outputs) == set(spec.outputs), "a node returns exactly its declared outputs"
    for name, table in outputs.items():
        assert isinstance(table, spec.outputs[name].table), f"output {name} is a {spec.outputs[name].table.__name__}"
    assert before == {k: v.fingerprint() for k, v in given.items() if isinstance(v, Table)}, (
        "a node leaves its inputs as they are"
    )
    return outputs


def check_reader(spec: NodeSpec, params: Any, folder: Path) -> None:
    """Check a reader on a sample: deterministic, counts that add up, file and line of every row, bad files as InputError.

    Parameters
    ----------
    spec : NodeSpec
        Whose params have a field `files`.
    params : object
        Parameters that read a good sample.
    folder : Path
        An empty folder for broken copies.
    """
    first, second = call(spec, params, folder), call(spec, params, folder)
    for name, table in first.items():
        assert table.fingerprint() == second[name].fingerprint(), "the same file gives the same table"
        if isinstance(table, FrequencyTable):
            assert table.sources, "a reader says which files it read"
            for source in table.sources:
                assert source.rows_read == source.rows_accepted + source.rows_rejected, "read = accepted + rejected"
                assert len(source.sha256) == 64, "a source carries the SHA-256 of its file"
            assert sum(s.rows_accepted for s in table.sources) == len(table), "every accepted row is in the table"
            assert (table.array("row_number") > 0).all() and "" not in set(table.array("source")), (
                "each row keeps file and line"
            )
            assert all(r.reason and r.row_number > 0 for r in table.rejects), "each reject has its line and reason"
    broken = {"missing.dat": None, "empty.dat": b"", "binary.dat": bytes(range(256)) * 8}
    for name, content in broken.items():
        path = folder / name
        if content is not None:
            path.write_bytes(content)
        try:
            call(spec, dataclasses.replace(params, files=(path,)), folder)
        except InputError as error:
            assert any(name in problem.where for problem in error.problems), f"{name}: the problem names the file"
        else:
            raise AssertionError(f"{name}: a reader refuses it with InputError")
    if spec.recognise is not None:
        assert not spec.recognise(folder / "binary.dat", broken["binary.dat"]), "recognise says no to foreign bytes"
        assert not spec.recognise(folder / "empty.dat", b""), "recognise says no to an empty file"
