"""Files of one station on one grid of epochs and satellites, ready for the phase records and the frequencies."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from shiftfix.api import SPEED_OF_LIGHT_M_S, Problem
from shiftfix_ingest.phase_records import PhaseGrid, recording_interval_s
from shiftfix_ingest.rinex_signals import BANDS, choose
from shiftfix_ingest.rinex_text import ObservationFile

_MAX_CN0_DB_HZ = 70.0  # no receiver reports more; larger numbers are amplitudes or other scales


@dataclass
class StationGrid:
    """Observations of one station; arrays (e, s) of epochs by satellites, NaN where missing.

    Parameters
    ----------
    satellites : list of str
    phases : PhaseGrid
    phase_m, code_m, rate_m_s : ndarray (e, s)
        Range-like phase, code range and minus Doppler in metres, of the combination.
    cn0_db_hz : ndarray (e, s)
    clock_s : ndarray (e,)
        Receiver clock offset as in the file.
    file, line : ndarray (e, s) of int
        Index of the file and line of each record; file -1 where there is no record.
    repeated : list of (file index, line)
        Records of epochs that another file gave already.
    nominal_hz : ndarray (s,)
    notes : list of str
    """

    satellites: list[str]
    phases: PhaseGrid
    phase_m: np.ndarray
    code_m: np.ndarray
    rate_m_s: np.ndarray
    cn0_db_hz: np.ndarray
    clock_s: np.ndarray
    file: np.ndarray
    line: np.ndarray
    nominal_hz: np.ndarray
    repeated: list[tuple[int, int]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


def station_grid(
    files: Sequence[ObservationFile], *, combined: bool, observable: str, signals: Sequence[str], reversed_doppler: bool
) -> tuple[StationGrid, list[Problem]]:
    """Return the observations of all files of one station.

    Parameters
    ----------
    files : sequence of ObservationFile
    combined : bool
        Form the combination of two bands that is free of the ionosphere to first order.
    observable : {"phase", "doppler"}
        What has to be there.
    signals : sequence of str
        Codes named by the user.
    reversed_doppler : bool
        Whether the files give Doppler negative for approach, against the format.

    Returns
    -------
    grid : StationGrid
    problems : list of Problem
        Files that lack an observable which is needed, or whose Doppler has the other sign.
    """
    times = np.unique(np.concatenate([f.epoch_tai_ns for f in files]))
    names = sorted({str(s) for f in files for s in np.unique(f.satellite) if s[0] in BANDS})
    shape = (len(times), len(names))
    raw = {(k, b): np.full(shape, np.nan) for k in "LCD" for b in (0, 1)}
    lock = np.zeros((2, *shape), np.int8)
    cn0, clock = np.full(shape, np.nan), np.full(len(times), np.nan)
    file_of, line_of = np.full(shape, -1), np.zeros(shape, int)
    signal, power = np.zeros(shape, int), np.zeros(len(times), bool)
    sets: dict[tuple, int] = {}
    problems: list[Problem] = []
    repeated: list[tuple[int, int]] = []
    notes: list[str] = []
    place = {n: k for k, n in enumerate(names)}
    for number, file in enumerate(files):
        row_of = np.searchsorted(times, file.epoch_tai_ns)
        fresh = np.isnan(clock[row_of])
        clock[row_of[fresh]] = file.epoch_clock_s[fresh]
        power[row_of] |= file.epoch_flag == 1
        systems = file.satellite.astype("U1")
        for system in sorted(set(systems.tolist()) & set(BANDS)):
            index = np.flatnonzero(systems == system)
            row = row_of[file.epoch[index]]
            column = np.array([place[s] for s in file.satellite[index]], int)
            cell = row * shape[1] + column
            first = np.zeros(len(index), bool)
            first[np.unique(cell, return_index=True)[1]] = True
            taken = first & (file_of[row, column] < 0)
            repeated += [(number, int(n)) for n in file.line[index[~taken]]]
            index, row, column = index[taken], row[taken], column[taken]
            file_of[row, column], line_of[row, column] = number, file.line[index]
            mine = systems == system
            used: list[str | None] = []
            for b, (band, frequency) in enumerate(BANDS[system].items()):
                for kind, unit in (
                    ("L", SPEED_OF_LIGHT_M_S / frequency),
                    ("C", 1.0),
                    ("D", -SPEED_OF_LIGHT_M_S / frequency),
                ):
                    code = choose(file, system, mine, band, kind, signals)
                    used.append(code)
                    if code:
                        raw[kind, b][row, column] = file.values[code][index] * unit
                        if kind == "L":
                            lock[b, row, column] = file.lock[code][index]
            signal[row, column] = sets.setdefault((system, *used), len(sets))
            problems += _lacking(file, system, used, combined, observable)
            strength = choose(file, system, mine, next(iter(BANDS[system])), "S", signals)
            notes += _strength(file, strength, index, row, column, cn0)
            if reversed_doppler:
                for b in (0, 1):
                    raw["D", b][row, column] *= -1.0
            if observable == "doppler":
                problems += _doppler_sign(file, times, row, column, raw, reversed_doppler)
    interval = recording_interval_s(times)
    phases = PhaseGrid(
        times,
        interval,
        [raw["L", 0], raw["L", 1]],
        [raw["C", 0], raw["C", 1]],
        ((lock[0] | lock[1]) & 1) > 0,
        ((lock[0] | lock[1]) & 2) > 0,
        power,
        signal,
    )
    frequencies = [list(BANDS[n[0]].values()) for n in names]
    f1, f2 = np.array([f[0] for f in frequencies]), np.array([f[1] for f in frequencies])
    parts = [_combined(raw[k, 0], raw[k, 1], f1, f2) if combined else raw[k, 0] for k in "LCD"]
    grid = StationGrid(names, phases, *parts, cn0, clock, file_of, line_of, f1, repeated, list(dict.fromkeys(notes)))
    return grid, problems


def _combined(first: np.ndarray, second: np.ndarray, f1: np.ndarray, f2: np.ndarray) -> np.ndarray:
    """Return the combination without the ionosphere's 1/f**2 term; what is left of higher orders is below 0.05 m."""
    return (f1**2 * first - f2**2 * second) / (f1**2 - f2**2)


