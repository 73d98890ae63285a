"""Header of a RINEX observation file: version, marker, observation codes of each system, time system.

References
----------
RINEX: The Receiver Independent Exchange Format, versions 2.11 and 3.04, IGS/RTCM: record descriptions. Version 4
differs in navigation files only and is read like version 3.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from shiftfix.api import Problem

SCALES = {
    "GPS": ("GPS", 0),
    "GAL": ("GPS", 0),
    "QZS": ("GPS", 0),
    "GLO": ("UTC", 0),
    "UTC": ("UTC", 0),
    "BDT": ("GPS", 14),
}
"""Time system of a file to our scale and the seconds by which it runs behind that scale (BDT = GPS - 14 s)."""

_LABEL = 60
_DEFAULT_SCALE = {"G": "GPS", "R": "GLO", "E": "GAL", "C": "BDT", "J": "QZS", "S": "GPS", " ": "GPS"}


@dataclass
class Header:
    """What the reader needs of a header.

    Parameters
    ----------
    version : float
    system : str
        One letter; M for mixed.
    marker : str
    codes : dict of str to list of str
        Observation codes in file order by system letter; in version 2 one list under "*".
    time_system : str
        A key of `SCALES`.
    clock_applied : bool
        Whether the receiver clock offsets are applied to tags and observables already.
    position_m : tuple of float or None
        APPROX POSITION XYZ, for the check that two files are of one station; never used as a coordinate.
    cn0_unit : str
        As in SIGNAL STRENGTH UNIT, empty when not given.
    lines : int
        Number of lines up to and with END OF HEADER.
    """

    version: float = 0.0
    system: str = " "
    marker: str = ""
    codes: dict[str, list[str]] = field(default_factory=dict)
    time_system: str = ""
    clock_applied: bool = False
    position_m: tuple[float, ...] | None = None
    cn0_unit: str = ""
    lines: int = 0
    _open: dict[str, int] = field(default_factory=dict)
    _system: str = ""

    def codes_of(self, system: str) -> list[str]:
        """Return the observation codes of one system."""
        return self.codes.get("*" if self.version < 3 else system, [])


def read_header(lines: list[str], name: str) -> tuple[Header, list[Problem]]:
    """Return the header of the lines of a file and all problems in it."""
    header = Header()
    first = lines[0] if lines else ""
    if first[_LABEL:].strip() != "RINEX VERSION / TYPE":
        return header, [
            Problem(
                f"{name}:1",
                "not a RINEX file",
                found=repr(first.strip()[:70]),
                allowed="'RINEX VERSION / TYPE' in columns 61-80 of the first line",
            )
        ]
    try:
        header.version = float(first[:9])
    except ValueError:
        return header, [
            Problem(f"{name}:1", "RINEX version cannot be read", found=repr(first[:20]), allowed="2.xx, 3.xx or 4.xx")
        ]
    if not 2.0 <= header.version < 5.0:
        return header, [
            Problem(f"{name}:1", "unsupported RINEX version", found=first[:9].strip(), allowed="2.xx, 3.xx or 4.xx")
        ]
    kind = first[20:21].upper()
    if kind != "O":
        kinds = {
            "N": "a navigation file",
            "G": "a GLONASS navigation file",
            "M": "a meteorological file",
            "C": "a clock file",
        }
        return header, [
            Problem(
                f"{name}:1",
                "not an observation file",
                found=kinds.get(kind, repr(first[20:40].strip())),
                allowed="OBSERVATION DATA",
                remedy="name the observation file in params.files (as in *.??o, *.rnx, *.crx)",
            )
        ]
    header.system = first[40:41].upper()
    problems: list[Problem] = []
    for number, line in enumerate(lines[1:], 2):
        label = line[_LABEL:80].strip()
        if label == "END OF HEADER":
            header.lines = number
            break
        problem = take_line(header, line, f"{name}:{number}")
        if problem:
            problems.append(problem)
    else:
        problems.append(
            Problem(
                f"{name}:{len(lines)}",
                "the file ends within its header",
                allowed="END OF HEADER",
                remedy="fetch the file again",
            )
        )
        return header, problems
    problems += incomplete_codes(header, f"{name}:{header.lines}")
    if not header.time_system:
        header.time_system = _DEFAULT_SCALE.get(header.system, "")
        if not header.time_system:
            problems.append(
                Problem(
                    f"{name}:{header.lines}",
                    "mixed file without time system",
                    allowed=f"{', '.join(SCALES)} in TIME OF FIRST OBS",
                )
            )
    elif header.time_system not in SCALES:
        problems.append(
            Problem(
                f"{name}:{header.lines}", "unknown time system", found=header.time_system, allowed=", ".join(SCALES)
            )
        )
    return header, problems


def take_line(header: Header, line: str, where: str) -> Problem | None:
    """Take up one header line (also one that stands between epochs); return a problem when it cannot be read."""
    label = line[_LABEL:80].strip()
    try:
        if label == "# / TYPES OF OBSERV":
            if line[:6].strip():
                header.codes["*"] = []
                header._open["*"] = int(line[:6])
            header.codes["*"] += line[6:_LABEL].split()
        elif label == "SYS / # / OBS TYPES":
            if line[:1].strip():
                header._system = line[0]
                header.codes[header._system] = []
                header._open[header._system] = int(line[3:6])
            header.codes[header._system] += line[6:_LABEL].split()
        elif label == "MARKER NAME":
            header.marker = line[:_LABEL].strip()
        elif label == "TIME OF FIRST OBS":
            header.time_system = line[48:51].strip() or header.time_system
        elif label == "RCV CLOCK OFFS APPL":
            header.clock_applied = line[:6].strip() == "1"
        elif label == "SIGNAL STRENGTH UNIT":
            header.cn0_unit = line[:20].strip().upper()
        elif label == "APPROX POSITION XYZ":
            header.position_m = tuple(float(line[a : a + 14]) for a in (0, 14, 28))
    except (ValueError, KeyError):
        return Problem(where, f"header line {label!r} cannot be read", found=line[:_LABEL].rstrip())
    return None


def incomplete_codes(header: Header, where: str) -> list[Problem]:
    """Return a problem for each system whose list of codes is missing or has not the announced length."""
    if not header.codes:
        label = "# / TYPES OF OBSERV" if header.version < 3 else "SYS / # / OBS TYPES"
        return [Problem(where, "the header lists no observation codes", allowed=label)]
    return [
        Problem(
            where,
            "list of observation codes incomplete",
            found=f"{len(codes)} codes",
            allowed=f"{header._open[system]}",
        )
        for system, codes in header.codes.items()
        if len(codes) != header._open[system]
    ]
