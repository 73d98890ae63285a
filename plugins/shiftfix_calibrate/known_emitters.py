"""Node `calibrate.known_emitters`: what each station's oscillator and clock did, from emitters of known motion."""

from __future__ import annotations

import numpy as np
import pandas as pd

from shiftfix.api import (
    ForwardModel,
    InputError,
    Media,
    OffsetTable,
    Problem,
    bundled_earth_orientation,
    clock_history,
    earth_frame,
    geodetic_from_itrs,
    known_log_ratio,
    merge_frequency_tables,
    observations,
    periodic_relativity_s,
    sampled_path,
    station_entries,
    station_receiver,
    utc_text,
)
from shiftfix_calibrate.smooth import smooth_rows

C = 299792458.0


class _Known:
    """One known emitter: path, clock and rest frequency."""

    def __init__(self, name, path, clock, rest_hz=None, rest_sigma_hz=0.0, span=(-(2**62), 2**62)) -> None:
        self.span = span
        self.name, self.path, self.clock = name, path, clock
        self.rest_hz, self.rest_sigma_hz = rest_hz, rest_sigma_hz


def known_emitters(inputs, params, context):
    """Return the offset history of every station that heard known emitters."""
    table = merge_frequency_tables(inputs["frequencies"])
    stations = inputs["stations"]
    times = table.array("time_tai_ns")
    epoch = int((int(times.min()) + int(times.max())) // 2 // 1_000_000_000 * 1_000_000_000)
    relative = (times - epoch) * 1e-9
    half = 0.5 * table.array("interval_s")
    span = (float((relative - half).min()) - 5.0, float((relative + half).max()) + 5.0)
    frame, notes = earth_frame(epoch, span, inputs.get("orientation") or bundled_earth_orientation())
    known = _known(inputs, table, params, frame, epoch)
    ids = table.array("station_id").astype(str)
    names = tuple(sorted(set(ids)))
    source, line = table.array("source"), table.array("row_number")
    entries = station_entries(stations, names, ids, times, lambda i: f"{source[i]}:{line[i]}")
    day = utc_text(epoch)
    day_of_year = float((np.datetime64(day[:10]) - np.datetime64(day[:4] + "-01-01")).astype(int) + 1)
    media = Media(params.troposphere != "none", day_of_year)
    findings, parts = list(notes), []
    for number, name in enumerate(names):
        context.check_cancelled()
        context.progress(number / len(names), f"station {name}")
        receiver = station_receiver(stations, entries[name], frame, epoch)
        mine = np.flatnonzero((ids == name) & (table.array("flag") != "reject"))
        looks = _looks(table, mine, known, receiver, epoch, media, params)
        if looks is None:
            findings.append(f"station {name}: no known emitter above the elevation mask")
            continue
        if params.model == "piecewise":
            part, words = _piecewise(name, table, mine, looks, params)
        else:
            part, words = smooth_rows(name, looks, params, receiver, epoch)
        parts.append(part)
        findings += words
    if not parts:
        raise InputError(
            Problem(
                f"node {context.node}",
                "no station heard a known emitter",
                found=", ".join(known),
                remedy="check emitter names and the elevation mask",
            )
        )
    for text in findings:
        context.logger.info(text)
    return {
        "offsets": OffsetTable(
            rows=pd.concat(parts, ignore_index=True),
            datum="known emitters: " + ", ".join(sorted(known)),
            findings=tuple(findings),
        )
    }


def _known(inputs, table, params, frame, epoch) -> dict[str, _Known]:
    present = set(table.array("emitter_id").astype(str)) - set(params.exclude)
    out: dict[str, _Known] = {}
    rest: dict[str, tuple[float, float]] = {}
    fixed: dict[str, np.ndarray] = {}
    if inputs.get("emitters") is not None:
        book = inputs["emitters"]
        for k, name in enumerate(book.array("emitter_id").astype(str)):
            rest[name] = (float(book.array("rest_frequency_hz")[k]), float(book.array("rest_frequency_sigma_hz")[k]))
            place = np.array([book.array(c)[k] for c in ("x_m", "y_m", "z_m")])
            if np.isfinite(place).all():
                fixed[name] = place
    for ephemeris in inputs.get("ephemeris") or ():
        objects = ephemeris.array("object_id").astype(str)
        for name in sorted(present & set(objects)):
            mine = objects == name
            clock = _clock(ephemeris, mine, epoch)
            if clock is None and name not in rest:
                continue
            path = sampled_path(ephemeris, name, frame, epoch)
            span = (ephemeris.array("time_tai_ns")[mine].min(), ephemeris.array("time_tai_ns")[mine].max())
            if clock is not None and ephemeris.clock_excludes_periodic_relativity:
                clock = _with_relativity(clock, path)
            out[name] = _Known(name, path, clock, *rest.get(name, (None, 0.0)), span=span)
    from shiftfix.api import ground_receiver

    for name in sorted(present & set(fixed)):
        out[name] = _Known(name, ground_receiver(name, frame, fixed[name]).path, None, *rest[name])
    if not out:
        raise InputError(
            Problem(
                "frequencies",
                "no row belongs to a known emitter",
                found=", ".join(sorted(present)) or "no emitter is named",
                remedy="connect an ephemeris or an emitter book that names them",
            )
        )
    return out


def _clock(ephemeris, mine, epoch):
    """Return the emitter's clock [s] as a function of time, linear between samples; None where it has none."""
    clock = ephemeris.array("clock_s")[mine]
    times = (ephemeris.array("time_tai_ns")[mine] - epoch) * 1e-9
    good = np.isfinite(clock)
    if good.sum() < 2:
        return None
    times, clock = times[good], clock[good]

    def at(t):
        out = np.interp(t, times, clock)
        return np.where((t < times[0]) | (t > times[-1]), np.nan, out)

    return at


def _with_relativity(clock, path):
    return lambda t: clock(t) + periodic_relativity_s(path.states(t))


def _looks(table, mine, known, receiver, epoch, media, params):
    """Return the rows of known emitters at one station with observed minus predicted ln of frequency."""
    emitter = table.array("emitter_id").astype(str)
    columns = {k: [] for k in ("row", "rate", "sigma", "map_a", "map_b", "tag_a", "tag_b", "emitter", "elevation")}
    correction = _time_offsets(table, mine, known, receiver, epoch)
    tags = table.array("time_tai_ns")
    interval = table.array("interval_s")
    half_ns = np.round(interval * 5e8).astype(np.int64)
    for number, name in enumerate(sorted(known)):
        one = known[name]
        rows = mine[emitter[mine] == name]
        # Emission comes up to 0.15 s before reception: the count must begin that long after the first sample.
        rows = rows[
            (tags[rows] - half_ns[rows] > one.span[0] + 300_000_000) & (tags[rows] + half_ns[rows] <= one.span[1])
        ]
        if not rows.size:
            continue
        start = np.array([correction(t) for t in tags[rows] - half_ns[rows]])
        stop = np.array([correction(t) for t in tags[rows] + half_ns[rows]])
        reference = float(np.median(table.array("nominal_frequency_hz")[rows]))
        observed, order = observations(
            station=np.zeros(rows.size, int),
            middle_s=(tags[rows] - epoch) * 1e-9,
            interval_s=interval[rows],
            received_hz=table.array("received_frequency_hz")[rows],
            sigma_hz=table.array("received_frequency_sigma_hz")[rows],
            reference_hz=reference,
            start_correction_s=start,
            stop_correction_s=stop,
        )
        rows = rows[order]
        forward = ForwardModel(observed, (receiver,), media)
        try:
            link = forward.links(one.path)
            predicted = known_log_ratio(forward, one.path, one.clock, link)
        except ValueError as error:
            raise InputError(
                Problem(
                    f"ephemeris of {name}",
                    "does not cover the rows of this emitter",
                    found=str(error).replace("\n", "; "),
                )
            ) from error
        if one.clock is None:
            predicted = predicted + np.log1p((one.rest_hz - reference) / reference)
        sine = forward.sin_elevation(link)
        elevation = np.degrees(np.arcsin(np.minimum(sine[forward.first], sine[forward.last])))
        rate = observed.z - predicted
        good = np.isfinite(rate) & (
            (elevation > params.elevation_mask)
            | (one.clock is None and receiver.height_m < 20e3 and abs(_height(one, epoch)) < 20e3)
        )
        mapping = (
            forward.zenith_mapping(link)
            if params.troposphere == "estimated" and one.clock is not None
            else np.zeros(sine.size)
        )
        for key, values in (
            ("row", rows),
            ("rate", rate),
            ("sigma", observed.sigma),
            ("map_a", mapping[forward.first]),
            ("map_b", mapping[forward.last]),
            ("tag_a", tags[rows] - half_ns[rows]),
            ("tag_b", tags[rows] + half_ns[rows]),
            ("emitter", np.full(rows.size, number)),
            ("elevation", elevation),
        ):
            columns[key].append(np.asarray(values)[good])
    if not columns["row"] or not sum(len(c) for c in columns["row"]):
        return None
    looks = {k: np.concatenate(v) for k, v in columns.items()}
    looks["phase_arc"] = table.array("phase_arc_id")[looks["row"]]
    looks["interval"] = interval[looks["row"]]
    looks["time_offset"] = correction
    looks["rest_sigma"] = max((k.rest_sigma_hz / k.rest_hz for k in known.values() if k.rest_hz), default=0.0)
    return looks


def _height(one, epoch) -> float:
    return float(geodetic_from_itrs(one.path.states(np.zeros(1)).position[0])[2])


def _time_offsets(table, mine, known, receiver, epoch):
    """Return a function from tag [ns of TAI] to (tag minus true time) [s], from code ranges to known emitters."""
    zero = lambda tag: 0.0  # noqa: E731
    if "pseudorange_m" not in table.rows:
        return zero
    emitter = table.array("emitter_id").astype(str)
    half = np.round(table.array("interval_s") * 5e8).astype(np.int64)
    tags: list[np.ndarray] = []
    offsets: list[np.ndarray] = []
    for name, one in known.items():
        if one.clock is None:
            continue
        rows = mine[emitter[mine] == name]
        for column, sign in (("pseudorange_start_m", -1), ("pseudorange_m", 1)):
            if column not in table.rows or not rows.size:
                continue
            code = table.array(column)[rows]
            good = np.isfinite(code)
            tag = table.array("time_tai_ns")[rows] + sign * half[rows]
            if not good.any():
                continue
            tag, code = tag[good], code[good]
            seconds = (tag - epoch) * 1e-9
            position = receiver.path.states(seconds).position
            line, travel = np.zeros_like(position), code / C
            try:
                # The receiver's clock error moves the satellite by metres only: nanoseconds here.
                states = one.path.states(seconds - travel)
            except ValueError:
                continue
            line = position - states.position
            distance = np.linalg.norm(line, axis=1)
            vertical = position / np.linalg.norm(position, axis=1)[:, None]
            sine = np.maximum(-np.einsum("ni,ni->n", line, vertical) / distance, 0.05)
            offset = (code - distance - 2.4 / sine) / C + one.clock(seconds - travel)
            use = np.isfinite(offset) & (sine > 0.15)
            tags.append(tag[use])
            offsets.append(offset[use])
    if not tags or not sum(len(t) for t in tags):
        return zero
    tag, offset = np.concatenate(tags), np.concatenate(offsets)
    unique, group = np.unique(tag, return_inverse=True)
    order = np.argsort(group, kind="stable")
    bounds = np.searchsorted(group[order], np.arange(unique.size + 1))
    median = np.array([np.median(offset[order[bounds[k] : bounds[k + 1]]]) for k in range(unique.size)])

    def at(t):
        k = int(np.searchsorted(unique, t))
        near = [j for j in (k - 1, k) if 0 <= j < unique.size]
        j = min(near, key=lambda i: abs(int(unique[i]) - int(t)))
        return float(median[j])

    return at


def _piecewise(name, table, mine, looks, params):
    """Return rows with one free offset an interval, in the phase domain where records are unbroken."""
    _, record = np.unique(
        np.char.add(looks["emitter"].astype(str), looks["phase_arc"].astype(str)), return_inverse=True
    )
    sine = np.sin(np.radians(np.maximum(looks["elevation"], 5.0)))
    # Low elevations carry more media and multipath: phase noise grows as 1/sin (common practice).
    sigma = looks["sigma"] * looks["interval"] / np.sqrt(2.0) / sine
    history = clock_history(
        looks["tag_a"],
        looks["tag_b"],
        looks["rate"],
        sigma,
        record,
        looks["map_a"],
        looks["map_b"],
        zenith_sigma_m=params.zenith_sigma if params.troposphere == "estimated" else 0.0,
    )
    at = {int(e): k for k, e in enumerate(history.epochs_ns)}
    kept = np.flatnonzero(history.kept)
    pairs, counts = np.unique(np.column_stack([looks["tag_a"][kept], looks["tag_b"][kept]]), axis=0, return_counts=True)
    pairs = pairs[counts >= params.minimum_emitters]
    counts = counts[counts >= params.minimum_emitters]
    a = np.array([at[int(p[0])] for p in pairs], int)
    b = np.array([at[int(p[1])] for p in pairs], int)
    length = (pairs[:, 1] - pairs[:, 0]) * 1e-9
    offset_of = looks["time_offset"]
    frame = pd.DataFrame(
        {
            "station_id": name,
            "time_tai_ns": (pairs[:, 0] + pairs[:, 1]) // 2,
            "interval_s": length,
            "offset_1": (history.phase_s[b] - history.phase_s[a]) / length,
            "offset_sigma_1": 0.0,
            "phase_sigma_s": np.sqrt(0.5 * (history.phase_sigma_s[a] ** 2 + history.phase_sigma_s[b] ** 2)),
            "phase_arc_id": name,
            "time_offset_start_s": [offset_of(int(p[0])) for p in pairs],
            "time_offset_stop_s": [offset_of(int(p[1])) for p in pairs],
            "zenith_correction_m": 0.5 * (history.zenith_m[a] + history.zenith_m[b]),
            "known_emitters_1": counts,
        }
    )
    rejected = int((~history.kept).sum())
    rate = float(np.median(frame["offset_1"])) if len(frame) else float("nan")
    words = [
        f"station {name}: {len(frame)} intervals from {len(np.unique(looks['emitter']))} known emitters, median offset {rate:.3e}, "
        f"residual phase {history.scale:.2f} x stated, {rejected} of {len(history.kept)} rows left out"
    ]
    return frame, words
