"""Entry point `solve`: the nodes and motions of this plugin; numerics are imported when a node runs."""

from __future__ import annotations

from shiftfix.api import (
    EarthOrientation,
    FrequencyTable,
    MotionSpec,
    NodeSpec,
    OffsetTable,
    Port,
    Solution,
    StartTable,
    StationTable,
    hookimpl,
)
from shiftfix_solve.options import (
    FixedOptions,
    FixParams,
    OrbitOptions,
    PolynomialOptions,
    SearchParams,
    SurfaceOptions,
)


def _search(inputs, params, context):
    from shiftfix_solve.search import search

    return search(inputs, params, context)


def _fix(inputs, params, context):
    from shiftfix_solve.fix import fix

    return fix(inputs, params, context)


def _orbit(options, scene):
    from shiftfix_solve.motions import orbit

    return orbit(options, scene)


def _surface(options, scene):
    from shiftfix_solve.motions import surface

    return surface(options, scene)


def _fixed(options, scene):
    from shiftfix_solve.motions import fixed

    return fixed(options, scene)


def _polynomial(options, scene):
    from shiftfix_solve.motions import polynomial

    return polynomial(options, scene)


_DATA = {
    "frequencies": Port(FrequencyTable, "received frequencies of the emitter", many=True),
    "stations": Port(StationTable, "stations that received"),
    "offsets": Port(OffsetTable, "calibrated station offsets", optional=True),
    "orientation": Port(EarthOrientation, "Earth orientation; the bundled table when absent", optional=True),
}


@hookimpl
def shiftfix_nodes():
    """Return the nodes `search` and `fix`."""
    return (
        NodeSpec(
            name="search",
            summary="find starting states of a declared motion without any prior, one or more per basin",
            function=_search,
            inputs=_DATA,
            outputs={"starts": Port(StartTable, "candidate states with weights")},
            params=SearchParams,
        ),
        NodeSpec(
            name="fix",
            summary="fit the motion, rest frequency and station offsets; list every solution that fits, with odds",
            function=_fix,
            inputs={**_DATA, "starts": Port(StartTable, "candidate states")},
            outputs={"solution": Port(Solution, "answer with residuals")},
            params=FixParams,
        ),
    )


@hookimpl
def shiftfix_motions():
    """Return the motions of this plugin."""
    return (
        MotionSpec("orbit", "satellite: numerical orbit about the Earth", _orbit, OrbitOptions),
        MotionSpec(
            "surface",
            "vessel or vehicle: constant velocity on the ellipsoid, in one or several legs",
            _surface,
            SurfaceOptions,
        ),
        MotionSpec("fixed", "emitter at rest on the ground", _fixed, FixedOptions),
        MotionSpec(
            "polynomial",
            "aircraft: straight line, with constant velocity or acceleration",
            _polynomial,
            PolynomialOptions,
        ),
    )
