"""Nodes for books and delimited text."""

from __future__ import annotations

from importlib import import_module

from shiftfix.api import EmitterTable, Ephemeris, FrequencyTable, NodeSpec, Port, StationTable
from shiftfix_ingest.delimited_params import DelimitedParams
from shiftfix_ingest.stations import BookParams


def _stations(inputs, params, context):
    return import_module("shiftfix_ingest.stations").read_stations(inputs, params, context)


def _emitters(inputs, params, context):
    return import_module("shiftfix_ingest.stations").read_emitters(inputs, params, context)


def _delimited(inputs, params, context):
    return import_module("shiftfix_ingest.delimited").read_delimited(inputs, params, context)


def text_nodes() -> tuple[NodeSpec, ...]:
    """Return the nodes `stations`, `emitters` and `delimited`."""
    return (
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
            outputs={"frequencies": Port(FrequencyTable, "received frequencies")},
            params=DelimitedParams,
        ),
    )
