"""Entry point `calibrate`: station oscillators from emitters of known motion."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import (
    EarthOrientation,
    EmitterTable,
    Ephemeris,
    FrequencyTable,
    NodeSpec,
    OffsetTable,
    Port,
    StationTable,
    hookimpl,
    param,
)


@dataclass(frozen=True)
class KnownEmittersParams:
    """Parameters of `calibrate.known_emitters`."""

    model: str = param(
        "piecewise: a free offset in every count interval; constant, drift or random_walk: a smooth oscillator",
        default="piecewise",
        choices=("piecewise", "constant", "drift", "random_walk"),
    )
    exclude: tuple[str, ...] = param("emitters that must not be used (the one to be located)", default=())
    elevation_mask: float = param(
        "lowest elevation of a known emitter", default=10.0, unit="deg", minimum=-10.0, maximum=80.0
    )
    troposphere: str = param(
        "none; standard atmosphere; or estimated: with a zenith correction from the known emitters themselves",
        default="estimated",
        choices=("none", "standard", "estimated"),
    )
    zenith_sigma: float = param("prior 1-sigma of the zenith correction", default=0.3, unit="m", minimum=0.0)
    random_walk: float = param(
        "random walk of the frequency, 1 sigma after one second", default=1e-11, unit="1", minimum=0.0
    )
    minimum_emitters: int = param("fewest known emitters in an interval", default=2, minimum=1, maximum=100)


def _known_emitters(inputs, params, context):
    from shiftfix_calibrate.known_emitters import known_emitters

    return known_emitters(inputs, params, context)


@hookimpl
def shiftfix_nodes():
    """Return the node `known_emitters`."""
    return (
        NodeSpec(
            name="known_emitters",
            summary="station offsets, clock offsets and zenith delays from emitters of known motion",
            function=_known_emitters,
            inputs={
                "frequencies": Port(FrequencyTable, "rows of the known emitters (others are left alone)", many=True),
                "stations": Port(StationTable, "stations that received"),
                "ephemeris": Port(Ephemeris, "motion of orbiting known emitters", optional=True, many=True),
                "emitters": Port(EmitterTable, "rest frequency and place of known emitters", optional=True),
                "orientation": Port(
                    EarthOrientation, "Earth orientation; the bundled table when absent", optional=True
                ),
            },
            outputs={"offsets": Port(OffsetTable, "history of every station")},
            params=KnownEmittersParams,
        ),
    )
