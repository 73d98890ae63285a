"""Table: a frozen dataclass around read-only rows with explicit metadata, validated once, fingerprinted."""

from __future__ import annotations

import dataclasses
import hashlib
import json
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np
import pandas as pd

from shiftfix.errors import Problem, SchemaError

UNIT_SUFFIXES = (
    "_hz",
    "_hz_s",
    "_db_hz",
    "_s",
    "_ns",
    "_m",
    "_m_s",
    "_m_s2",
    "_rad",
    "_deg",
    "_k",
    "_pa",
    "_db",
    "_1",
    "_1_s",
    "_rad_s",
)
"""Closed list of unit suffixes; `_1` is dimensionless and `_1_s` is per second."""


@dataclass(frozen=True)
class Column:
    """One column of a table: name (with unit suffix), kind and rule.

    Parameters
    ----------
    name : str
        Column name; numeric columns end in a unit suffix of `UNIT_SUFFIXES`.
    kind : {"text", "int", "float", "bool"}
    meaning : str
        One line for the reference and for messages.
    required : bool
        Optional columns may be absent; a required one is filled with `default` when that is given.
    default : object
        Value for an absent column; None means none.
    nullable : bool
        Whether NaN is allowed in a float column.
    minimum, maximum : float, optional
        Closed bounds.
    strict_minimum : bool
        Whether `minimum` itself is refused.
    allowed : tuple of str, optional
        Closed list of values for a text column.
    """

    name: str
    kind: str
    meaning: str
    required: bool = True
    default: Any = None
    nullable: bool = False
    minimum: float | None = None
    maximum: float | None = None
    strict_minimum: bool = False
    allowed: tuple[str, ...] = ()


_DTYPES = {"int": np.int64, "float": np.float64, "bool": np.bool_}


@dataclass(frozen=True, eq=False, kw_only=True)
class Table:
    """Base of all tables that travel between nodes.

    Parameters
    ----------
    rows : pandas.DataFrame
        Copied once; validated against `columns`; handed out again only as the stored frame, which nodes must not
        write to (pandas copy-on-write keeps a write from reaching other holders).
    """

    columns: ClassVar[tuple[Column, ...]] = ()
    rows: pd.DataFrame = field(default_factory=pd.DataFrame)

    def __post_init__(self) -> None:
        object.__setattr__(self, "rows", _validated(type(self).__name__, self.columns, self.rows))

    def __len__(self) -> int:
        return len(self.rows)

    def array(self, name: str) -> np.ndarray:
        """Return one column as a read-only numpy array; for an absent optional column, NaN (or empty text)."""
        if name in self.rows:
            out = self.rows[name].to_numpy()
        else:
            kind = next((c.kind for c in self.columns if c.name == name), "float")
            out = np.full(len(self.rows), "" if kind == "text" else np.nan, dtype=object if kind == "text" else float)
        out = out.view()
        out.flags.writeable = False
        return out

    def with_rows(self, rows: pd.DataFrame) -> Table:
        """Return the same table with other rows, validated anew."""
        return dataclasses.replace(self, rows=rows)

    def metadata(self) -> dict[str, Any]:
        """Return everything but the rows, for the fingerprint and for reports."""
        return {f.name: getattr(self, f.name) for f in dataclasses.fields(self) if f.name != "rows"}

    def fingerprint(self) -> str:
        """Return the SHA-256 (hex) of schema, rows and metadata; equal content gives equal text on every platform."""
        digest = hashlib.sha256(type(self).__name__.encode())
        for name in self.rows.columns:
            digest.update(str(name).encode() + b"\0")
            values = self.rows[name].to_numpy()
            if values.dtype.kind in "OUT" or not isinstance(values.dtype, np.dtype):
                digest.update("\0".join(map(str, values)).encode())
            else:
                digest.update(np.ascontiguousarray(values.astype(values.dtype.newbyteorder("<"))).tobytes())
        digest.update(json.dumps(self.metadata(), sort_keys=True, default=_canonical).encode())
        return digest.hexdigest()


def _canonical(value: Any) -> Any:
    if isinstance(value, Table):
        return value.fingerprint()
    if isinstance(value, pd.DataFrame):
        return hashlib.sha256(value.to_csv(index=False).encode()).hexdigest()
    if isinstance(value, np.ndarray):
        return [str(value.dtype), value.shape, hashlib.sha256(np.ascontiguousarray(value).tobytes()).hexdigest()]
    if isinstance(value, np.generic):
        return value.item()
    if dataclasses.is_dataclass(value):
        return {f.name: getattr(value, f.name) for f in dataclasses.fields(value)}
    return str(value)


def _validated(table: str, columns: tuple[Column, ...], rows: pd.DataFrame) -> pd.DataFrame:
    problems: list[Problem] = []
    known = {c.name for c in columns}
    out: dict[str, Any] = {}
    count = len(rows)
    for column in columns:
        where = f"{table}.{column.name}"
        if column.name not in rows:
            if not column.required:
                continue
            if not count:
                out[column.name] = np.empty(0, dtype=_DTYPES.get(column.kind, object))
                continue
            if column.default is None:
                problems.append(Problem(where, "required column is missing", allowed=column.meaning))
                continue
            values = np.full(count, column.default, dtype=_DTYPES.get(column.kind, object))
        else:
            values = rows[column.name].to_numpy()
        if column.kind == "text":
            values = np.array([str(v) for v in values], dtype=object)
            if column.allowed:
                bad = ~np.isin(values.astype(str), column.allowed)
                if bad.any():
                    problems.append(_violation(where, "value not in the list", values, bad, ", ".join(column.allowed)))
            out[column.name] = pd.array(values, dtype=object)
            continue
        try:
            if column.kind == "int" and np.asarray(values).dtype.kind == "f":
                raise TypeError("floating point where whole numbers are needed")
            values = np.asarray(values).astype(_DTYPES[column.kind])
        except (TypeError, ValueError) as error:
            problems.append(Problem(where, f"column is not of kind {column.kind}", found=str(error)))
            continue
        if column.kind == "float" and not column.nullable and not np.isfinite(values).all():
            problems.append(_violation(where, "value is not finite", values, ~np.isfinite(values), "finite numbers"))
        with np.errstate(invalid="ignore"):
            if column.minimum is not None:
                bad = values <= column.minimum if column.strict_minimum else values < column.minimum
                if bad.any():
                    sign = ">" if column.strict_minimum else ">="
                    problems.append(_violation(where, "value too small", values, bad, f"{sign} {column.minimum:g}"))
            if column.maximum is not None and (values > column.maximum).any():
                problems.append(
                    _violation(where, "value too large", values, values > column.maximum, f"<= {column.maximum:g}")
                )
        out[column.name] = values
    for name in rows.columns:
        if name in known:
            continue
        if not str(name).endswith(UNIT_SUFFIXES):
            problems.append(
                Problem(f"{table}.{name}", "extra column without a unit suffix", allowed=" ".join(UNIT_SUFFIXES))
            )
            continue
        out[name] = rows[name].to_numpy()
    if problems:
        raise SchemaError(problems)
    return pd.DataFrame(out, index=pd.RangeIndex(count))


def _violation(where: str, what: str, values: np.ndarray, bad: np.ndarray, allowed: str) -> Problem:
    index = np.flatnonzero(bad)
    shown = ", ".join(f"row {i}: {values[i]}" for i in index[:5])
    return Problem(where, f"{what} in {len(index)} of {len(values)} rows", found=shown, allowed=allowed)