def _lacking(file: ObservationFile, system: str, used: list, combined: bool, observable: str) -> list[Problem]:
    """Return a problem for each band whose needed observable the file never gives."""
    kind = 0 if observable == "phase" else 2
    bands = list(BANDS[system])[: 2 if combined else 1]
    word = "carrier phase" if observable == "phase" else "Doppler"
    return [
        Problem(
            f"{file.source.name}:{file.header.lines}",
            f"no {word} on band {band} of system {system}",
            found=" ".join(file.header.codes_of(system)),
            allowed=f"a code {'LD'[kind > 0]}{band}",
            remedy='take another observable, or combination = "single"' if combined else "take another observable",
        )
        for k, band in enumerate(bands)
        if used[3 * k + kind] is None and system == "G"
    ]


def _strength(file: ObservationFile, code: str | None, index, row, column, cn0: np.ndarray) -> list[str]:
    """Fill in the carrier-to-noise density ratios where they are in dB-Hz; return a note when they are not."""
    if code is None:
        return []
    values = file.values[code][index]
    if np.isfinite(values).any() and np.nanmax(values) > _MAX_CN0_DB_HZ:
        return [
            f"{file.source.name}: {code} reaches {np.nanmax(values):g}, so it is not in dB-Hz; strengths are left out"
        ]
    cn0[row, column] = values
    return []


def _doppler_sign(file: ObservationFile, times, row, column, raw, reversed_doppler: bool) -> list[Problem]:
    """Return a problem when Doppler and the change of phase (or code) have opposite signs."""
    rows, columns = np.unique(row), np.unique(column)
    slow = raw["D", 0][np.ix_(rows, columns)]
    for kind in "LC":
        step = np.diff(raw[kind, 0][np.ix_(rows, columns)], axis=0) / np.diff(times[rows])[:, None] * 1e9
        both = np.isfinite(step) & np.isfinite(slow[1:]) & (np.abs(step) < 2e3) & (np.abs(step) > 50.0)
        if both.sum() >= 10:
            if np.mean(np.sign(step[both]) == np.sign(slow[1:][both])) > 0.1:
                return []
            return [
                Problem(
                    file.source.name,
                    "Doppler has the opposite sign of the change of range",
                    allowed="positive for approach (RINEX)",
                    remedy=f'set params.doppler_sign = "{"rinex" if reversed_doppler else "reversed"}"',
                )
            ]
    return []
