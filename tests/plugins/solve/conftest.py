"""An Earth frame for tests of the solve plugin."""

from __future__ import annotations

import pytest

from shiftfix.api import EarthFrame, tai_ns_from_utc


@pytest.fixture(scope="module")
def frame():
    """Return a frame without an orientation table: only its own consistency matters here."""
    return EarthFrame.without_orientation(tai_ns_from_utc("2026-03-01T12:00:00Z"), (-1000.0, 1000.0))
