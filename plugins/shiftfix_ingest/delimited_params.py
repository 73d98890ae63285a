"""Parameters of the node `ingest.delimited`."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import param

ROLES = ("time", "frequency", "station", "emitter", "sigma", "interval", "cn0", "rate", "arc", "phase_arc", "week")


@dataclass(frozen=True)
class DelimitedParams:
    """Parameters of `ingest.delimited`."""

    files: tuple = param("text files, plain or gzip", path="files")
    columns: dict = param("what stands where: role = header name, or number from 1 without a header", default={})
    extra: dict = param("further columns that pass through: name with unit suffix = header name", default={})
    units: dict = param('unit of a column by role, such as { frequency = "kHz" }', default={})
    time_scale: str = param("scale of the time column", default="", choices=("UTC", "TAI", "TT", "GPS"))
    time_format: str = param(
        "iso: calendar or day-of-year text; gps: week and seconds of week", default="iso", choices=("iso", "gps")
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
        "sky: received frequency; offset: received minus `nominal_frequency`; audio: tone behind the receiver chain",
        default="sky",
        choices=("sky", "offset", "audio"),
    )
    chain: tuple[dict, ...] = param(
        'converters from antenna to tone: { lo = "10 MHz", side = "upper" } each, in order', default=()
    )
    sigma: float | None = param("1-sigma where no column has it", default=None, unit="Hz", minimum=0.0)
    station: str = param("station of all rows where no column has it", default="")
    emitter: str = param("emitter of all rows where no column has it", default="")
    separator: str = param("field separator; empty: found from the first line", default="")
    decimal: str = param("decimal mark", default=".", choices=(".", ","))
    comment: str = param("lines that begin with it are left out", default="#")
    header: bool = param("whether the first line names the columns", default=True)
    on_bad_row: str = param(
        "refuse: unusable rows refuse the file; reject: they are counted and listed",
        default="refuse",
        choices=("refuse", "reject"),
    )
    on_repeat: str = param(
        "refuse: the same file twice is an error; ignore: it is used once and noted",
        default="refuse",
        choices=("refuse", "ignore"),
    )
