"""Entry point `screen`: choosing and flagging rows; no row is ever lost."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import FrequencyTable, NodeSpec, Port, hookimpl, param


@dataclass(frozen=True)
class SelectParams:
    """Parameters of `screen.select`."""

    emitters: tuple[str, ...] = param("emitters to keep; empty keeps all but the excluded ones", default=())
    exclude_emitters: tuple[str, ...] = param("emitters to leave to other nodes", default=())
    name_emitter: str = param("name for rows whose emitter is unnamed in the log", default="")
    stations: tuple[str, ...] = param("stations to keep; empty keeps all but the excluded ones", default=())
    exclude_stations: tuple[str, ...] = param("stations whose rows are flagged reject", default=())
    start: str = param("UTC before which rows are flagged reject; empty: none", default="")
    stop: str = param("UTC after which rows are flagged reject; empty: none", default="")
    keep_all: bool = param("undo the flags of earlier nodes: every row is used again", default=False)


def _select(inputs, params, context):
    from shiftfix_screen.select import select

    return {"frequencies": select(inputs["frequencies"], params)}


@hookimpl
def shiftfix_nodes():
    """Return the node `select`."""
    return (
        NodeSpec(
            name="select",
            summary="rows of some emitters, with stations and times flagged in or out",
            function=_select,
            inputs={"frequencies": Port(FrequencyTable, "received frequencies", many=True)},
            outputs={"frequencies": Port(FrequencyTable, "selected rows, flags set")},
            params=SelectParams,
        ),
    )
