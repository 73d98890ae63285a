"""Entry point `ingest`: the readers of this plugin; each is imported when its node runs or recognises a file."""

from __future__ import annotations

from importlib import import_module

from shiftfix.api import Ephemeris, FrequencyTable, NodeSpec, Port, hookimpl

_EPHEMERIS = {"ephemeris": Port(Ephemeris, "sampled states")}


def _later(module: str, name: str):
    """Return a function that imports `shiftfix_ingest.<module>` on its first call and passes the call on."""

    def function(*arguments):
        return getattr(import_module(f"shiftfix_ingest.{module}"), name)(*arguments)

    function.__name__ = name
    return function


def _receiver_readers() -> tuple[NodeSpec, ...]:
    from shiftfix_ingest.rinex import RinexParams
    from shiftfix_ingest.tdm import TdmParams

    return (
        NodeSpec(
            name="tdm",
            summary="received frequencies from CCSDS tracking data messages, KVN or XML, one-way",
            function=_later("tdm", "read_tdm"),
            outputs={"frequencies": Port(FrequencyTable, "received frequencies")},
            params=TdmParams,
            recognise=_later("tdm", "recognise"),
        ),
        NodeSpec(
            name="rinex",
            summary="received frequencies from RINEX observation files: differenced carrier phase or Doppler",
            function=_later("rinex", "read_rinex"),
            outputs={"frequencies": Port(FrequencyTable, "received frequencies of all stations and satellites")},
            params=RinexParams,
            recognise=_later("rinex", "recognise"),
        ),
    )


def _precise_orbit_readers() -> tuple[NodeSpec, ...]:
    from shiftfix_ingest.oem import OemParams
    from shiftfix_ingest.sp3 import Sp3Params

    return (
        NodeSpec(
            name="oem",
            summary="sampled states from CCSDS orbit ephemeris messages, KVN or XML",
            function=_later("oem", "read_oem"),
            outputs=_EPHEMERIS,
            params=OemParams,
            recognise=_later("oem", "recognise"),
        ),
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
    from shiftfix_ingest.text_nodes import text_nodes

    return (*text_nodes(), *_receiver_readers(), *_precise_orbit_readers())
