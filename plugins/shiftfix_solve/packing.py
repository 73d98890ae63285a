"""From an answer on arrays to the Solution table: residuals of every row, stations, alternatives, words."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd

from shiftfix.api import Alternative, Parameter, Solution, StationResult, ellipse, geodetic_from_itrs, utc_text

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
        findings=tuple(answer.findings) + tuple(starts.findings),
        cautions=cautions_for(context.emitter_classes),
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
        alternatives=_alternatives(answer, bound),
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
    if len(answer.odds) > 1:
        out.append("other solutions fit; see the alternatives and their odds")
    return tuple(out)


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
    for k, name in enumerate(fit.motion.parameter_names):
        informed = "prior" if k in prior and sigma[k] > 0.7 * prior[k] else "data"
        out.append(Parameter(name, float(fit.parameters[k]), float(sigma[k]), "estimated", informed))
    scale = np.abs(fit.nuisance.prior_rows)
    for k, name in enumerate(fit.nuisance.names):
        if "walk" in name:
            continue
        strength = scale[:, k].max(initial=0.0)
        informed = "prior" if strength > 0 and sigma[p + k] * strength > 0.7 else "data"
        out.append(Parameter(name, float(fit.linear[k]), float(sigma[p + k]), "estimated", informed))
    return tuple(out)


def _geodetic(answer, arc, bound) -> dict | None:
    position, covariance = answer.position, answer.state_covariance[:3, :3]
    if np.linalg.norm(position) > NEAR_EARTH_M:
        return None
    if bound.frame == "GCRS":
        rotation = arc.frame.rotation(np.zeros(1))[0]
        position, covariance = rotation.T @ position, rotation.T @ covariance @ rotation
    latitude, longitude, height = geodetic_from_itrs(position)
    axes = np.array(
        [
            [-np.sin(longitude), np.cos(longitude), 0.0],
            [-np.sin(latitude) * np.cos(longitude), -np.sin(latitude) * np.sin(longitude), np.cos(latitude)],
        ]
    )
    horizontal = axes @ covariance @ axes.T
    return {
        "latitude_deg": float(np.degrees(latitude)),
        "longitude_deg": float(np.degrees(longitude)),
        "height_m": float(height),
        "ellipse_50": ellipse(horizontal, 0.50),
        "ellipse_95": ellipse(horizontal, 0.95),
    }


def _alternatives(answer, bound) -> tuple[Alternative, ...]:
    out = []
    for fit, chance in zip(answer.others, answer.odds[1:], strict=True):
        position, velocity, _ = bound.state(fit.path)
        state = {"position_m": [float(v) for v in position], "velocity_m_s": [float(v) for v in velocity]}
        used = fit.used
        out.append(Alternative(state, float(chance), float(np.sqrt(np.mean(fit.normalised[used] ** 2)))))
    return tuple(out)
