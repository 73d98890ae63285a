"""Parameters of a node: from the texts of a pipeline file to the frozen dataclass that the node function gets."""

from __future__ import annotations

import dataclasses
import difflib
import math
import types
import typing
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from shiftfix.errors import Problem
from shiftfix.tables.quantities import Quantity, parse_quantity


@dataclass(frozen=True)
class Resolved:
    """One parameter as it will be used: value, its unit and where it came from (`file:line`, `--set` or `default`)."""

    name: str
    value: Any
    unit: str
    origin: str
    meaning: str


class Folders:
    """Where files may lie: the pipeline's own folder and the allowed ones; links are followed before the check."""

    def __init__(self, home: Path, allowed: Sequence[Path] = ()) -> None:
        self.home = home.resolve()
        self.roots = (self.home, *(Path(a).resolve() for a in allowed))

    def inside(self, path: Path) -> bool:
        real = path.resolve()
        return any(real == root or root in real.parents for root in self.roots)

    def display(self, path: Path) -> str:
        """Return a path relative to the pipeline's folder (with `..` where needed)."""
        import os

        return Path(os.path.relpath(Path(path).resolve(), self.home)).as_posix()


def resolve_parameters(
    cls: type,
    given: Mapping[str, Any],
    *,
    node_path: str,
    place: Callable[[tuple, bool], str],
    origin: Callable[[str], str],
    folders: Folders,
    below: str = "params",
) -> tuple[Any, tuple[Resolved, ...], list[Problem]]:
    """Return the parameter object (None when there are problems), how each value came about, and all problems.

    Parameters
    ----------
    cls : type
        Frozen dataclass made with `param` fields.
    given : mapping
        As in the file.
    node_path : str
        Such as `nodes.fix`.
    place : callable
        `place(key path below params, of the key) -> where` for messages.
    origin : callable
        `origin(name) -> text` for a value that was given.
    folders : Folders
    below : str
        Path of the table below the node, for messages.
    """
    fields = {f.name: f for f in dataclasses.fields(cls)}
    hints = typing.get_type_hints(cls)
    problems: list[Problem] = []
    values: dict[str, Any] = {}
    resolved: list[Resolved] = []
    for name in given:
        if name not in fields:
            close = difflib.get_close_matches(name, fields, 1)
            problems.append(
                Problem(
                    f"{place((name,), True)}: {node_path}.{below}.{name}",
                    "unknown parameter",
                    found=name,
                    allowed=", ".join(fields) or "none: this node has no parameters",
                    remedy=f"did you mean {close[0]}?" if close else "",
                )
            )
    for name, field in fields.items():
        meta = field.metadata
        unit = meta.get("unit", "")
        if name not in given:
            if field.default is dataclasses.MISSING and field.default_factory is dataclasses.MISSING:
                problems.append(
                    Problem(
                        f"{place((), False)}: {node_path}.{below}.{name}",
                        "required parameter is missing",
                        allowed=_allowed(meta, hints[name]),
                        remedy=f"add {below}.{name} ({meta.get('meaning', '')})",
                    )
                )
                continue
            default = field.default if field.default is not dataclasses.MISSING else field.default_factory()
            values[name] = default
            resolved.append(Resolved(name, default, unit, "default", meta.get("meaning", "")))
            continue
        try:
            values[name] = _value(given[name], meta, hints[name], folders)
            resolved.append(Resolved(name, values[name], unit, origin(name), meta.get("meaning", "")))
        except _Bad as bad:
            problems.append(
                Problem(
                    f"{place((name, *bad.path), False)}: {'.'.join([node_path, below, name, *map(str, bad.path)])}",
                    bad.what,
                    found=bad.found,
                    allowed=bad.allowed or _allowed(meta, hints[name]),
                    remedy=bad.remedy,
                )
            )
    if problems:
        return None, tuple(resolved), problems
    try:
        return cls(**values), tuple(resolved), []
    except ValueError as error:
        return None, tuple(resolved), [Problem(f"{place((), False)}: {node_path}.{below}", str(error))]


class _Bad(Exception):
    def __init__(self, what: str, found: Any = "", allowed: str = "", remedy: str = "", path: tuple = ()) -> None:
        self.what, self.allowed, self.remedy, self.path = what, allowed, remedy, path
        self.found = found if isinstance(found, str) else repr(found)


def _allowed(meta: Mapping[str, Any], hint: Any) -> str:
    if meta.get("choices"):
        return ", ".join(meta["choices"])
    if meta.get("path"):
        return "a path relative to the pipeline file" + (
            " or a pattern, or a list of them" if meta["path"] == "files" else ""
        )
    if meta.get("unit"):
        text = (
            f"a quantity in {meta['unit']}"
            if meta["unit"] != "1"
            else "a number in quotes, with ppm, ppb or % if wanted"
        )
        return text + (" with optional +/- 1-sigma" if meta.get("sigma") else "") + _bounds(meta)
    names = {bool: "true or false", int: "a whole number", float: "a number", str: "a text"}
    plain = _plain(hint)
    return names.get(
        plain, "a list" if plain in (list, tuple) else "a table" if plain is dict else str(plain)
    ) + _bounds(meta)


def _bounds(meta: Mapping[str, Any]) -> str:
    low, high = meta.get("minimum"), meta.get("maximum")
    unit = f" {meta['unit']}" if meta.get("unit", "1") not in ("", "1") else ""
    if low is None and high is None:
        return ""
    if high is None:
        return f", {low:g}{unit} or more"
    if low is None:
        return f", {high:g}{unit} or less"
    return f", from {low:g} to {high:g}{unit}"


