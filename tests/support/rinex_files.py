"""RINEX 2 and 3 observation texts of a small invented scene, for the tests of the reader.

The scene is plain arithmetic: every satellite has a range that is a polynomial of time, an ionospheric delay that grows
linearly, and a whole number of cycles as ambiguity. Nothing of the reader is used.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

C = 299792458.0
F1, F2 = 1575.42e6, 1227.60e6


@dataclass
class Scene:
    """Epochs, satellites and what happens to them; `edit` functions change one record before it is written."""

    satellites: tuple[str, ...] = ("G03", "G17", "G22", "G28")
    epochs: int = 12
    interval: float = 30.0
    marker: str = "MERR"
    second_0: float = 0.0
    minute_0: int = 0
    iono_m_s: float = 0.0
    doppler_sign: float = 1.0
    strength: float = 45.0
    edits: list[Callable[[int, str, dict], None]] = field(default_factory=list)
    tag_shift: Callable[[int], float] = lambda k: 0.0
    flags: dict[int, int] = field(default_factory=dict)
    clock: Callable[[int], float] | None = None

    def range_m(self, satellite: str, time_s: float) -> float:
        """Range, quadratic in time, different for every satellite."""
        n = int(satellite[1:])
        return 2.1e7 + 1.3e4 * n + (37.0 * n - 600.0) * time_s + (0.011 + 0.002 * n) * time_s**2

    def record(self, k: int, satellite: str) -> dict:
        """Observables of one satellite at one epoch, with loss-of-lock indicators; None is blank."""
        t = k * self.interval + self.second_0 + 60.0 * self.minute_0
        n = int(satellite[1:])
        rho = self.range_m(satellite, t)
        delay = self.iono_m_s * t + 2.0
        scale = (F1 / F2) ** 2
        rate = self.range_m(satellite, t + 0.5) - self.range_m(satellite, t - 0.5)
        out = {
            "L1": (rho - delay) * F1 / C + 1000.0 * n,
            "L2": (rho - scale * delay) * F2 / C - 500.0 * n,
            "P1": rho + delay,
            "P2": rho + scale * delay,
            "D1": -self.doppler_sign * rate * F1 / C,
            "D2": -self.doppler_sign * rate * F2 / C,
            "S1": self.strength - n / 10.0,
            "S2": 30.0,
            "lli1": 0,
            "lli2": 0,
        }
        for edit in self.edits:
            edit(k, satellite, out)
        return out


V2 = {"L1": "L1", "L2": "L2", "P1": "P1", "P2": "P2", "D1": "D1", "D2": "D2", "S1": "S1", "S2": "S2"}
V3 = {"L1": "L1C", "L2": "L2W", "P1": "C1C", "P2": "C2W", "D1": "D1C", "D2": "D2W", "S1": "S1C", "S2": "S2W"}


def _header(text: str, label: str) -> str:
    return f"{text:<60}{label}"


def _field(value: float | None, lli: int = 0) -> str:
    if value is None:
        return " " * 16
    return f"{value:14.3f}{lli if lli else ' '}{'7'}"


def rinex(
    scene: Scene, version: float = 2.11, kinds: tuple[str, ...] = tuple(V2), time_system: str = "GPS", **header
) -> str:
    """Return the text of an observation file."""
    old = version < 3
    names = V2 if old else V3
    codes = [names[k] for k in kinds]
    lines = [_header(f"{version:9.2f}           OBSERVATION DATA    G (GPS)", "RINEX VERSION / TYPE")]
    lines.append(_header(scene.marker, "MARKER NAME"))
    lines.append(_header("  4594489.8901  -678368.0104  4357065.9041", "APPROX POSITION XYZ"))
    if old:
        for k in range(0, len(codes), 9):
            start = f"{len(codes):6d}" if k == 0 else " " * 6
            lines.append(_header(start + "".join(f"{c:>6}" for c in codes[k : k + 9]), "# / TYPES OF OBSERV"))
    else:
        lines.append(_header(f"G  {len(codes):3d}" + "".join(f" {c}" for c in codes), "SYS / # / OBS TYPES"))
    lines.append(_header(f"{scene.interval:10.3f}", "INTERVAL"))
    lines.append(
        _header(
            f"  2026     3     1     6{scene.minute_0:6d}{scene.second_0:13.7f}     {time_system}", "TIME OF FIRST OBS"
        )
    )
    for label, text in header.items():
        lines.append(_header(text, label.replace("_", " ")))
    lines.append(_header("", "END OF HEADER"))
    for k in range(scene.epochs):
        lines += epoch_lines(scene, k, version, kinds)
    return "\n".join(lines) + "\n"


def epoch_lines(scene: Scene, k: int, version: float, kinds: tuple[str, ...]) -> list[str]:
    """Return the lines of one epoch."""
    old = version < 3
    total = 6 * 3600 + 60 * scene.minute_0 + scene.second_0 + k * scene.interval + scene.tag_shift(k)
    hour, rest = divmod(total, 3600)
    minute, second = divmod(rest, 60)
    flag = scene.flags.get(k, 0)
    records = [(s, scene.record(k, s)) for s in scene.satellites]
    records = [(s, r) for s, r in records if r.get("present", True)]
    names = [s for s, _ in records]
    clock = scene.clock(k) if scene.clock else None
    lines = []
    if old:
        head = f" 26  3  1 {int(hour):2d} {int(minute):2d}{second:11.7f}  {flag}{len(names):3d}"
        for part in range(0, max(len(names), 1), 12):
            text = "".join(names[part : part + 12])
            if part == 0:
                lines.append(head + (text if clock is None else f"{text:<36}{clock:12.9f}"))
            else:
                lines.append(" " * 32 + text)
    else:
        head = f"> 2026 03 01 {int(hour):02d} {int(minute):02d}{second:11.7f}  {flag}{len(names):3d}"
        lines.append(head if clock is None else f"{head:<41}{clock:15.12f}")
    for name, record in records:
        fields = [_field(record[kind], record["lli" + kind[1]] if kind[0] == "L" else 0) for kind in kinds]
        if old:
            lines += ["".join(fields[p : p + 5]).rstrip() for p in range(0, len(fields), 5)]
        else:
            lines.append(name + "".join(fields).rstrip())
    return lines


def shifted(satellites: tuple[str, ...] | None, from_epoch: int, **amounts: float) -> Callable[[int, str, dict], None]:
    """Return an edit that adds amounts to observables from an epoch on (all satellites when None)."""

    def edit(k: int, satellite: str, record: dict) -> None:
        if k >= from_epoch and (satellites is None or satellite in satellites):
            for kind, amount in amounts.items():
                record[kind] += amount

    return edit


def at(epoch: int, satellite: str, **values) -> Callable[[int, str, dict], None]:
    """Return an edit that sets observables of one record."""

    def edit(k: int, name: str, record: dict) -> None:
        if k == epoch and name == satellite:
            record.update(values)

    return edit


def noise(sigma_m: float, seed: int) -> Callable[[int, str, dict], None]:
    """Return an edit that adds noise to the codes."""
    random = np.random.default_rng(seed)

    def edit(k: int, satellite: str, record: dict) -> None:
        for kind in ("P1", "P2"):
            record[kind] += sigma_m * random.standard_normal()

    return edit
