"""TOML documents whose every key and value knows its line and column."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from shiftfix.errors import Problem

KeyPath = tuple[str | int, ...]


@dataclass(frozen=True)
class LocatedDocument:
    """Values of a TOML file with their places.

    Parameters
    ----------
    values : mapping
        As `tomllib` gives them.
    keys, places : mapping of key path to (line, column)
        Where a key and its value begin, both counted from 1.
    """

    values: Mapping[str, Any]
    keys: Mapping[KeyPath, tuple[int, int]] = field(default_factory=dict)
    places: Mapping[KeyPath, tuple[int, int]] = field(default_factory=dict)

    def place(self, path: KeyPath) -> tuple[int, int]:
        """Return line and column of a value; of its nearest parent when the path itself is not in the file."""
        for end in range(len(path), 0, -1):
            if path[:end] in self.places:
                return self.places[path[:end]]
        return (1, 1)

    def key_place(self, path: KeyPath) -> tuple[int, int]:
        """Return line and column of a key; of its value or parent when it has no place of its own."""
        return self.keys.get(path) or self.place(path)


def read_located_toml(path: Path, display: str | None = None) -> LocatedDocument:
    """Return a TOML file with places.

    Raises
    ------
    TomlSyntaxError
        With one problem at line:column. A missing or unreadable file is an OSError as usual.
    """
    return parse_located_toml(Path(path).read_bytes(), display or Path(path).name)


class TomlSyntaxError(ValueError):
    """A text is not TOML; carries one Problem."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(str(problem))
        self.problem = problem


def parse_located_toml(content: bytes, name: str) -> LocatedDocument:
    """Return the document of a TOML text; `name` stands in messages."""
    try:
        text = content.decode("utf-8")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise TomlSyntaxError(
            Problem(f"{name}:{line}:1", "the file is not UTF-8 text", allowed="TOML in UTF-8")
        ) from None
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        message = str(error)
        line, column = getattr(error, "lineno", 0), getattr(error, "colno", 0)
        if not line:
            import re

            match = re.search(r"\(at line (\d+), column (\d+)\)", message)
            end = "(at end of document)" in message
            lines = text.splitlines() or [""]
            line, column = (
                (int(match[1]), int(match[2])) if match else ((len(lines), len(lines[-1]) + 1) if end else (1, 1))
            )
        what = message.split(" (at ")[0]
        shown = (text.splitlines() or [""])[min(line, len(text.splitlines()) or 1) - 1].strip()
        raise TomlSyntaxError(Problem(f"{name}:{line}:{column}", f"not valid TOML: {what}", found=shown)) from None
    keys: dict[KeyPath, tuple[int, int]] = {}
    places: dict[KeyPath, tuple[int, int]] = {}
    _walk_document(content, keys, places)
    return LocatedDocument(values, keys, places)


def _walk_document(content: bytes, keys: dict, places: dict) -> None:
    import tree_sitter_toml
    from tree_sitter import Language, Parser

    root = Parser(Language(tree_sitter_toml.language())).parse(content).root_node
    counts: dict[KeyPath, int] = {}
    for node in root.children:
        if node.type == "pair":
            _walk_pair(node, (), keys, places)
        elif node.type in ("table", "table_array_element"):
            named = [c for c in node.children if c.type in ("bare_key", "quoted_key", "dotted_key")]
            if not named:
                continue
            prefix = _resolve(_key_parts(named[0]), counts)
            if node.type == "table_array_element":
                counts[prefix] = counts.get(prefix, -1) + 1
                prefix = (*prefix, counts[prefix])
            place = (node.start_point[0] + 1, node.start_point[1] + 1)
            for end in range(1, len(prefix) + 1):
                keys.setdefault(prefix[:end], place)
                places.setdefault(prefix[:end], place)
            for child in node.children:
                if child.type == "pair":
                    _walk_pair(child, prefix, keys, places)


def _resolve(parts: tuple[str, ...], counts: dict[KeyPath, int]) -> KeyPath:
    """Return a table name with the running index of every array of tables that it passes."""
    out: KeyPath = ()
    for k, part in enumerate(parts):
        out = (*out, part)
        if out in counts and k < len(parts) - 1:
            out = (*out, counts[out])
    return out


def _key_parts(node: Any) -> tuple[str, ...]:
    if node.type == "dotted_key":
        return tuple(part for child in node.children if child.type != "." for part in _key_parts(child))
    text = node.text.decode()
    if node.type == "quoted_key":
        return (next(iter(tomllib.loads(f"{text} = 0"))),)
    return (text,)


def _walk_pair(node: Any, prefix: KeyPath, keys: dict, places: dict) -> None:
    named = [c for c in node.children if c.type in ("bare_key", "quoted_key", "dotted_key")]
    values = [
        c for c in node.children if c.is_named and c.type not in ("bare_key", "quoted_key", "dotted_key", "comment")
    ]
    if not named or not values:
        return
    path = (*prefix, *_key_parts(named[0]))
    here = (node.start_point[0] + 1, node.start_point[1] + 1)
    for end in range(len(prefix) + 1, len(path) + 1):
        keys.setdefault(path[:end], here)
        places.setdefault(path[:end], here)
    keys[path] = here
    _walk_value(values[0], path, keys, places)


def _walk_value(node: Any, path: KeyPath, keys: dict, places: dict) -> None:
    places[path] = (node.start_point[0] + 1, node.start_point[1] + 1)
    if node.type == "inline_table":
        for child in node.children:
            if child.type == "pair":
                _walk_pair(child, path, keys, places)
    elif node.type == "array":
        items = [c for c in node.children if c.is_named and c.type != "comment"]
        for k, child in enumerate(items):
            _walk_value(child, (*path, k), keys, places)