def _plain(hint: Any) -> Any:
    origin = typing.get_origin(hint)
    if origin in (typing.Union, types.UnionType):
        return _plain(next(a for a in typing.get_args(hint) if a is not type(None)))
    return {Mapping: dict}.get(origin or hint, origin or hint) if (origin or hint) is not typing.Any else typing.Any


def _value(raw: Any, meta: Mapping[str, Any], hint: Any, folders: Folders) -> Any:
    kind = _plain(hint)
    if meta.get("path"):
        return _paths(raw, meta["path"], folders)
    if meta.get("unit"):
        if kind in (tuple, list):
            if not isinstance(raw, list):
                raise _Bad("a list of quantities is needed", raw)
            return tuple(_quantity(item, meta, (k,)) for k, item in enumerate(raw))
        return _quantity(raw, meta, ())
    if meta.get("choices"):
        if kind in (tuple, list):
            if not isinstance(raw, list):
                raise _Bad("a list is needed", raw)
            return tuple(_choice(item, meta["choices"], (k,)) for k, item in enumerate(raw))
        return _choice(raw, meta["choices"], ())
    if kind is typing.Any:
        return raw
    if kind is bool:
        if not isinstance(raw, bool):
            raise _Bad("not true or false", raw, remedy="write true or false without quotes")
        return raw
    if kind is int:
        if isinstance(raw, bool) or not isinstance(raw, int):
            raise _Bad("not a whole number", raw)
        return _bounded(raw, meta)
    if kind is float:
        if isinstance(raw, bool) or not isinstance(raw, int | float) or not math.isfinite(raw):
            raise _Bad("not a finite number", raw)
        return _bounded(float(raw), meta)
    if kind is str:
        if not isinstance(raw, str):
            raise _Bad("not a text", raw, remedy="put it in quotes")
        return raw
    if kind in (tuple, list):
        inner = [a for a in typing.get_args(hint) if a is not Ellipsis] or [typing.Any]
        if isinstance(raw, str) or not isinstance(raw, list):
            raise _Bad("not a list", raw, remedy="write it in square brackets")
        out = []
        for k, item in enumerate(raw):
            try:
                out.append(_value(item, {}, inner[0], folders))
            except _Bad as bad:
                raise _Bad(bad.what, bad.found, bad.allowed, bad.remedy, (k, *bad.path)) from None
        return tuple(out)
    if kind is dict:
        if not isinstance(raw, Mapping):
            raise _Bad("not a table", raw, remedy="write it as { name = value }")
        return dict(raw)
    return raw


def _bounded(value: float, meta: Mapping[str, Any]) -> Any:
    if meta.get("minimum") is not None and value < meta["minimum"]:
        raise _Bad("below its lower bound", value)
    if meta.get("maximum") is not None and value > meta["maximum"]:
        raise _Bad("above its upper bound", value)
    return value


def _choice(raw: Any, choices: tuple[str, ...], path: tuple) -> str:
    if raw not in choices:
        close = difflib.get_close_matches(str(raw), choices, 1)
        raise _Bad(
            "not one of the choices", raw, ", ".join(choices), f"did you mean {close[0]}?" if close else "", path
        )
    return raw


def _quantity(raw: Any, meta: Mapping[str, Any], path: tuple) -> float | Quantity:
    try:
        quantity = parse_quantity(raw, meta["unit"], sigma_allowed=bool(meta.get("sigma")))
    except ValueError as error:
        raise _Bad(str(error), raw, path=path) from None
    try:
        _bounded(quantity.value, meta)
    except _Bad as bad:
        raise _Bad(bad.what, raw, path=path) from None
    return quantity if meta.get("sigma") else quantity.value


def _paths(raw: Any, kind: str, folders: Folders) -> Path | tuple[Path, ...]:
    patterns = [raw] if isinstance(raw, str) else raw
    if not isinstance(patterns, list) or not patterns or not all(isinstance(p, str) and p for p in patterns):
        raise _Bad("not a path" if kind == "file" else "not a pattern or list of patterns", raw)
    if kind == "file" and not isinstance(raw, str):
        raise _Bad("one path is needed, not a list", raw)
    found: list[Path] = []
    for k, pattern in enumerate(patterns):
        path = () if isinstance(raw, str) else (k,)
        if (
            "\0" in pattern
            or Path(pattern).is_absolute()
            or pattern.startswith("~")
            or "\\" in pattern
            or ":" in pattern
        ):
            raise _Bad(
                "only paths relative to the pipeline file are allowed",
                pattern,
                path=path,
                remedy="write it relative, with / as separator; name another folder with --allow FOLDER",
            )
        target = folders.home / pattern
        magic = kind == "files" and any(c in pattern for c in "*?[")
        if magic:
            import glob

            matches = sorted(Path(m) for m in glob.glob(str(target)))
        else:
            matches = [target]
        for match in matches or [target]:
            if not folders.inside(match):
                raise _Bad(
                    "leaves the pipeline's folder",
                    pattern,
                    path=path,
                    allowed="files below the pipeline file or an allowed folder",
                    remedy="give the folder with --allow FOLDER",
                )
        # A pattern without match stays: the reader says what is missing, with all its other problems.
        found += matches or [target]
    return found[0] if kind == "file" else tuple(found)
