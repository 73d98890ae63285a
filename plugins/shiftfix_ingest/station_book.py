"""Station book and emitter book: TOML files in which every quantity has a unit and every place a datum.

[stations.ORREL]
latitude = "-38.91 deg"            # or "38.91 S", "38 54 36 S"
longitude = "-23.12 deg"
height = "118 m"
height_kind = "ellipsoid"          # or "sea level", then with undulation = "12.3 m"
datum = "WGS84"
position_sigma = "10 m"
reference = "gnss-disciplined"     # class, or offset = "3e-8 +/- 1e-7"
clock = "pps"                      # class, or time_bias = "0 s +/- 1 ms"
chain = [{ lo = "10 MHz", side = "upper" }]   # converters from antenna to tone, for logs of tones
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from shiftfix_ingest.book_reader import BookReader
from shiftfix_ingest.receiver_chain import chain_terms

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

CLOCKS: Mapping[str, float] = {"pps": 1e-4, "gnss": 1e-6, "ntp": 0.02, "hand": 0.5, "manual": 0.5}
"""1-sigma of the time tags [s] by class (common practice)."""

_PLACE = (
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
)
_FIELDS = (
    *_PLACE,
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


def station_row(book: BookReader, path: tuple, name: str, body: Mapping[str, Any]) -> dict[str, Any]:
    """Return one row of the station table, and in `track` the name of a mover; what is wrong is noted in the book."""
    book.known(path, body, _FIELDS)
    row: dict[str, Any] = {"station_id": name, "x_m": np.nan, "y_m": np.nan, "z_m": np.nan}
    if "track" in body:
        row["track"] = body["track"]
        if not isinstance(body["track"], str):
            book.add((*path, "track"), "not the name of an object of an ephemeris", found=repr(body["track"]))
        fixed = [f for f in _PLACE if f in body]
        if fixed:
            book.add(
                (*path, "track"), "both a track and a fixed place", found=", ".join(fixed), remedy="keep one of them"
            )
    else:
        position = book.place(path, body)
        if position is not None:
            row |= dict(zip(("x_m", "y_m", "z_m"), map(float, position), strict=True))
        for field in ("vx", "vy", "vz"):
            row[f"{field}_m_s"] = book.quantity(path, body, field, "m/s", 0.0) or 0.0
        if "epoch" not in body and any(row[f"{f}_m_s"] for f in ("vx", "vy", "vz")):
            book.add(path, "a velocity without the epoch of the position", remedy='add epoch = "2015-01-01T00:00:00Z"')
    row["position_epoch_tai_ns"] = book.time(path, body, "epoch", 0)
    sigma = book.bounded(path, body, "position_sigma", "m", 0.0, 1e5)
    row["position_sigma_m"] = 10.0 if sigma is None else sigma
    row |= _oscillator(book, path, body)
    row |= _clock(book, path, name, body)
    row |= _chain(book, path, body)
    row["valid_from_tai_ns"] = book.time(path, body, "valid_from", -(2**62))
    row["valid_until_tai_ns"] = book.time(path, body, "valid_until", 2**62)
    if row["valid_until_tai_ns"] <= row["valid_from_tai_ns"]:
        book.add(
            (*path, "valid_until"),
            "valid_until is not after valid_from",
            found=f"{body.get('valid_from')} to {body.get('valid_until')}",
        )
    return row


def _oscillator(book: BookReader, path: tuple, body: Mapping[str, Any]) -> dict[str, Any]:
    kind = book.known_class(path, body, "reference", REFERENCES)
    sigma, drift_sigma = REFERENCES.get(kind, (float("inf"), 0.0))
    offset, own = book.quantity(path, body, "offset", "1", 0.0, sigma=True)
    drift, own_drift = book.quantity(path, body, "drift", "1/s", 0.0, sigma=True)
    if offset is not None and abs(offset) > 1e-3:
        book.add(
            (*path, "offset"),
            "offset out of range",
            found=repr(body["offset"]),
            allowed="fractional, -1e-3 to 1e-3",
            remedy="an offset in hertz must be divided by the frequency",
        )
    return {
        "reference_class": kind,
        "offset_1": offset or 0.0,
        "offset_sigma_1": own if own is not None else sigma,
        "drift_1_s": drift or 0.0,
        "drift_sigma_1_s": own_drift if own_drift is not None else drift_sigma,
    }


def _clock(book: BookReader, path: tuple, name: str, body: Mapping[str, Any]) -> dict[str, Any]:
    kind = book.known_class(path, body, "clock", CLOCKS)
    bias, own = book.quantity(path, body, "time_bias", "s", 0.0, sigma=True)
    if kind == "unknown" and own is None:
        book.remarks.append(name)
    sigma = own if own is not None else CLOCKS.get(kind, 0.0)
    return {"clock_class": kind, "time_bias_s": bias or 0.0, "time_sigma_s": sigma}


def _chain(book: BookReader, path: tuple, body: Mapping[str, Any]) -> dict[str, Any]:
    if "chain" not in body:
        return {}
    try:
        sign, constant = chain_terms(body["chain"])
    except ValueError as error:
        book.add((*path, "chain"), str(error))
        return {}
    return {"chain_sign_1": sign, "chain_constant_hz": constant}
