"""Checks of the node `ingest.delimited`: what must be declared, and whether the unit can be right."""

from __future__ import annotations

import numpy as np

from shiftfix.api import Problem, parse_quantity
from shiftfix_ingest.delimited_params import ROLES, DelimitedParams
from shiftfix_ingest.receiver_chain import chain_terms

UNIT = {"frequency": "Hz", "sigma": "Hz", "interval": "s", "cn0": "dBHz", "rate": "Hz/s"}


def declaration_problems(params: DelimitedParams, where: str) -> list[Problem]:
    out = []
    for role in params.columns:
        if role not in ROLES:
            out.append(
                Problem(f"{where}.columns.{role}", "unknown role of a column", found=role, allowed=", ".join(ROLES))
            )
    for role in ("time", "frequency"):
        if role not in params.columns:
            out.append(
                Problem(
                    f"{where}.columns", f"the {role} column is not declared", allowed=f'columns = {{ {role} = "NAME" }}'
                )
            )
    if not params.time_scale:
        out.append(
            Problem(
                f"{where}.time_scale",
                "time without scale",
                allowed="UTC, TAI, TT, GPS",
                remedy='say time_scale = "UTC"',
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
    if "sigma" not in params.columns and not params.sigma:
        out.append(
            Problem(
                f"{where}.sigma", "no 1-sigma: neither a column nor a value", remedy='sigma = "1 Hz" or columns.sigma'
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
    if params.frequency_kind == "offset" and params.nominal_frequency is None:
        out.append(Problem(f"{where}.nominal_frequency", "offsets need the nominal frequency"))
    if params.frequency_kind != "audio" and params.chain:
        out.append(Problem(f"{where}.chain", 'a receiver chain needs frequency_kind = "audio"'))
    if params.frequency_kind == "audio" and not params.chain:
        out.append(
            Problem(
                f"{where}.chain",
                "a tone needs the receiver chain",
                allowed='chain = [{ lo = "437 MHz", side = "upper" }]',
            )
        )
    try:
        chain_terms(params.chain)
    except ValueError as error:
        out.append(Problem(f"{where}.chain", str(error)))
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
        try:
            parse_quantity(f"1 {unit}", UNIT.get(role, "1"))
        except ValueError as error:
            out.append(Problem(f"{where}.units.{role}", str(error)))
    if params.time_format == "gps" and ("week" not in params.columns or params.time_scale != "GPS"):
        out.append(Problem(f"{where}.columns.week", 'time_format = "gps" needs a week column and time_scale = "GPS"'))
    return out


def scale_problem(file, frequency, params) -> Problem | None:
    """Return a problem when the frequencies lie a power of a thousand off the nominal one, or far off the radio bands."""
    good = frequency[np.isfinite(frequency)]
    if not good.size:
        return None
    middle = float(np.median(np.abs(good)))
    unit = params.units.get("frequency", "Hz")
    if params.nominal_frequency:
        ratio = middle / params.nominal_frequency
        if 0.9 < ratio < 1.1:
            return None
        for power, words in (
            (1e-3, "1000 times too small: is the column in kHz?"),
            (1e-6, "10^6 times too small: is the column in MHz?"),
            (1e3, "1000 times too large"),
            (1e6, "10^6 times too large"),
        ):
            if 0.9 < ratio / power < 1.1:
                return Problem(
                    f"{file.name}:{1 + int(params.header)}",
                    f"the frequencies are {words}",
                    found=f"median {middle:g} Hz with the declared unit {unit}",
                    allowed=f"near {params.nominal_frequency:g} Hz",
                    remedy="correct units.frequency",
                )
        return Problem(
            f"{file.name}:{1 + int(params.header)}",
            "the frequencies are not near the nominal frequency",
            found=f"median {middle:g} Hz",
            allowed=f"within 10 % of {params.nominal_frequency:g} Hz",
            remedy="correct the unit, the kind of frequency or the nominal frequency",
        )
    if not 3e3 <= middle <= 3e11:
        return Problem(
            f"{file.name}:{1 + int(params.header)}",
            "the frequencies are not radio frequencies",
            found=f"median {middle:g} Hz with the declared unit {unit}",
            allowed="3 kHz to 300 GHz",
            remedy="correct units.frequency",
        )
    return None
