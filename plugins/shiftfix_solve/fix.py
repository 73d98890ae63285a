"""Node `solve.fix`: from starting states to the solution with its error, alternatives and residuals."""

from __future__ import annotations

import numpy as np

from shiftfix.api import (
    AnswerSettings,
    ClockModels,
    Considered,
    FitSettings,
    Gates,
    InputError,
    Problem,
    solve_arc,
    tai_ns_from_utc,
)
from shiftfix_solve.arc import build_arc
from shiftfix_solve.packing import pack
from shiftfix_solve.search import bind_motion, rest_prior


def fix(inputs, params, context):
    """Return the solution of one arc."""
    starts = inputs["starts"]
    arc = build_arc(
        inputs["frequencies"],
        inputs["stations"],
        inputs.get("offsets"),
        inputs.get("orientation"),
        emitter=params.emitter,
        earth_orientation=params.earth_orientation,
        troposphere=params.troposphere == "standard",
        epoch_tai_ns=starts.epoch_tai_ns,
    )
    motion = params.motion or starts.motion
    options = starts.motion_params if motion == starts.motion else {}
    bound = bind_motion(motion, options, context, arc)
    if tuple(bound.motion.parameter_names) != tuple(starts.parameter_names):
        raise InputError(
            Problem(
                f"node {context.node}",
                f"the starting states are of the motion {starts.motion!r} and do not fit {motion!r}",
                found=", ".join(starts.parameter_names),
                allowed=", ".join(bound.motion.parameter_names),
            )
        )
    mean, sigma = rest_prior(starts.rest_frequency_hz, starts.rest_frequency_sigma_hz, arc.rows.reference_hz)
    calibrated = inputs.get("offsets") is not None
    clocks = ClockModels(
        station="calibrated" if calibrated else params.station_model,
        emitter=params.emitter_model,
        station_drift_sigma_per_s=params.station_drift_sigma,
        emitter_drift_sigma_per_s=params.emitter_drift_sigma,
        station_walk=params.station_walk,
        emitter_walk=params.emitter_walk,
        steps_s=_steps(params.emitter_steps, starts.epoch_tai_ns, context),
        step_sigma=params.step_sigma,
        datum=params.datum,
        rest_log=mean,
        rest_log_sigma=sigma,
    )
    gates = Gates(params.downweight_beyond, params.reject_beyond, keep_all=params.keep_all or params.loss == "plain")
    settings = AnswerSettings(
        fit=FitSettings(
            clocks=clocks,
            media=arc.media,
            gates=gates,
            priors=tuple(bound.priors),
            check_cancelled=context.check_cancelled,
        ),
        considered=Considered(
            common_time_s=params.common_time_sigma,
            station_time=params.consider_time,
            coordinates=params.consider_coordinates,
            zenith_delay_m=params.zenith_delay_sigma,
            vertical_tec=params.vertical_tec_sigma,
            carrier_hz=arc.rows.reference_hz,
            # UT1 - UTC is within 0.9 s and drifts through that range evenly: 0.5 s as 1-sigma.
            emitter_flicker_1=params.emitter_flicker,
            loading_m=params.loading_sigma,
            forces_1=params.force_model_sigma,
            antenna_m=params.emitter_antenna_sigma if bound.frame == "GCRS" else 0.0,
            ut1_s=0.5 if arc.frame.degraded else 0.0,
        ),
        noise=params.noise,
        odds_threshold=params.odds_threshold,
        elevation_mask_deg=params.elevation_mask,
        elevation_weighting=params.elevation_weighting == "sine",
    )
    if (
        (arc.rows.station >= 0).all()
        and clocks.datum != "auto"
        and clocks.datum not in {r.station_id for r in arc.receivers}
    ):
        raise InputError(
            Problem(
                f"nodes.{context.node}.params.datum",
                f"no rows of the datum station {clocks.datum!r}",
                allowed="auto, " + ", ".join(r.station_id for r in arc.receivers),
            )
        )
    context.progress(0.2, "fitting")
    answer = solve_arc(arc.rows, arc.receivers, bound, np.asarray(starts.parameters), settings)
    return {"solution": pack(answer, arc, bound, settings, starts, context)}


def _steps(texts, epoch_tai_ns: int, context) -> tuple[float, ...]:
    out, problems = [], []
    for k, text in enumerate(texts):
        try:
            out.append((tai_ns_from_utc(text) - epoch_tai_ns) * 1e-9)
        except ValueError as error:
            problems.append(Problem(f"nodes.{context.node}.params.emitter_steps.{k}", str(error), found=text))
    if problems:
        raise InputError(problems)
    return tuple(out)
