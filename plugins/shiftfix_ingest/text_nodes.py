"""Nodes for books and delimited text."""

from __future__ import annotations

from importlib import import_module

from shiftfix.api import EmitterTable, Ephemeris, FrequencyTable, NodeSpec, Port, StationTable
from shiftfix_ingest.auto import AutoParams
from shiftfix_ingest.delimited_params import DelimitedParams
from shiftfix_ingest.positions import PositionsParams
from shiftfix_ingest.stations import BookParams


def _stations(inputs, params, context):
    return import_module("shiftfix_ingest.stations").read_stations(inputs, params, context)


def _emitters(inputs, params, context):
    return import_module("shiftfix_ingest.stations").read_emitters(inputs, params, context)


def _delimited(inputs, params, context):
    return import_module("shiftfix_ingest.delimited").read_delimited(inputs, params, context)


def _positions(inputs, params, context):
    return import_module("shiftfix_ingest.positions").read_positions(inputs, params, context)


def _auto(inputs, params, context):
    return import_module("shiftfix_ingest.auto").read_auto(inputs, params, context)


def text_nodes() -> tuple[NodeSpec, ...]:
    """Return the nodes `auto`, `delimited`, `emitters`, `positions` and `stations`."""
    return (
        NodeSpec(
            name="auto",
            summary="any file that exactly one reader recognises",
            function=_auto,
            outputs={"frequencies": Port(FrequencyTable, "received frequencies")},
            params=AutoParams,
        ),
        NodeSpec(
            name="positions",
            summary="sampled positions of ships, aircraft or satellites from delimited text",
            function=_positions,
            outputs={"ephemeris": Port(Ephemeris, "sampled states")},
            params=PositionsParams,
        ),
        NodeSpec(
            name="stations",
            summary="station book: positions, oscillators and clocks with their errors",
            function=_stations,
            inputs={"ephemeris": Port(Ephemeris, "tracks of moving stations", optional=True, many=True)},
            outputs={"stations": Port(StationTable, "stations")},
            params=BookParams,
        ),
        NodeSpec(
            name="emitters",
            summary="book of known emitters: rest frequency and place",
            function=_emitters,
            outputs={"emitters": Port(EmitterTable, "known emitters")},
            params=BookParams,
        ),
        NodeSpec(
            name="delimited",
            summary="delimited text with declared columns, units and time scale",
            function=_delimited,
            inputs={"stations": Port(StationTable, "station book with the receiver chains of tones", optional=True)},
            outputs={"frequencies": Port(FrequencyTable, "received frequencies")},
            params=DelimitedParams,
        ),
    )
