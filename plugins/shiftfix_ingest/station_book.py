"""Station book and emitter book: TOML files in which every quantity has a unit and every place a datum.

[stations.ORREL]
latitude = "-38.91 deg"
longitude = "-23.12 deg"
height = "118 m"
height_kind = "ellipsoid"          # or "sea level", then with undulation = "12.3 m"
datum = "WGS84"
position_sigma = "10 m"
reference = "gnss-disciplined"     # class, or offset = "3e-8 +/- 1e-7"
clock = "pps"                      # class, or time_bias = "0 s +/- 1 ms"
"""

from __future__ import annotations

import difflib
import math
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

REFERENCES: Mapping[str, tuple[float, float]] = {
    "bare-crystal": (5e-5, 1e-9),
    "tcxo": (1e-6, 1e-11),
    "ocxo": (5e-8, 1e-14),
    "double-oven-ocxo": (1e-8, 1e-15),
    "rubidium": (1e-9, 1e-17),
    "gnss-disciplined": (1e-11, 0.0),
    "hydrogen-maser": (1e-13, 0.0),
}
"""1-sigma of fractional offset and of drift [1/s] after warm-up, by class (common practice; between published tables)."""

CLOCKS: Mapping[str, float] = {"pps": 1e-4, "gnss": 1e-6, "ntp": 0.02, "manual": 0.5}
"""1-sigma of the time tags [s] by class (common practice)."""

DATUMS = ("WGS84", "GRS80", "ETRS89")
"""Ellipsoidal datums that agree with WGS84 to a metre; any ITRF realisation is allowed too."""

_FIELDS = (
    "latitude",
    "longitude",
    "height",
    "height_kind",
    "undulation",
    "datum",
    "x",
    "y",
    "z",
    "frame",
    "vx",
    "vy",
    "vz",
    "epoch",
    "antenna_up",
    "antenna_east",
    "antenna_north",
    "position_sigma",
    "reference",
    "offset",
    "drift",
    "clock",
    "time_bias",
    "track",
    "valid_from",
    "valid_until",
    "chain",
    "note",
)


