"""Plugins of the entry-point group: listed without being imported, imported one by one when a pipeline names them."""

from __future__ import annotations

import importlib.util
import re
import threading
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

import pluggy

from shiftfix.errors import PluginError, Problem
from shiftfix.graph import hookspecs
from shiftfix.graph.nodes import MotionSpec, NodeSpec

_NAME = re.compile(r"^[a-z][a-z0-9_]*$")


@dataclass(frozen=True)
class PluginEntry:
    """One entry point as found, not imported.

    Parameters
    ----------
    name, module : str
    distribution, version : str
    state : str
        `found`, `loaded`, `broken` or `clashing`.
    error : str
        Why it is broken or clashing.
    """

    name: str
    module: str
    distribution: str
    version: str
    state: str = "found"
    error: str = ""


@dataclass(frozen=True)
class RegisteredNode:
    """A node with the plugin that offers it."""

    qualified_name: str
    spec: NodeSpec
    plugin: PluginEntry


class Registry:
    """Plugins of this environment. Thread-safe; holds no global state."""

    def __init__(self, entries: tuple[metadata.EntryPoint, ...] | None = None) -> None:
        found = tuple(metadata.entry_points(group=hookspecs.GROUP)) if entries is None else entries
        self._points: dict[str, list[metadata.EntryPoint]] = {}
        for point in found:
            same = self._points.setdefault(point.name, [])
            # One distribution that stands on the path twice (an editable install and its source) is one plugin.
            if not any(p.value == point.value and _distribution(p) == _distribution(point) for p in same):
                same.append(point)
        self._loaded: dict[str, tuple[RegisteredNode, ...]] = {}
        self._motions: dict[str, tuple[MotionSpec, PluginEntry]] = {}
        self._hooks: dict[str, pluggy.PluginManager] = {}
        self._errors: dict[str, PluginError] = {}
        self._lock = threading.RLock()

    def names(self) -> tuple[str, ...]:
        """Return the names of all plugins, sorted."""
        return tuple(sorted(self._points))

    def entries(self) -> tuple[PluginEntry, ...]:
        """Return every plugin found, without importing any; the state tells what is known of it so far."""
        out = []
        for name in self.names():
            points = self._points[name]
            for point in points:
                state, error = "found", ""
                if len(points) > 1:
                    state, error = "clashing", self._clash(name)
                elif name in self._errors:
                    state, error = "broken", str(self._errors[name])
                elif name in self._loaded:
                    state = "loaded"
                elif missing := _missing_module(point):
                    state, error = "broken", missing
                out.append(PluginEntry(name, point.value, *_distribution(point), state, error))
        return tuple(out)

    def probed(self) -> tuple[PluginEntry, ...]:
        """Return every plugin with its state after an attempt to import each."""
        for name in self.names():
            try:
                self.load(name)
            except PluginError:
                continue
        return self.entries()

    def _clash(self, name: str) -> str:
        both = " and ".join(f"{d} {v}" for d, v in map(_distribution, self._points[name]))
        return f"two plugins are called {name!r}: in {both}; uninstall one"

    def load(self, name: str) -> tuple[RegisteredNode, ...]:
        """Return the nodes of one plugin, importing it on first use.

        Raises
        ------
        PluginError
            Unknown, clashing, broken on import, or not keeping to the hooks; always with distribution and version.
        """
        with self._lock:
            if name in self._loaded:
                return self._loaded[name]
            if name in self._errors:
                raise self._errors[name]
            try:
                return self._import(name)
            except PluginError as error:
                self._errors[name] = error
                raise

    def _import(self, name: str) -> tuple[RegisteredNode, ...]:
        points = self._points.get(name)
        if not points:
            raise PluginError(
                Problem(f"plugin {name}", "no such plugin", allowed=", ".join(self.names()) or "none is installed")
            )
        if len(points) > 1:
            raise PluginError(Problem(f"plugin {name}", self._clash(name)))
        point = points[0]
        distribution, version = _distribution(point)
        entry = PluginEntry(name, point.value, distribution, version, "loaded")
        where = f"plugin {name} ({distribution} {version})"
        if not _NAME.match(name):
            raise PluginError(
                Problem(where, "bad entry-point name", found=name, allowed="lower-case letters, digits, _")
            )
        try:
            module = point.load()
        except BaseException as error:
            if isinstance(error, KeyboardInterrupt):
                raise
            raise PluginError(Problem(where, "cannot be imported", found=f"{type(error).__name__}: {error}")) from error
        manager = pluggy.PluginManager("shiftfix")
        manager.add_hookspecs(hookspecs)
        known = {h for h in dir(hookspecs) if h.startswith("shiftfix_")}
        marked = [a for a in dir(module) if hasattr(getattr(module, a, None), "shiftfix_impl")]
        strange = sorted({a for a in dir(module) if a.startswith("shiftfix_")} | set(marked) - known)
        strange = [a for a in strange if a not in known]
        if strange:
            raise PluginError(
                Problem(where, f"unknown hook {strange[0]}", found=", ".join(strange), allowed=", ".join(sorted(known)))
            )
        try:
            manager.register(module, name)
            manager.check_pending()
            nodes = [node for group in manager.hook.shiftfix_nodes() for node in group]
            motions = [motion for group in manager.hook.shiftfix_motions() for motion in group]
        except Exception as error:
            raise PluginError(
                Problem(where, "does not keep to the hooks", found=f"{type(error).__name__}: {error}")
            ) from error
        self._check(where, nodes, motions)
        self._loaded[name] = tuple(RegisteredNode(f"{name}.{n.name}", n, entry) for n in nodes)
        self._hooks[name] = manager
        for motion in motions:
            if motion.name in self._motions:
                other = self._motions[motion.name][1]
                raise PluginError(Problem(where, f"motion {motion.name!r} is offered by {other.distribution} too"))
            self._motions[motion.name] = (motion, entry)
        return self._loaded[name]

    @staticmethod
    def _check(where: str, nodes: list, motions: list) -> None:
        problems = []
        seen: set[str] = set()
        for node in nodes:
            if not isinstance(node, NodeSpec):
                problems.append(
                    Problem(where, "shiftfix_nodes gave something else than NodeSpec", found=type(node).__name__)
                )
            elif not _NAME.match(node.name) or node.name in seen:
                problems.append(Problem(where, f"bad or repeated node name {node.name!r}"))
            else:
                seen.add(node.name)
        for motion in motions:
            if not isinstance(motion, MotionSpec):
                problems.append(
                    Problem(where, "shiftfix_motions gave something else than MotionSpec", found=type(motion).__name__)
                )
        if problems:
            raise PluginError(problems)

    def node(self, qualified: str) -> RegisteredNode:
        """Return a node by its qualified name; raises KeyError with the known names when the plugin lacks it."""
        plugin, _, short = qualified.partition(".")
        for node in self.load(plugin):
            if node.spec.name == short:
                return node
        raise KeyError(qualified)

    def nodes(self) -> tuple[RegisteredNode, ...]:
        """Return all nodes of all plugins that can be loaded, sorted by name."""
        out = []
        for name in self.names():
            try:
                out += self.load(name)
            except PluginError:
                continue
        return tuple(sorted(out, key=lambda n: n.qualified_name))

    def motions(self) -> Mapping[str, MotionSpec]:
        """Return all motions by name; plugins are imported when the mapping is first read."""
        return _Lazy(lambda: {n: m for n, (m, _) in self._with_all_loaded()._motions.items()})

    def readers(self) -> Mapping[str, NodeSpec]:
        """Return all nodes that can recognise files, by qualified name; imported when first read."""
        return _Lazy(lambda: {n.qualified_name: n.spec for n in self.nodes() if n.spec.recognise})

    def _with_all_loaded(self) -> Registry:
        self.nodes()
        return self

    def observers(self) -> tuple[pluggy.PluginManager, ...]:
        """Return the hook callers of the plugins loaded so far, for run events."""
        return tuple(self._hooks[n] for n in sorted(self._hooks))


