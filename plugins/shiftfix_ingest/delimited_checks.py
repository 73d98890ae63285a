"""Checks of the node `ingest.delimited`: what must be declared before a file is opened."""

from __future__ import annotations

import difflib

from shiftfix.api import Problem, parse_quantity
from shiftfix_ingest.delimited_params import ROLES, UNIT, DelimitedParams
from shiftfix_ingest.receiver_chain import chain_terms
from shiftfix_ingest.text_table import WHITESPACE
from shiftfix_ingest.text_values import TIME_UNITS


def declaration_problems(params: DelimitedParams, where: str, chain_from_book: bool = False) -> list[Problem]:
    """Return everything that the parameters leave unsaid or contradict.

    Parameters
    ----------
    params : DelimitedParams
    where : str
        Path of the parameters, such as `nodes.log.params`.
    chain_from_book : bool
        Whether a station book with receiver chains is connected.
    """
    return [
        *_columns(params, where),
        *_units(params, where),
        *_times(params, where),
        *_frequencies(params, where, chain_from_book),
        *_layout(params, where),
    ]


def _columns(params: DelimitedParams, where: str) -> list[Problem]:
    out = []
    for role, column in params.columns.items():
        if role not in ROLES:
            out.append(_unknown(f"{where}.columns.{role}", "unknown role of a column", role, ROLES))
        elif isinstance(column, bool) or not isinstance(column, str | int):
            out.append(
                Problem(
                    f"{where}.columns.{role}",
                    "not a column",
                    found=repr(column),
                    allowed="a header name or a number from 1",
                )
            )
    for role in ("time", "frequency"):
        if role not in params.columns:
            out.append(
                Problem(
                    f"{where}.columns", f"the {role} column is not declared", allowed=f'columns = {{ {role} = "NAME" }}'
                )
            )
    if "station" not in params.columns and not params.station:
        out.append(
            Problem(
                f"{where}.station",
                "no station: neither a column nor a value",
                remedy='station = "NAME" or columns.station',
            )
        )
    if "sigma" not in params.columns and params.sigma is None:
        out.append(
            Problem(
                f"{where}.sigma", "no 1-sigma: neither a column nor a value", remedy='sigma = "1 Hz" or columns.sigma'
            )
        )
    if params.sigma is not None and params.sigma <= 0:
        out.append(
            Problem(f"{where}.sigma", "sigma is not greater than 0", found=f"{params.sigma:g} Hz", allowed="above 0 Hz")
        )
    return out


def _unknown(where: str, what: str, found: str, allowed: tuple[str, ...]) -> Problem:
    close = difflib.get_close_matches(found, allowed, 1)
    return Problem(
        where, what, found=found, allowed=", ".join(allowed), remedy=f"did you mean {close[0]}?" if close else ""
    )


def _units(params: DelimitedParams, where: str) -> list[Problem]:
    out = []
    counted = params.time_format != "iso"
    for role in params.columns:
        if role in UNIT and role not in params.units and role != "cn0":
            out.append(
                Problem(
                    f"{where}.units.{role}",
                    f"the unit of the {role} column is not declared",
                    allowed=f'units = {{ {role} = "{UNIT[role]}" }}',
                )
            )
    for role, unit in params.units.items():
        here = f"{where}.units.{role}"
        if role == "time" and counted:
            if unit not in TIME_UNITS:
                out.append(Problem(here, "not a unit of a count", found=repr(unit), allowed=", ".join(TIME_UNITS)))
        elif role not in UNIT:
            out.append(_unknown(here, "a unit for a role that has none", role, tuple(UNIT)))
        elif role not in params.columns:
            out.append(
                Problem(here, f"a unit for the {role} column, which is not declared", remedy=f"declare columns.{role}")
            )
        else:
            try:
                parse_quantity(f"1 {unit}", UNIT[role])
            except ValueError as error:
                out.append(Problem(here, str(error)))
    return out


