"""Layout of plain text: wrapped paragraphs, lists and tables that stay within the width whatever the names are."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

WIDTH = 100


def wrapped(text: str, indent: int = 0, hang: int = 2) -> list[str]:
    """Return a paragraph; further lines hang by `hang` columns."""
    return textwrap.wrap(
        text,
        WIDTH,
        initial_indent=" " * indent,
        subsequent_indent=" " * (indent + hang),
        break_on_hyphens=False,
    ) or [""]


def listed(title: str, texts: Iterable[str]) -> list[str]:
    """Return a section with one dash a text, nothing when there is none."""
    texts = list(texts)
    return [title, *(line for text in texts for line in wrapped(f"- {text}", 2)), ""] if texts else []


def table(headings: Sequence[str], rows: Sequence[Sequence[str]], indent: int = 2, last_left: bool = False) -> list[str]:
    """Return a table: first column to the left, the others to the right; a long name stands on a line of its own.

    Parameters
    ----------
    headings : sequence of str
    rows : sequence of sequence of str
    indent : int
    last_left : bool
        Whether the last column too is set to the left.
    """
    widths = [max(len(r[k]) for r in (headings, *rows)) for k in range(len(headings))]
    rest = sum(w + 2 for w in widths[1:])
    widths[0] = min(widths[0], WIDTH - indent - rest)
    out = []
    for row in (headings, *rows):
        cells = [f"{cell:>{width}}" for cell, width in zip(row[1:], widths[1:], strict=True)]
        if last_left:
            cells[-1] = row[-1]
        name = row[0]
        if len(name) > widths[0]:
            out += wrapped(name, indent)
            name = ""
        out.append(" " * indent + "  ".join([f"{name:<{widths[0]}}", *cells]).rstrip())
    return out