class _Lazy(Mapping):
    """Mapping that is filled when it is first read."""

    def __init__(self, fill) -> None:
        self._fill, self._items = fill, None

    def _all(self) -> dict:
        if self._items is None:
            self._items = self._fill()
        return self._items

    def __getitem__(self, key: str):
        return self._all()[key]

    def __iter__(self) -> Iterator[str]:
        return iter(self._all())

    def __len__(self) -> int:
        return len(self._all())


def _missing_module(point: metadata.EntryPoint) -> str:
    """Return why the module of an entry point cannot be found, looking for its file without importing it."""
    first, *rest = point.value.partition(":")[0].split(".")
    if not isinstance(point, metadata.EntryPoint):
        return ""
    try:
        spec = importlib.util.find_spec(first)
    except (ImportError, ValueError) as error:
        return str(error)
    if spec is None:
        return f"ModuleNotFoundError: no module named {first!r}"
    for part in rest:
        folders = [Path(f) for f in (spec.submodule_search_locations or ())] if spec else []
        found = [f / part for f in folders if (f / part).is_dir()] + [f for f in folders if list(f.glob(f"{part}.*"))]
        if not found:
            return f"ModuleNotFoundError: no module named {point.value!r}"
        if part != rest[-1]:
            return ""
    return ""


def _distribution(point: metadata.EntryPoint) -> tuple[str, str]:
    dist = getattr(point, "dist", None)
    return (dist.metadata["Name"], dist.version) if dist is not None else ("unknown distribution", "?")
