"""Shared fixtures: a registry of toy plugins that know nothing of radio."""

from __future__ import annotations

import os
import sys
from dataclasses import dataclass, field
from pathlib import Path

import pytest

# As the command line does (one_thread in shiftfix.cli.main), before numpy is imported: workers of xdist share the cores.
if not {"OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"} & set(os.environ):
    os.environ.update(OMP_NUM_THREADS="1", OPENBLAS_NUM_THREADS="1", MKL_NUM_THREADS="1")

sys.path.insert(0, str(Path(__file__).parent / "support"))


@dataclass
class FakePoint:
    """Entry point that loads a module object, as importlib.metadata would."""

    name: str
    module: object
    distribution: str = "toy-kitchen"
    version: str = "1.2"
    value: str = "toy.plugin"
    dist: object = field(init=False)

    def __post_init__(self):
        self.dist = type("Dist", (), {"metadata": {"Name": self.distribution}, "version": self.version})()

    def load(self):
        if isinstance(self.module, Exception):
            raise self.module
        return self.module


@pytest.fixture
def point():
    return FakePoint


@pytest.fixture
def kitchen():
    """A registry with the toy plugin `kitchen` (cooking recipes)."""
    import recipes

    from shiftfix.api import Registry

    return Registry((FakePoint("kitchen", recipes),))