def _times(params: DelimitedParams, where: str) -> list[Problem]:
    out = []
    if not params.time_scale:
        out.append(
            Problem(
                f"{where}.time_scale",
                "time without scale",
                allowed="UTC, TAI, TT, GPS",
                remedy='say time_scale = "UTC"',
            )
        )
    if (params.interval > 0 or "interval" in params.columns) and not params.time_tag:
        out.append(
            Problem(
                f"{where}.time_tag",
                "counts over an interval without time_tag",
                allowed="start, middle, end",
                remedy="say which instant of the interval the tag names",
            )
        )
    if params.time_format == "gps" and ("week" not in params.columns or params.time_scale not in ("GPS", "")):
        out.append(Problem(f"{where}.columns.week", 'time_format = "gps" needs a week column and time_scale = "GPS"'))
    if params.time_format == "posix" and params.time_scale not in ("UTC", ""):
        out.append(
            Problem(
                f"{where}.time_scale",
                'time_format = "posix" counts UTC days of 86400 s',
                found=params.time_scale,
                allowed="UTC",
            )
        )
    for role, form in (("date", "iso"), ("week", "gps")):
        if role in params.columns and params.time_format != form:
            out.append(Problem(f"{where}.columns.{role}", f'a {role} column needs time_format = "{form}"'))
    if params.unmarked_utc and (params.time_scale not in ("UTC", "") or params.time_format != "iso"):
        out.append(
            Problem(f"{where}.unmarked_utc", "only for UTC texts", found=f"{params.time_scale} {params.time_format}")
        )
    return out


def _frequencies(params: DelimitedParams, where: str, chain_from_book: bool) -> list[Problem]:
    out = []
    audio = params.frequency_kind == "audio"
    dial = params.dial is not None or "dial" in params.columns
    if params.frequency_kind == "offset" and params.nominal_frequency is None and "nominal" not in params.columns:
        out.append(
            Problem(
                f"{where}.nominal_frequency",
                "offsets need the nominal frequency",
                allowed='"158.3 MHz", or columns.nominal',
            )
        )
    for name, given in (("chain", bool(params.chain)), ("dial", dial), ("sideband", bool(params.sideband))):
        if given and not audio:
            out.append(
                Problem(f"{where}.{name}", f'{name} needs frequency_kind = "audio"', found=params.frequency_kind)
            )
    if audio and not (params.chain or dial or chain_from_book):
        out.append(
            Problem(
                f"{where}.chain",
                "a tone needs the receiver chain",
                allowed='chain = [{ lo = "437 MHz", side = "upper" }], or dial with sideband, or the chain of a station book',
            )
        )
    if audio and dial and not params.sideband:
        out.append(
            Problem(
                f"{where}.sideband",
                "a dial without the side on which the signal lies",
                allowed="upper, lower",
                remedy="the wrong one mirrors the curve",
            )
        )
    if audio and params.sideband and not dial:
        out.append(Problem(f"{where}.sideband", "a sideband without dial", remedy="give dial or columns.dial"))
    try:
        chain_terms(params.chain)
    except ValueError as error:
        out.append(Problem(f"{where}.chain", str(error)))
    return out


def _layout(params: DelimitedParams, where: str) -> list[Problem]:
    out = []
    if len(params.separator) > 1 and params.separator != WHITESPACE:
        out.append(
            Problem(
                f"{where}.separator", "not one character", found=repr(params.separator), allowed=f"one, or {WHITESPACE}"
            )
        )
    if params.separator and params.separator in '"\r\n':
        out.append(Problem(f"{where}.separator", "cannot separate fields", found=repr(params.separator)))
    if not params.header and any(isinstance(c, str) for c in {**params.columns, **params.extra}.values()):
        out.append(
            Problem(
                f"{where}.columns",
                "columns by name in a file without header",
                allowed="numbers from 1",
                remedy="give numbers, or header = true",
            )
        )
    return out
