"""Errors and warnings of shiftfix: one root, few classes, each with the exit code that the command line gives it.

A message says what is wrong, where, what was found, what is allowed and what to do; `Problem` is one such
statement, and an error carries all the problems of a file or table at once.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong, in the order in which a reader needs it.

    Parameters
    ----------
    where : str
        `file:line`, `file:line:column`, a node path (`nodes.fix.params.motion`) or a station.
    what : str
        What is wrong, one line.
    found, allowed, remedy : str, optional
        What was found, what is allowed, and one action to take.
    """

    where: str
    what: str
    found: str = ""
    allowed: str = ""
    remedy: str = ""

    def __str__(self) -> str:
        lines = [f"{self.where}: {self.what}"]
        for label, text in (("found", self.found), ("allowed", self.allowed), ("try", self.remedy)):
            if text:
                lines.append(f"    {label}: {text}")
        return "\n".join(lines)


class ShiftfixError(Exception):
    """Root of all errors that shiftfix raises on purpose.

    Parameters
    ----------
    problems : str, Problem or iterable of Problem
        One or many statements; a plain string becomes a problem without a place.
    """

    exit_code = 1

    def __init__(self, problems: str | Problem | Iterable[Problem] = ()) -> None:
        if isinstance(problems, str):
            problems = (Problem("", problems),)
        elif isinstance(problems, Problem):
            problems = (problems,)
        self.problems: tuple[Problem, ...] = tuple(problems)
        super().__init__("\n".join(str(p).removeprefix(": ") for p in self.problems))


class DefinitionError(ShiftfixError, ValueError):
    """The pipeline file is invalid; every problem has line:column and the path of the value."""

    exit_code = 3


class InputError(ShiftfixError, ValueError):
    """An input file or its content cannot be used; every problem has its file and line."""

    exit_code = 4


class SchemaError(InputError):
    """A table violates its schema; lists every violated rule with count and first rows."""


class CoverageError(InputError):
    """Epochs lie outside the span of a table (Earth orientation, ephemeris)."""


class PluginError(ShiftfixError, ImportError):
    """A plugin cannot be loaded or breaks the contract; names its distribution and version."""

    exit_code = 7


class NodeError(ShiftfixError, RuntimeError):
    """A node failed; names node and plugin and keeps the original as `__cause__`."""

    exit_code = 7


class VerificationError(ShiftfixError):
    """A run folder does not match its provenance."""

    exit_code = 8


class RunCancelled(ShiftfixError):
    """The run was cancelled; what was finished stands in the run folder."""

    exit_code = 130
