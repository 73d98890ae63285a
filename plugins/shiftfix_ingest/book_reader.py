"""Book reader: entries of a TOML book with units, classes, times and places, and every problem at its line and column."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Mapping
from typing import Any

import numpy as np

from shiftfix.api import (
    LocatedDocument,
    Problem,
    geodetic_from_itrs,
    itrs_from_geodetic,
    parse_quantity,
    tai_ns_from_utc,
)
from shiftfix_ingest.angles import angle_deg

DATUMS = ("WGS84", "GRS80", "ETRS89")
"""Ellipsoidal datums that agree with WGS84 to a metre; any ITRF or IGS realisation is allowed too."""

_REALISATION = re.compile(r"ITRF(?:\d{2}|\d{4})|IGS(?:[BR]?\d{2})?", re.IGNORECASE)
_GEODETIC_ONLY = ("datum", "height_kind", "undulation")


class BookReader:
    """Reads the entries of one book and collects every problem with its line and column."""

    def __init__(self, document: LocatedDocument, name: str) -> None:
        self.document, self.name = document, name
        self.problems: list[Problem] = []
        self.remarks: list[str] = []

    def where(self, *path: Any) -> str:
        line, column = self.document.place(tuple(path))
        return f"{self.name}:{line}:{column}"

    def add(self, path: tuple, what: str, **more: str) -> None:
        self.problems.append(Problem(f"{self.where(*path)}: {'.'.join(map(str, path))}", what, **more))

    def entries(self, key: str) -> list[tuple[tuple, str, dict]]:
        """Return path, identifier and body of every entry: tables by name, or an array of tables with `id`."""
        raw = self.document.values.get(key)
        for other in self.document.values:
            if other not in (key, "title", "stations", "emitters"):
                self.add((other,), "unknown table", found=other, allowed=key)
        if not raw or not isinstance(raw, Mapping | list):
            self.add((key,) if raw else (), f"the book has no {key}", allowed=f"[{key}.NAME] tables")
            return []
        out = []
        for k, body in raw.items() if isinstance(raw, Mapping) else enumerate(raw):
            if not isinstance(body, Mapping):
                self.add((key, k), "not an entry", found=repr(body), allowed=f"a [{key}.NAME] table of fields")
                continue
            name = k if isinstance(k, str) else body.get("id")
            if not isinstance(name, str) or not name.strip() or name != name.strip():
                self.add(
                    (key, k),
                    "an entry without id",
                    found=repr(name) if name else "",
                    allowed='id = "NAME", no blanks around it',
                )
                continue
            out.append(((key, k), name, body if isinstance(k, str) else {n: v for n, v in body.items() if n != "id"}))
        return out

    def known(self, path: tuple, body: Mapping[str, Any], fields: tuple[str, ...]) -> None:
        """Note every field that is not one of `fields`, at its key, with a suggestion."""
        for field in body:
            if field not in fields:
                close = difflib.get_close_matches(field, fields, 1)
                line, column = self.document.key_place((*path, field))
                self.problems.append(
                    Problem(
                        f"{self.name}:{line}:{column}: {'.'.join(map(str, (*path, field)))}",
                        "unknown field",
                        found=field,
                        allowed=", ".join(fields),
                        remedy=f"did you mean {close[0]}?" if close else "",
                    )
                )

    def quantity(
        self,
        path: tuple,
        body: Mapping[str, Any],
        field: str,
        unit: str,
        default: float | None = None,
        sigma: bool = False,
    ):
        """Return a value in SI (or value and sigma), the default when absent, None after a problem."""
        if field not in body:
            return (default, None) if sigma else default
        try:
            q = parse_quantity(body[field], unit, sigma_allowed=sigma)
        except ValueError as error:
            self.add((*path, field), str(error), found=repr(body[field]))
            return (None, None) if sigma else None
        return (q.value, q.sigma) if sigma else q.value

    def bounded(
        self, path: tuple, body: Mapping[str, Any], field: str, unit: str, low: float, high: float, remedy: str = ""
    ) -> float | None:
        """Return a value in SI within bounds; None when absent or after a problem."""
        value = self.quantity(path, body, field, unit)
        if value is not None and not low <= value <= high:
            self.add(
                (*path, field),
                f"{field.replace('_', ' ')} out of range",
                found=repr(body[field]),
                allowed=f"{low:g} to {high:g} {unit}",
                remedy=remedy,
            )
            return None
        return value

    def angle(self, path: tuple, body: Mapping[str, Any], axis: str, low: float, high: float) -> float | None:
        """Return a latitude or longitude in degrees; None when absent or after a problem."""
        if axis not in body:
            return None
        try:
            value = angle_deg(body[axis], axis)
        except ValueError as error:
            self.add((*path, axis), str(error), found=repr(body[axis]))
            return None
        if not low <= value <= high:
            remedy = "are latitude and longitude swapped?" if axis == "latitude" else ""
            self.add(
                (*path, axis),
                f"{axis} out of range",
                found=f"{value} deg",
                allowed=f"{low:g} to {high:g} deg",
                remedy=remedy,
            )
            return None
        return value

    def known_class(self, path: tuple, body: Mapping[str, Any], field: str, classes: Mapping[str, Any]) -> str:
        """Return a class in lower case, `unknown` when absent or after a problem."""
        given = body.get(field, "unknown")
        kind = given.lower().replace("_", "-").replace(" ", "-") if isinstance(given, str) else ""
        if kind in classes or kind == "unknown":
            return kind
        close = difflib.get_close_matches(kind, classes, 1)
        self.add(
            (*path, field),
            f"unknown class of {field}",
            found=repr(given),
            allowed=", ".join(classes) + ", unknown",
            remedy=f"did you mean {close[0]}?" if close else "",
        )
        return "unknown"

    def time(self, path: tuple, body: Mapping[str, Any], field: str, default: int) -> int:
        if field not in body:
            return default
        try:
            return tai_ns_from_utc(str(body[field]))
        except ValueError as error:
            self.add(
                (*path, field), str(error), found=repr(body[field]), allowed='UTC text such as "2026-03-01T00:00:00Z"'
            )
            return default

    def place(self, path: tuple, body: Mapping[str, Any]) -> np.ndarray | None:
        """Return an ITRS position [m] of geodetic or Cartesian fields, antenna offset included; None after a problem."""
        geodetic = [f for f in ("latitude", "longitude", "height") if f in body]
        cartesian = [f for f in ("x", "y", "z") if f in body]
        before = len(self.problems)
        if geodetic and cartesian:
            self.add(
                path,
                "both geodetic and Cartesian coordinates",
                found=", ".join(geodetic + cartesian),
                remedy="keep one kind",
            )
            return None
        if not geodetic and not cartesian:
            self.add(
                path,
                "no position",
                allowed="latitude, longitude, height with datum and height_kind; or x, y, z with frame; or track",
            )
            return None
        position = self._cartesian(path, body) if cartesian else self._geodetic(path, body)
        offset = [self.quantity(path, body, f, "m", 0.0) for f in ("antenna_east", "antenna_north", "antenna_up")]
        if position is None or None in offset or len(self.problems) > before:
            return None
        if any(offset):
            latitude, longitude, _ = geodetic_from_itrs(position)
            sf, cf, sl, cl = np.sin(latitude), np.cos(latitude), np.sin(longitude), np.cos(longitude)
            axes = np.array([[-sl, cl, 0.0], [-sf * cl, -sf * sl, cf], [cf * cl, cf * sl, sf]])
            position = position + np.array(offset) @ axes
        return position

    def _cartesian(self, path: tuple, body: Mapping[str, Any]) -> np.ndarray | None:
        values = []
        for f in ("x", "y", "z"):
            if f not in body:
                self.add(path, f"{f} is missing", allowed="x, y and z")
            values.append(self.quantity(path, body, f, "m"))
        for field in _GEODETIC_ONLY:
            if field in body:
                self.add((*path, field), f"{field} has no meaning beside x, y, z", remedy="take it out; say frame")
        frame = body.get("frame")
        if not _is_realisation(frame):
            self.add(
                (*path, "frame") if "frame" in body else path,
                "Cartesian coordinates without their frame",
                found=repr(frame) if "frame" in body else "",
                allowed="an ITRF or IGS realisation such as ITRF2014, or " + ", ".join(DATUMS),
            )
            return None
        if None in values:
            return None
        radius = math.sqrt(sum(v * v for v in values))
        if not 6.3e6 < radius < 6.5e6:
            self.add(
                (*path, "x"),
                "the position is not near the Earth's surface",
                found=f"{radius / 1e3:.1f} km from the centre",
                allowed="6300 to 6500 km",
                remedy="check unit and sign",
            )
            return None
        return np.array(values)

    def _geodetic(self, path: tuple, body: Mapping[str, Any]) -> np.ndarray | None:
        if not _is_realisation(body.get("datum")):
            given = "datum" in body
            self.add(
                (*path, "datum") if given else path,
                "datum that is not geocentric" if given else "station without datum",
                found=repr(body["datum"]) if given else "",
                allowed=", ".join(DATUMS) + " or an ITRF realisation",
                remedy="say on which datum the coordinates are; transform local datums first (they differ by up to 1 km)",
            )
        for field in ("latitude", "longitude", "height"):
            if field not in body:
                self.add(path, f"{field} is missing", allowed="latitude, longitude and height")
        if "frame" in body:
            self.add((*path, "frame"), "frame has no meaning beside latitude and longitude", remedy="say datum")
        latitude = self.angle(path, body, "latitude", -90.0, 90.0)
        longitude = self.angle(path, body, "longitude", -180.0, 360.0)
        height = self.bounded(path, body, "height", "m", -500.0, 9000.0)
        undulation = self.bounded(
            path, body, "undulation", "m", -120.0, 120.0, "it is the height of the geoid above the ellipsoid"
        )
        kind = body.get("height_kind")
        if kind == "sea level":
            if "undulation" not in body:
                self.add(
                    (*path, "height_kind"),
                    "height above sea level without undulation",
                    remedy='add undulation = "... m" (geoid above ellipsoid), or give the ellipsoidal height',
                )
            elif height is not None and undulation is not None:
                height = height + undulation
        elif kind == "ellipsoid":
            if "undulation" in body:
                self.add(
                    (*path, "undulation"),
                    "an undulation beside a height above the ellipsoid",
                    remedy='take it out, or say height_kind = "sea level"',
                )
        else:
            self.add(
                (*path, "height_kind") if kind else path,
                "the kind of height is not said",
                found=repr(kind) if kind else "",
                allowed='height_kind = "ellipsoid" or "sea level"',
                remedy="the two differ by up to 100 m",
            )
        if None in (latitude, longitude, height):
            return None
        return itrs_from_geodetic(math.radians(latitude), math.radians(longitude), height)


def _is_realisation(name: Any) -> bool:
    """Return whether a frame or datum is geocentric; blanks, hyphens and case do not matter."""
    if not isinstance(name, str):
        return False
    plain = name.replace(" ", "").replace("-", "")
    return plain.upper() in DATUMS or bool(_REALISATION.fullmatch(plain))
