"""Parameters of the node `ingest.delimited`."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import param

TEXT_ROLES = ("time", "date", "week", "station", "emitter", "arc", "phase_arc")
UNIT = {
    "frequency": "Hz",
    "sigma": "Hz",
    "interval": "s",
    "cn0": "dBHz",
    "rate": "Hz/s",
    "nominal": "Hz",
    "dial": "Hz",
}
"""SI unit of each role that is a number."""

ROLES = (*TEXT_ROLES, *UNIT)


@dataclass(frozen=True)
class DelimitedParams:
    """Parameters of `ingest.delimited`."""

    files: tuple = param("text files, plain or gzip", path="files")
    columns: dict = param(
        "what stands where: role = header name, or number from 1; roles " + ", ".join(ROLES), default={}
    )
    extra: dict = param("further columns that pass through: name with unit suffix = header name", default={})
    units: dict = param('unit of a column by role, such as { frequency = "kHz" }', default={})
    time_scale: str = param("scale of the time column", default="", choices=("UTC", "TAI", "TT", "GPS"))
    time_format: str = param(
        "iso: calendar or day-of-year text; gps: week and count of the week; posix: count since 1970 without leap seconds",
        default="iso",
        choices=("iso", "gps", "posix"),
    )
    unmarked_utc: bool = param(
        "whether UTC times may lack their Z, because the receiver is known to log UTC", default=False
    )
    time_tag: str = param("which instant of the interval the tag names", default="", choices=("start", "middle", "end"))
    interval: float = param(
        "length of the count interval where no column has it; 0 for instantaneous values",
        default=0.0,
        unit="s",
        minimum=0.0,
    )
    delay: float = param("time by which the tags are late (receiver delay), taken off", default=0.0, unit="s")
    nominal_frequency: float | None = param("nominal frequency of the channel", default=None, unit="Hz", minimum=1.0)
    frequency_kind: str = param(
        "sky: received frequency; offset: received minus nominal; audio: tone behind the receiver chain and the dial",
        default="sky",
        choices=("sky", "offset", "audio"),
    )
    chain: tuple[dict, ...] = param(
        'converters from antenna to tone: { lo = "10 MHz", side = "upper" } each, in order; '
        "without it the chain of the station book, where `stations` is connected",
        default=(),
    )
    dial: float | None = param(
        "frequency that the receiver was tuned to, where no column has it", default=None, unit="Hz", minimum=1.0
    )
    sideband: str = param("side of the dial on which the signal lies", default="", choices=("upper", "lower"))
    sigma: float | None = param("1-sigma where no column has it or its field is empty", default=None, unit="Hz")
    station: str = param("station of all rows where no column has it or its field is empty", default="")
    emitter: str = param("emitter of all rows where no column has it or its field is empty", default="")
    separator: str = param(
        "field separator: one character, or `whitespace`; empty: found from the first line", default=""
    )
    decimal: str = param("decimal mark", default=".", choices=(".", ","))
    comment: str = param("lines that begin with it are left out", default="#")
    header: bool = param("whether the first line names the columns", default=True)
    skip: int = param("lines before the header that are left out", default=0, minimum=0)
    encoding: str = param(
        "of the text; UTF-16 is known by its byte order mark", default="utf-8", choices=("utf-8", "latin-1")
    )
    on_bad_row: str = param(
        "refuse: unusable rows refuse the file; reject: they are counted and listed, up to half of a file",
        default="refuse",
        choices=("refuse", "reject"),
    )
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )
