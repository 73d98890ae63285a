"""Progress of a run on stderr: a live line on a terminal, nothing elsewhere."""

from __future__ import annotations

import time
from typing import TextIO


class _Silent:
    def __enter__(self):
        return self

    def __exit__(self, *_):
        return False

    def __call__(self, event) -> None:
        return None


class _Live(_Silent):
    """One status line: node, what it does, share done, seconds so far."""

    def __init__(self, stream: TextIO) -> None:
        from rich.console import Console
        from rich.status import Status

        self.begin = time.monotonic()
        self.nodes: list[str] = []
        self.done = 0
        self.status = Status("starting", console=Console(file=stream))

    def __enter__(self):
        self.status.start()
        return self

    def __exit__(self, *_):
        self.status.stop()
        return False

    def __call__(self, event) -> None:
        if event.kind == "run_started":
            self.nodes = list(event.details.get("nodes", ()))
        if event.kind == "node_finished":
            self.done += 1
        if event.kind in ("node_started", "node_progress"):
            share = f" {event.fraction:.0%}" if event.fraction is not None else ""
            text = f"  {event.text}" if event.text else ""
            spent = time.monotonic() - self.begin
            self.status.update(f"{event.node} ({self.done + 1} of {len(self.nodes)}){share}{text}  {spent:.1f} s")


def observer(stream: TextIO, quiet: bool) -> _Silent:
    """Return a context manager that takes events; live only when the stream is a terminal."""
    return _Live(stream) if not quiet and stream.isatty() else _Silent()
