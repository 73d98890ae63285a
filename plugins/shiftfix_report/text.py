"""Report as plain text: what the answer is, how far to trust it, and what must not be done with it."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from shiftfix.api import (
    Solution,
    length_text,
    measured_text,
    odds_text,
    place_text,
    solution_document,
    utc_text,
    value_text,
)
from shiftfix_report.layout import WIDTH, listed, table, wrapped

ERROR_KIND = {
    "formal": "as the stated noise gives it",
    "scaled": "scaled up, because the residuals are larger than the stated noise",
    "widened": "from the noise that the residuals show, because they contradict the stated noise",
}
BUDGET_WORDS = {
    "time tags": "time tags of the stations",
    "coordinates": "coordinates of the stations",
    "loading": "stations' height within hours (loading, tide)",
    "emitter oscillator": "emitter's oscillator beyond its model",
    "Earth rotation": "Earth rotation (no table)",
    "forces": "forces beyond the orbit model",
    "emitter antenna": "emitter's antenna off its centre of mass",
    "troposphere": "troposphere beyond its model",
    "ionosphere": "ionosphere",
}
"""What the sources of the budget are; a source that is not here is shown by its name."""
MOST_FILES = 20


def report_text(solution: Solution, title: str, emitter_classes: Iterable[str] = ()) -> str:
    """Return the report of a solution, at most `WIDTH` columns wide; every number with unit and level."""
    document = solution_document(solution, title=title, emitter_classes=tuple(emitter_classes))
    lines: list[str] = []
    if title:
        lines += [*wrapped(title), "=" * min(len(title), WIDTH), ""]
    lines += _verdict(solution, document)
    if solution.position_m is not None:
        lines += _position(solution, document)
        lines += _frequency(solution)
        lines += _others(solution)
    lines += _stations(solution)
    lines += _data(solution)
    lines += _trust(solution)
    lines += listed("Warnings", solution.warnings)
    lines += listed("Findings", solution.findings)
    lines += _parameters(solution)
    lines += listed("Cautions", document["cautions"])
    return "\n".join(lines).rstrip() + "\n"


def _verdict(solution: Solution, document: dict) -> list[str]:
    out = wrapped(f"{solution.verdict.upper()}: {solution.verdict_text}")
    if solution.position_m is None:
        out.append("No position is given.")
        for text in solution.unobservable:
            if text not in solution.verdict_text:
                out += wrapped(f"not seen: {text}", 2)
    if document["remedy"]:
        out += wrapped(f"What would help: {document['remedy']}.")
    # The most urgent caution stands on the first screen, all of them at the end.
    return [*out, "", *wrapped(f"CAUTION. {document['cautions'][0]}"), ""]


def _position(solution: Solution, document: dict) -> list[str]:
    out = [f"Where, at {solution.epoch_utc} (UTC), motion: {solution.motion}"]
    g = solution.geodetic
    if g is not None:
        out.append(f"  {place_text(g['latitude_deg'], g['longitude_deg'], g['ellipse_95']['semi_major_m'])}")
        out.append(f"  height {measured_text(g['height_m'], g.get('height_sigma_m'), 'm', 1)}, above the WGS84 ellipsoid")
        for level, key in ((95, "ellipse_95"), (50, "ellipse_50")):
            if key in g:
                e = g[key]
                out.append(
                    f"  {level} % ellipse, horizontal: semi-axes {length_text(e['semi_major_m'])} x "
                    f"{length_text(e['semi_minor_m'])}, major axis {e['azimuth_deg']:.0f} deg clockwise from north"
                )
        if g.get("speed_m_s"):
            out.append(
                f"  speed over ground {g['speed_m_s']:.3f} m/s, course {g['course_deg']:.1f} deg clockwise from north, "
                f"climb {g['climb_m_s']:.3f} m/s"
            )
    x, v = solution.position_m, solution.velocity_m_s
    known = document["covariance"] is not None
    sigma = np.sqrt(np.maximum(np.diag(solution.covariance), 0.0)) if known else [None] * 6
    rest = not np.any(v) and known and not np.any(sigma[3:])
    out.append(f"  state in {solution.frame}, 1 sigma; " + ("at rest by the declared motion:" if rest else "velocity beside it:"))
    for k, axis in enumerate("xyz"):
        error = f"+/- {sigma[k]:<9.3g}" if known else ""
        line = f"    {axis} {x[k]:18.3f} m {error}"
        if not rest:
            speed_error = f" +/- {sigma[3 + k]:.3g}" if known else ""
            line += f"  v{axis} {v[k]:14.6f} m/s{speed_error}"
        out.append(line.rstrip())
    if known:
        out.append(f"  error: {ERROR_KIND[solution.covariance_kind]}")
    else:
        out += wrapped(f"no error can be given: {document['covariance_reason']}", 2)
    return [*out, ""]


def _frequency(solution: Solution) -> list[str]:
    rest = measured_text(solution.rest_frequency_hz, solution.rest_frequency_sigma_hz, "Hz")
    out = ["At what frequency", f"  rest frequency {rest}"]
    if solution.rest_frequency_drift_hz_s is not None:
        out.append(f"  drift {solution.rest_frequency_drift_hz_s:.4g} Hz/s")
    return [*out, *wrapped(f"datum: {solution.frequency_datum}", 2), ""]


def _others(solution: Solution) -> list[str]:
    out = ["What else fits"]
    if not solution.alternatives:
        return [*out, "  no other solution comes near the quality of this one", ""]
    out += wrapped(
        f"odds of the solution above {odds_text(solution.odds)}. Odds are probabilities among the solutions listed, with every "
        f"place equally likely beforehand and the oscillator priors named under Findings.",
        2,
        0,
    )
    for a in solution.alternatives:
        away = float(np.linalg.norm(np.asarray(a.state["position_m"]) - solution.position_m))
        text = f"odds {odds_text(a.odds)}, {length_text(away)} away: "
        if a.geodetic is not None:
            text += place_text(a.geodetic["latitude_deg"], a.geodetic["longitude_deg"], 100.0)
            text += f", height {length_text(a.geodetic['height_m'])}; "
        x = ", ".join(f"{c:.0f}" for c in a.state["position_m"])
        out += wrapped(f"{text}{solution.frame} ({x}) m; rms of the normalised residuals {a.rms:.2f}", 2)
    return [*out, ""]


def _stations(solution: Solution) -> list[str]:
    if not solution.stations:
        return []
    rows = []
    for s in solution.stations:
        offset = "-"
        if s.offset is not None:
            # An offset far below its own error is nothing but rounding.
            small = s.offset_sigma is not None and abs(s.offset) < 1e-3 * s.offset_sigma
            offset = "0" if small or s.offset == 0.0 else f"{s.offset:.4e}"
        rows.append(
            (
                s.station_id,
                offset,
                "-" if s.offset_sigma is None else f"{s.offset_sigma:.1e}",
                "-" if s.drift_per_s is None else f"{s.drift_per_s:.2e}",
                "-" if s.residual_rms_hz is None else f"{s.residual_rms_hz:.4g}",
                str(s.rows_used),
                str(s.rows_rejected),
            )
        )
    out = table(("station", "offset", "1 sigma", "drift 1/s", "rms Hz", "used", "left out"), rows)
    note = "offset is a fraction (received = true x (1 + offset)), against the datum; rms is that of the residuals"
    return ["Stations", *out, *wrapped(note, 2), ""]


def _data(solution: Solution) -> list[str]:
    if not len(solution):
        return []
    times, received = solution.array("time_tai_ns"), solution.array("received_frequency_hz") * 1e-6
    flags, sources = solution.array("flag").astype(str), solution.array("source").astype(str)
    out = [
        "What went in",
        f"  {len(solution)} rows, received {utc_text(int(times.min()), 3)} to {utc_text(int(times.max()), 3)} (UTC)",
        f"  frequencies {received.min():.6f} to {received.max():.6f} MHz, as logged",
    ]
    rows = []
    names = list(dict.fromkeys(sources))
    for name in names[:MOST_FILES]:
        mine = flags[sources == name]
        rows.append((name or "(no file)", *(str(int((mine == flag).sum())) for flag in ("use", "downweight", "reject"))))
    out += table(("file", "used", "weighted down", "left out"), rows)
    if len(names) > MOST_FILES:
        out.append(f"  and {len(names) - MOST_FILES} more files; run.json lists all")
    reasons = solution.array("reason").astype(str)[flags == "reject"]
    for reason in dict.fromkeys(reasons):
        out += wrapped(f"left out: {int((reasons == reason).sum())} x {reason or 'no reason given'}", 2)
    return [*out, ""]


def _trust(solution: Solution) -> list[str]:
    out = ["How far to trust it"]
    if solution.chi_square is not None:
        out.append(f"  chi-square {solution.chi_square:.1f} for {solution.degrees_of_freedom} degrees of freedom")
    facts = {
        "converged": solution.converged,
        "full rank": solution.rank_full,
        "a parameter at its bound": solution.at_bound,
        "other minimum found": solution.second_minimum,
    }
    out.append("  " + ", ".join(f"{name}: {'yes' if value else 'no'}" for name, value in facts.items()))
    if solution.condition is not None:
        count = f"{solution.iterations} iteration{'' if solution.iterations == 1 else 's'}"
        out.append(f"  condition number of the scaled problem {solution.condition:.2g}, {count}")
    if solution.budget:
        out.append("  error budget, 1 sigma (root sum square of the components):")
        rows = [
            (BUDGET_WORDS.get(name, name), length_text(part["position_m"]), f"{part['velocity_m_s']:.3g} m/s")
            for name, part in solution.budget.items()
        ]
        out += table(("", "position", "velocity"), rows, 4)
        out += wrapped(
            "Only noise and offsets show in the residuals; the other lines are as large as was declared.",
            4,
            0,
        )
    return [*out, ""]


def _parameters(solution: Solution) -> list[str]:
    if not solution.parameters:
        return []
    rows = []
    for p in solution.parameters:
        value = value_text(p.value, p.sigma, 9) if p.sigma else f"{p.value:.9g}"
        sigma = f"+/- {p.sigma:.3g}" if p.sigma is not None else ""
        rows.append((p.name, value, sigma, f"{p.kind}, from {p.informed_by}"))
    out = table(("name", "value", "1 sigma", "informed by"), rows, last_left=True)
    return ["Parameters (the unit ends the name; _1 is a pure number)", *out, ""]
