"""From an answer on arrays to the Solution table: residuals of every row, stations, alternatives, words."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd

from shiftfix.api import (
    Alternative,
    Parameter,
    Solution,
    StationResult,
    ellipse,
    enu_axes,
    geodetic_from_itrs,
    utc_text,
)

NEAR_EARTH_M = 1e8


def pack(answer, arc, bound, settings, starts, context) -> Solution:
    """Return the Solution of an answer."""
    from shiftfix.api import cautions_for

    fields = dict(
        verdict=answer.verdict,
        verdict_text=answer.text,
        motion=bound.name,
        epoch_tai_ns=arc.epoch_tai_ns,
        epoch_utc=utc_text(arc.epoch_tai_ns),
        frame=bound.frame,
        unobservable=answer.unobservable,
        findings=(_assumed(settings.fit.clocks, arc.rows.reference_hz), *answer.findings, *starts.findings),
        cautions=cautions_for(
            context.emitter_classes, float(np.median(arc.table.array("received_frequency_hz")))
        ),
    )
    if answer.widened is None:
        return Solution(warnings=_warnings(answer, arc), rows=_base(arc), covariance_reason=answer.text, **fields)
    fit = answer.widened.fit
    if answer.kept is not None:
        low = {int(i): "below the elevation mask" for i in arc.index[~answer.kept]}
        arc = replace(arc, index=arc.index[answer.kept], excluded={**arc.excluded, **low})
    delivered = answer.verdict in ("fix", "ambiguous")
    fields |= dict(
        warnings=_warnings(answer, arc),
        rows=_residuals(arc, fit),
        covariance_kind=answer.widened.kind,
        frequency_datum=fit.nuisance.datum,
        chi_square=float(fit.chi_square),
        degrees_of_freedom=int(fit.degrees_of_freedom),
        converged=bool(fit.converged),
        rank_full=bool(fit.rank_full),
        second_minimum=bool(answer.others),
        condition=float(fit.condition) if np.isfinite(fit.condition) else None,
        iterations=int(fit.iterations),
    )
    if not delivered:
        return Solution(covariance_reason=answer.text, stations=_stations(answer, arc, fit, None), **fields)
    covariance = answer.parameter_covariance
    rest, rest_sigma, drift = _rest_frequency(fit, covariance, arc)
    return Solution(
        position_m=answer.position,
        velocity_m_s=answer.velocity,
        covariance=answer.state_covariance,
        geodetic=_geodetic(answer, arc, bound),
        rest_frequency_hz=rest,
        rest_frequency_sigma_hz=rest_sigma,
        rest_frequency_drift_hz_s=drift,
        stations=_stations(answer, arc, fit, covariance),
        parameters=_parameters(fit, covariance, settings),
        alternatives=_alternatives(answer, arc, bound),
        odds=float(answer.odds[0]),
        budget=answer.budget,
        **fields,
    )


def _warnings(answer, arc) -> tuple[str, ...]:
    out = list(arc.table.notes) + list(arc.notes)
    if arc.table.rejects:
        out.append(f"rows rejected when the files were read: {len(arc.table.rejects)}; run.json lists them")
    if arc.excluded:
        reasons: dict[str, int] = {}
        for reason in arc.excluded.values():
            reasons[reason] = reasons.get(reason, 0) + 1
        out += [f"rows left out ({reason}): {count}" for reason, count in sorted(reasons.items())]
    if answer.widened is not None and answer.widened.kind != "formal":
        out.append("the residuals contradict the stated noise; the error was widened to what they show")
    if len(answer.odds) > 1 and answer.verdict in ("fix", "ambiguous"):
        out.append("other solutions fit; see the alternatives and their odds")
    return tuple(out)


def _assumed(clocks, reference_hz: float) -> str:
    """Return what the answer and its odds take for granted about oscillators, in words."""
    emitter = {
        "constant": "constant",
        "drift": f"drifts by 0 +/- {clocks.emitter_drift_sigma_per_s:.2g} 1/s "
        f"(+/- {clocks.emitter_drift_sigma_per_s * reference_hz:.2g} Hz/s)",
        "random_walk": f"walks by {clocks.emitter_walk:.2g} in one second",
    }[clocks.emitter]
    station = {
        "constant": "constant",
        "drift": f"drift by 0 +/- {clocks.station_drift_sigma_per_s:.2g} 1/s",
        "random_walk": f"walk by {clocks.station_walk:.2g} in one second",
        "piecewise": "constant within an arc",
        "calibrated": "from known emitters",
    }[clocks.station]
    steps = f", with {len(clocks.steps_s)} steps of its frequency" if clocks.steps_s else ""
    rest = ""
    if np.isfinite(clocks.rest_log_sigma):
        rest = f"; rest frequency beforehand +/- {clocks.rest_log_sigma * reference_hz:.4g} Hz"
    return f"assumed (1 sigma): emitter's oscillator {emitter}{steps}; stations' oscillators {station}{rest}"


def _base(arc) -> pd.DataFrame:
    table = arc.table.rows
    names = ["station_id", "emitter_id", "time_tai_ns", "interval_s", "received_frequency_hz", "source", "row_number"]
    rows = table[names].copy()
    for name in ("model_frequency_hz", "residual_hz", "normalised_residual_1", "sigma_hz", "weight_1", "elevation_deg"):
        rows[name] = np.nan
    flag = table["flag"].to_numpy(object).copy()
    reason = table["reason"].to_numpy(object).copy()
    for i, why in arc.excluded.items():
        flag[i], reason[i] = "reject", why
    rows["flag"], rows["reason"] = flag, reason
    return rows


def _residuals(arc, fit) -> pd.DataFrame:
    rows = _base(arc)
    index = arc.index
    received = arc.table.array("received_frequency_hz")[index]
    # Residual in hertz: f - f exp(-r) = -f expm1(-r), exact for any size of r.
    residual = -received * np.expm1(-fit.residuals)
    columns = {
        "model_frequency_hz": received - residual,
        "residual_hz": residual,
        "normalised_residual_1": fit.normalised,
        "sigma_hz": fit.forward.rows.sigma * received,
        "weight_1": np.where(fit.used, fit.weights, 0.0),
        "elevation_deg": fit.forward.elevation_deg(fit.path),
    }
    for name, values in columns.items():
        full = rows[name].to_numpy().copy()
        full[index] = values
        rows[name] = full
    flag, reason = rows["flag"].to_numpy(object).copy(), rows["reason"].to_numpy(object).copy()
    down, reject = fit.used & (fit.weights < 0.999), ~fit.used
    for i, size in zip(index[reject], fit.normalised[reject], strict=True):
        flag[i], reason[i] = "reject", f"residual {abs(size):.1f} sigma"
    for i, size in zip(index[down], fit.normalised[down], strict=True):
        flag[i], reason[i] = "downweight", reason[i] or f"residual {abs(size):.1f} sigma"
    rows["flag"], rows["reason"] = flag, reason
    return rows


def _rest_frequency(fit, covariance, arc) -> tuple[float, float, float | None]:
    p = fit.parameters.size
    k = fit.nuisance.index("ln_rest_frequency_1")
    # The parameter refers to the reference time of the linear model; the drift brings it to the arc epoch.
    value = float(arc.rows.reference_hz * np.exp(fit.linear[k]))
    sigma = value * float(np.hypot(np.sqrt(covariance[p + k, p + k]), fit.nuisance.datum_sigma))
    d = fit.nuisance.index("emitter_drift_1_s")
    drift = None if d is None else float(value * fit.linear[d])
    if drift is not None:
        value -= drift * fit.nuisance.reference_s
    return value, sigma, drift


def _stations(answer, arc, fit, covariance) -> tuple[StationResult, ...]:
    p = fit.parameters.size
    out = []
    rows = fit.forward.rows
    received = arc.table.array("received_frequency_hz")[arc.index]
    ids = arc.table.array("station_id").astype(str)
    for s, receiver in enumerate(arc.receivers):
        mine = rows.station == s
        used = mine & fit.used
        offset = sigma = drift = None
        if covariance is not None:
            k = fit.nuisance.index(f"offset[{receiver.station_id}]_1")
            if k is not None:
                offset, sigma = float(np.expm1(fit.linear[k])), float(np.sqrt(covariance[p + k, p + k]))
            elif fit.nuisance.datum.startswith(f"reference of {receiver.station_id},"):
                offset, sigma = receiver.offset, 0.0
            if arc.offsets is not None:
                offset, sigma = _calibrated(arc.offsets, receiver.station_id)
            d = fit.nuisance.index(f"drift[{receiver.station_id}]_1_s")
            drift = None if d is None else float(fit.linear[d])
        total = int((ids == receiver.station_id).sum())
        rms = float(np.sqrt(np.mean((received * fit.residuals)[used] ** 2))) if used.any() else None
        out.append(
            StationResult(receiver.station_id, offset, sigma, drift, rms, int(used.sum()), total - int(used.sum()))
        )
    return tuple(out)


def _calibrated(offsets, station_id: str) -> tuple[float | None, float | None]:
    """Return the median calibrated offset of a station over the arc and the 1-sigma of its mean."""
    mine = offsets.array("station_id").astype(str) == station_id
    if not mine.any():
        return None, None
    phase = np.sqrt(2.0) * offsets.array("phase_sigma_s")[mine] / np.maximum(offsets.array("interval_s")[mine], 1e-9)
    single = np.median(np.hypot(offsets.array("offset_sigma_1")[mine], phase))
    common = np.median(offsets.array("common_sigma_1")[mine])
    return float(np.median(offsets.array("offset_1")[mine])), float(np.hypot(common, single / np.sqrt(mine.sum())))


def _parameters(fit, covariance, settings) -> tuple[Parameter, ...]:
    p = fit.parameters.size
    sigma = np.sqrt(np.diag(covariance))
    out = []
    prior = {q.index: q.sigma for q in settings.fit.priors if hasattr(q, "index")}
    values = _usual_angles(fit.motion.parameter_names, fit.parameters)
    for k, name in enumerate(fit.motion.parameter_names):
        informed = "prior" if k in prior and sigma[k] > 0.7 * prior[k] else "data"
        out.append(Parameter(name, float(values[k]), float(sigma[k]), "estimated", informed))
    scale = np.abs(fit.nuisance.prior_rows)
    for k, name in enumerate(fit.nuisance.names):
        if "walk" in name:
            continue
        strength = scale[:, k].max(initial=0.0)
        informed = "prior" if strength > 0 and sigma[p + k] * strength > 0.7 else "data"
        out.append(Parameter(name, float(fit.linear[k]), float(sigma[p + k]), "estimated", informed))
    return tuple(out)


def _usual_angles(names, parameters: np.ndarray) -> np.ndarray:
    """Return the parameters with latitude within +/- pi/2 and longitude within +/- pi.

    The fit of an emitter at rest may go over a pole: the place is the same with latitude pi - B and longitude L + pi.
    """
    out = np.array(parameters, dtype=float)
    if "latitude_rad" not in names or "longitude_rad" not in names:
        return out
    i, j = names.index("latitude_rad"), names.index("longitude_rad")
    if np.cos(out[i]) < 0.0:
        out[j] += np.pi
    out[i] = np.arcsin(np.sin(out[i]))
    out[j] = (out[j] + np.pi) % (2.0 * np.pi) - np.pi
    return out


def _place(position, arc, bound) -> tuple[np.ndarray, np.ndarray, dict] | None:
    """Return rotation to ITRS, east-north-up axes and geodetic place of a position; None far from the Earth."""
    if np.linalg.norm(position) > NEAR_EARTH_M:
        return None
    rotation = arc.frame.rotation(np.zeros(1))[0].T if bound.frame == "GCRS" else np.eye(3)
    latitude, longitude, height = (float(a) for a in geodetic_from_itrs(rotation @ position))
    place = {
        "latitude_deg": float(np.degrees(latitude)),
        "longitude_deg": float(np.degrees(longitude)),
        "height_m": height,
    }
    return rotation, enu_axes(latitude, longitude), place


def _geodetic(answer, arc, bound) -> dict | None:
    found = _place(answer.position, arc, bound)
    if found is None:
        return None
    rotation, axes, place = found
    turn = axes @ rotation
    local = turn @ answer.state_covariance[:3, :3] @ turn.T
    out = {
        **place,
        "height_sigma_m": float(np.sqrt(max(local[2, 2], 0.0))),
        "ellipse_50": ellipse(local[:2, :2], 0.50),
        "ellipse_95": ellipse(local[:2, :2], 0.95),
    }
    if bound.frame == "ITRS" and np.any(answer.velocity):
        east, north, up = (float(v) for v in axes @ answer.velocity)
        course = float(np.degrees(np.arctan2(east, north)) % 360.0)
        out |= {"speed_m_s": float(np.hypot(east, north)), "course_deg": course, "climb_m_s": up}
    return out


def _alternatives(answer, arc, bound) -> tuple[Alternative, ...]:
    out = []
    for fit, chance in zip(answer.others, answer.odds[1:], strict=True):
        position, velocity, _ = bound.state(fit.path)
        state = {"position_m": [float(v) for v in position], "velocity_m_s": [float(v) for v in velocity]}
        rms = float(np.sqrt(np.mean(fit.normalised[fit.used] ** 2)))
        found = _place(position, arc, bound)
        out.append(Alternative(state, float(chance), rms, found[2] if found else None))
    return tuple(out)
