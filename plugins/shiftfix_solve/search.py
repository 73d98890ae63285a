"""Node `solve.search`: candidate states of a declared motion from nothing but the data."""

from __future__ import annotations

import difflib

import numpy as np
import pandas as pd

from shiftfix.api import ArcScene, ClockModels, InputError, Problem, StartTable, refine, search_data
from shiftfix_solve.arc import build_arc


def bind_motion(name: str, options, context, arc):
    """Return the motion of that name bound to an arc; options are checked against its parameters."""
    spec = context.motions.get(name)
    if spec is None:
        known = sorted(context.motions)
        close = difflib.get_close_matches(name, known, 1)
        raise InputError(
            Problem(
                f"nodes.{context.node}.params.motion",
                f"no motion is called {name!r}",
                allowed=", ".join(known),
                remedy=f"did you mean {close[0]}?" if close else "",
            )
        )
    built = context.parameters(spec.params, options, "motion_options")
    scene = ArcScene(arc.epoch_tai_ns, arc.span_s, arc.frame, arc.receivers)
    return spec.build(built, scene)


def rest_prior(frequency_hz: float, sigma_hz: float, reference_hz: float) -> tuple[float, float]:
    """Return mean and 1-sigma of ln(rest frequency / reference frequency); inf when nothing is declared."""
    if not np.isfinite(frequency_hz):
        return 0.0, float("inf")
    sigma = sigma_hz / frequency_hz if np.isfinite(sigma_hz) else float("inf")
    return float(np.log1p((frequency_hz - reference_hz) / reference_hz)), sigma


def search(inputs, params, context):
    """Return the starting states, best first."""
    arc = build_arc(
        inputs["frequencies"],
        inputs["stations"],
        inputs.get("offsets"),
        inputs.get("orientation"),
        emitter=params.emitter,
        earth_orientation=params.earth_orientation,
        troposphere=False,
    )
    bound = bind_motion(params.motion, params.motion_options, context, arc)
    rest = params.rest_frequency
    frequency = rest.value if rest else float("nan")
    sigma = rest.sigma if rest and rest.sigma else float("nan")
    mean, log_sigma = rest_prior(frequency, sigma, arc.rows.reference_hz)
    station_model = "calibrated" if inputs.get("offsets") is not None else params.station_model
    clocks = ClockModels(
        station=station_model,
        emitter=params.emitter_model,
        emitter_drift_sigma_per_s=params.emitter_drift_sigma or 1e-30,
        rest_log=mean,
        rest_log_sigma=log_sigma,
    )
    data = search_data(arc.rows, arc.receivers, clocks)
    context.progress(0.1, "grid of candidates")
    candidates = bound.candidates(data)
    if not len(candidates):
        raise InputError(
            Problem(
                f"node {context.node}",
                "no place of the search region is in view of the stations at the middle of the arc",
            )
        )
    context.progress(0.3, f"{len(candidates)} candidates")
    states, cost = refine(
        data,
        bound.states_batch,
        candidates,
        bound.motion.scales,
        priors=tuple(bound.priors),
        check_cancelled=context.check_cancelled,
    )
    if not len(states):
        raise InputError(
            Problem(
                f"node {context.node}",
                "no candidate of the search can be evaluated",
                remedy="check region, height and times",
            )
        )
    # A start far above the best is no basin that could fit; a mirror differs by some tens at most.
    good = cost <= 10.0 * cost[0] + 400.0
    states, cost = states[good][: params.keep], cost[good][: params.keep]
    rms = np.sqrt(cost / max(len(data.z), 1))
    weight = np.exp(-0.5 * np.minimum((cost - cost.min()) / max(cost.min() / max(len(data.z), 1), 1.0), 700.0))
    starts = StartTable(
        rows=pd.DataFrame({"weight_1": weight / weight.sum(), "rms_1": rms, "origin": ["search"] * len(rms)}),
        motion=params.motion,
        motion_params=dict(params.motion_options),
        epoch_tai_ns=arc.epoch_tai_ns,
        parameter_names=bound.motion.parameter_names,
        parameters=states,
        rest_frequency_hz=frequency,
        rest_frequency_sigma_hz=sigma,
        findings=(f"search: {len(candidates)} candidates; starting states kept: {len(states)}", *arc.notes),
    )
    return {"starts": starts}
