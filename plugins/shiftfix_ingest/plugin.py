"""Entry point `ingest`: the readers of this plugin; each is imported when its node runs or is asked to recognise a file."""

from __future__ import annotations

from importlib import import_module

from shiftfix.api import Ephemeris, NodeSpec, Port, hookimpl

_EPHEMERIS = {"ephemeris": Port(Ephemeris, "sampled states")}


def _later(module: str, name: str):
    """Return a function that imports `shiftfix_ingest.<module>` on its first call and passes the call on."""

    def function(*arguments):
        return getattr(import_module(f"shiftfix_ingest.{module}"), name)(*arguments)

    function.__name__ = name
    return function


def _precise_orbit_readers() -> tuple[NodeSpec, ...]:
    from shiftfix_ingest.sp3 import Sp3Params

    return (
        NodeSpec(
            name="sp3",
            summary="precise satellite orbits and clocks from SP3 files",
            function=_later("sp3", "read_sp3"),
            outputs=_EPHEMERIS,
            params=Sp3Params,
            recognise=_later("sp3", "recognise"),
        ),
    )


@hookimpl
def shiftfix_nodes():
    """Return the readers of this plugin."""
    return (*_precise_orbit_readers(),)