class BookReader:
    """Reads the entries of one book and collects every problem with its line and column."""

    def __init__(self, document: LocatedDocument, name: str) -> None:
        self.document, self.name = document, name
        self.problems: list[Problem] = []

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
        if not raw:
            self.add((), f"the book has no {key}", allowed=f"[{key}.NAME] tables")
            return []
        if isinstance(raw, Mapping):
            return [((key, n), n, b) for n, b in raw.items() if isinstance(b, Mapping)]
        out = []
        for k, body in enumerate(raw):
            if not isinstance(body, Mapping) or not isinstance(body.get("id"), str):
                self.add((key, k), "an entry without id", allowed='id = "NAME"')
                continue
            out.append(((key, k), body["id"], {n: v for n, v in body.items() if n != "id"}))
        return out

    def known(self, path: tuple, body: Mapping[str, Any], fields: tuple[str, ...]) -> None:
        for field in body:
            if field not in fields:
                close = difflib.get_close_matches(field, fields, 1)
                self.add(
                    (*path, field),
                    "unknown field",
                    found=field,
                    allowed=", ".join(fields),
                    remedy=f"did you mean {close[0]}?" if close else "",
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
        frame = body.get("frame")
        if not (isinstance(frame, str) and (frame.upper().startswith(("ITRF", "IGS")) or frame in DATUMS)):
            self.add(
                (*path, "frame") if frame else path,
                "Cartesian coordinates without their frame",
                found=repr(frame) if frame else "",
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
        datum = body.get("datum")
        if not isinstance(datum, str) or not (datum in DATUMS or datum.upper().startswith("ITRF")):
            self.add(
                (*path, "datum") if datum else path,
                "station without datum" if not datum else "datum that is not geocentric",
                found=repr(datum) if datum else "",
                allowed=", ".join(DATUMS) + " or an ITRF realisation",
                remedy="say on which datum the coordinates are; transform local datums first (they differ by up to 1 km)",
            )
        latitude = self.quantity(path, body, "latitude", "deg")
        longitude = self.quantity(path, body, "longitude", "deg")
        height = self.quantity(path, body, "height", "m")
        for field, _value in (("latitude", latitude), ("longitude", longitude), ("height", height)):
            if field not in body:
                self.add(path, f"{field} is missing", allowed="latitude, longitude and height")
        if latitude is not None and abs(latitude) > 90.0:
            self.add(
                (*path, "latitude"),
                "latitude out of range",
                found=f"{latitude} deg",
                allowed="-90 to 90 deg",
                remedy="are latitude and longitude swapped?",
            )
            latitude = None
        if longitude is not None and not -180.0 <= longitude <= 360.0:
            self.add(
                (*path, "longitude"), "longitude out of range", found=f"{longitude} deg", allowed="-180 to 360 deg"
            )
            longitude = None
        kind = body.get("height_kind")
        if kind == "sea level":
            undulation = self.quantity(path, body, "undulation", "m")
            if "undulation" not in body:
                self.add(
                    (*path, "height_kind"),
                    "height above sea level without undulation",
                    remedy='add undulation = "... m" (geoid above ellipsoid), or give the ellipsoidal height',
                )
            elif height is not None and undulation is not None:
                height = height + undulation
        elif kind != "ellipsoid":
            self.add(
                (*path, "height_kind") if kind else path,
                "the kind of height is not said",
                found=repr(kind) if kind else "",
                allowed='height_kind = "ellipsoid" or "sea level"',
                remedy="the two differ by up to 100 m",
            )
        if height is not None and not -500.0 <= height <= 9000.0:
            self.add((*path, "height"), "height out of range", found=f"{height} m", allowed="-500 to 9000 m")
            height = None
        if None in (latitude, longitude, height):
            return None
        return itrs_from_geodetic(math.radians(latitude), math.radians(longitude), height)

    def station(self, path: tuple, name: str, body: Mapping[str, Any]) -> dict[str, Any] | None:
        """Return one row of the station table."""
        self.known(path, body, _FIELDS)
        row: dict[str, Any] = {"station_id": name}
        track = body.get("track")
        if track is not None:
            if not isinstance(track, str):
                self.add((*path, "track"), "not the name of an object of an ephemeris", found=repr(track))
            row |= {"x_m": np.nan, "y_m": np.nan, "z_m": np.nan, "track": track}
        else:
            position = self.place(path, body)
            if position is None:
                return None
            row |= dict(zip(("x_m", "y_m", "z_m"), map(float, position), strict=True))
            for field in ("vx", "vy", "vz"):
                row[f"{field}_m_s"] = self.quantity(path, body, field, "m/s", 0.0) or 0.0
        row["position_epoch_tai_ns"] = self.time(path, body, "epoch", 0)
        row["position_sigma_m"] = self.quantity(path, body, "position_sigma", "m", 10.0) or 0.0
        row |= self._oscillator(path, body)
        row |= self._clock(path, body)
        row["valid_from_tai_ns"] = self.time(path, body, "valid_from", -(2**62))
        row["valid_until_tai_ns"] = self.time(path, body, "valid_until", 2**62)
        return row

    def _oscillator(self, path: tuple, body: Mapping[str, Any]) -> dict[str, Any]:
        kind = body.get("reference", "unknown")
        sigma, drift_sigma = float("inf"), 0.0
        if kind in REFERENCES:
            sigma, drift_sigma = REFERENCES[kind]
        elif kind != "unknown":
            close = difflib.get_close_matches(str(kind), REFERENCES, 1)
            self.add(
                (*path, "reference"),
                "unknown class of reference",
                found=repr(kind),
                allowed=", ".join(REFERENCES) + ", unknown",
                remedy=f"did you mean {close[0]}?" if close else "",
            )
        offset, own = self.quantity(path, body, "offset", "1", 0.0, sigma=True)
        drift, own_drift = self.quantity(path, body, "drift", "1/s", 0.0, sigma=True)
        return {
            "reference_class": str(kind),
            "offset_1": offset or 0.0,
            "offset_sigma_1": own if own is not None else sigma,
            "drift_1_s": drift or 0.0,
            "drift_sigma_1_s": own_drift if own_drift is not None else drift_sigma,
        }

    def _clock(self, path: tuple, body: Mapping[str, Any]) -> dict[str, Any]:
        kind = body.get("clock", "unknown")
        sigma = CLOCKS.get(kind, 0.0)
        if kind not in CLOCKS and kind != "unknown":
            self.add(
                (*path, "clock"), "unknown class of clock", found=repr(kind), allowed=", ".join(CLOCKS) + ", unknown"
            )
        bias, own = self.quantity(path, body, "time_bias", "s", 0.0, sigma=True)
        return {"clock_class": str(kind), "time_bias_s": bias or 0.0, "time_sigma_s": own if own is not None else sigma}
