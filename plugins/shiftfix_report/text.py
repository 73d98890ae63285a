"""Report as plain text: what the answer is, how far to trust it, and what must not be done with it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable

import numpy as np

from shiftfix.api import Solution, solution_document

WIDTH = 100


def report_text(solution: Solution, title: str, emitter_classes: Iterable[str] = ()) -> str:
    """Return the report of a solution, at most `WIDTH` columns wide; every number with unit and level."""
    document = solution_document(solution, title=title, emitter_classes=tuple(emitter_classes))
    lines: list[str] = []
    if title:
        lines += [title, "=" * min(len(title), WIDTH), ""]
    lines += _wrap(f"{solution.verdict.upper()}: {solution.verdict_text}")
    for text in solution.unobservable:
        lines += _wrap(f"not seen: {text}", 2)
    lines.append("")
    if solution.position_m is not None:
        lines += _position(solution)
        lines += _frequency(solution)
        lines += _others(solution)
    else:
        lines += ["No position is given.", *_wrap(solution.covariance_reason or solution.verdict_text, 2), ""]
    lines += _stations(solution)
    lines += _trust(solution)
    lines += _listed("Findings", solution.findings)
    lines += _listed("Warnings", solution.warnings)
    lines += _parameters(solution)
    lines += _listed("Cautions", document["cautions"])
    return "\n".join(lines).rstrip() + "\n"


def _wrap(text: str, indent: int = 0, hang: int = 2) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=" " * indent, subsequent_indent=" " * (indent + hang)) or [""]


def _listed(title: str, texts: Iterable[str]) -> list[str]:
    texts = list(texts)
    if not texts:
        return []
    out = [title]
    for text in texts:
        out += _wrap(f"- {text}", 2)
    return [*out, ""]


def _length(value: float) -> str:
    return f"{value / 1e3:.4g} km" if abs(value) >= 1e4 else f"{value:.{4 if abs(value) >= 1e3 else 3}g} m"


def _position(solution: Solution) -> list[str]:
    out = [f"Where, at {solution.epoch_utc} (UTC), motion: {solution.motion}"]
    g = solution.geodetic
    if g is not None:
        out.append(
            f"  latitude {g['latitude_deg']:.6f} deg, longitude {g['longitude_deg']:.6f} deg, "
            f"height {g['height_m']:.0f} m (WGS84 ellipsoid)"
        )
        for level, key in ((95, "ellipse_95"), (50, "ellipse_50")):
            e = g[key]
            out.append(
                f"  {level} % ellipse: semi-axes {_length(e['semi_major_m'])} x {_length(e['semi_minor_m'])}, "
                f"major axis {e['azimuth_deg']:.0f} deg from north"
            )
    x, v = solution.position_m, solution.velocity_m_s
    sigma = (
        np.sqrt(np.maximum(np.diag(solution.covariance), 0.0))
        if solution.covariance is not None
        else np.full(6, np.nan)
    )
    out.append(f"  {solution.frame} state, 1 sigma:")
    for k, axis in enumerate("xyz"):
        out.append(f"    {axis} {x[k]:18.3f} m +/- {sigma[k]:<10.3g} v{axis} {v[k]:14.6f} m/s +/- {sigma[3 + k]:.3g}")
    kind = {
        "formal": "as the stated noise gives it",
        "scaled": "scaled up: the residuals are larger than the stated noise",
        "widened": "from the noise that the residuals show: they contradict the stated noise",
    }[solution.covariance_kind]
    out += [f"  error: {kind}", ""]
    return out


def _frequency(solution: Solution) -> list[str]:
    out = [
        "At what frequency",
        f"  rest frequency {solution.rest_frequency_hz:.6f} Hz +/- {solution.rest_frequency_sigma_hz:.2g} Hz (1 sigma)",
    ]
    if solution.rest_frequency_drift_hz_s is not None:
        out.append(f"  drift {solution.rest_frequency_drift_hz_s:.4g} Hz/s")
    return [*out, *_wrap(f"datum: {solution.frequency_datum}", 2), ""]


def _others(solution: Solution) -> list[str]:
    out = ["What else fits"]
    if not solution.alternatives:
        return [*out, "  no other solution within the listed range", ""]
    out.append(
        f"  odds of the solution above {solution.odds:.3f} (equal prior density of places; oscillator priors as declared)"
    )
    for a in solution.alternatives:
        away = float(np.linalg.norm(np.asarray(a.state["position_m"]) - solution.position_m))
        x = ", ".join(f"{c:.0f}" for c in a.state["position_m"])
        out.append(f"  odds {a.odds:.3f}  {_length(away)} away, position ({x}) m {solution.frame}, rms {a.rms:.2f}")
    return [*out, ""]


def _stations(solution: Solution) -> list[str]:
    if not solution.stations:
        return []
    width = max(7, *(len(s.station_id) for s in solution.stations))
    out = [
        "Stations",
        f"  {'station':<{width}}  {'offset':>11}  {'1 sigma':>8}  {'drift 1/s':>10}  {'rms Hz':>9}  {'used':>6}  {'left out':>8}",
    ]
    for s in solution.stations:
        offset = f"{s.offset:.4e}" if s.offset is not None else "-"
        sigma = f"{s.offset_sigma:.1e}" if s.offset_sigma is not None else "-"
        drift = f"{s.drift_per_s:.2e}" if s.drift_per_s is not None else "-"
        rms = f"{s.residual_rms_hz:.4g}" if s.residual_rms_hz is not None else "-"
        out.append(
            f"  {s.station_id:<{width}}  {offset:>11}  {sigma:>8}  {drift:>10}  {rms:>9}  {s.rows_used:>6}  {s.rows_rejected:>8}"
        )
    return [*out, ""]


def _trust(solution: Solution) -> list[str]:
    out = ["How far to trust it"]
    if solution.chi_square is not None:
        out.append(f"  chi-square {solution.chi_square:.1f} for {solution.degrees_of_freedom} degrees of freedom")
    facts = {
        "converged": solution.converged,
        "all parameters determined": solution.rank_full,
        "other minimum found": solution.second_minimum,
    }
    out.append("  " + ", ".join(f"{name}: {'yes' if value else 'no'}" for name, value in facts.items()))
    if solution.condition is not None:
        out.append(
            f"  condition number of the scaled problem {solution.condition:.2g}, {solution.iterations} iterations"
        )
    if solution.budget:
        out.append("  error budget, 1 sigma (root sum square of the components):")
        width = max(len(n) for n in solution.budget)
        for name, part in solution.budget.items():
            out.append(f"    {name:<{width}}  {_length(part['position_m']):>10}  {part['velocity_m_s']:.3g} m/s")
        out += _wrap(
            "Time tags, coordinates, media and forces do not show in the residuals; they are in the error as declared.",
            4,
            0,
        )
    return [*out, ""]


def _parameters(solution: Solution) -> list[str]:
    if not solution.parameters:
        return []
    width = max(len(p.name) for p in solution.parameters)
    out = ["Parameters"]
    for p in solution.parameters:
        sigma = f"+/- {p.sigma:.3g}" if p.sigma is not None else ""
        out.append(f"  {p.name:<{width}}  {p.value:.9g} {sigma}  ({p.kind}, from {p.informed_by})")
    return [*out, ""]
