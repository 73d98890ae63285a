"""What a reader needs beside its parameters: a context whose warnings can be looked at, and the folder of real data."""

from __future__ import annotations

import logging
from pathlib import Path

import numpy as np
import pytest

from shiftfix.api import NodeContext

SHARED = Path(__file__).resolve().parents[4] / "shared" / "data"


@pytest.fixture
def context(tmp_path):
    """Context as the runner builds it, with names relative to the test's folder."""
    return NodeContext(
        node="log",
        logger=logging.getLogger("shiftfix.test"),
        random=np.random.default_rng(4711),
        progress=lambda fraction, text: None,
        check_cancelled=lambda: None,
        folder=None,
        write=lambda name, data: None,
        motions={},
        readers={},
        display_path=lambda path: path.relative_to(tmp_path).as_posix() if path.is_relative_to(tmp_path) else path.name,
    )


@pytest.fixture
def shared_data():
    """Folder with public sample data beside the repository; tests that need it are skipped without it."""
    if not SHARED.is_dir():
        pytest.skip("the sample data (../shared/data) are not there")
    return SHARED
