"""Keywords of the tracking data message: their order, the kind of their values, and their closed lists.

References
----------
CCSDS 503.0-B-2, Tracking Data Message, June 2020 with Corrigendum 1 (October 2021): tables 3-2 and 3-3, section 3.5;
the lists of values as in the schema of the message (NDM/XML 2.0.0). Which keywords version 1.0 lacks: section 1.2.6.6.
"""

from __future__ import annotations

import re
from collections.abc import Callable

from shiftfix_ingest.ccsds_values import NUMBER_RULE

VERSIONS = ("1.0", "2.0")
HEADER = ("CREATION_DATE", "ORIGINATOR", "MESSAGE_ID")
# Rank in table 3-3; keywords of one rank may stand in any order.
_ORDER = (
    ("TRACK_ID",), ("DATA_TYPES",), ("TIME_SYSTEM",), ("START_TIME",), ("STOP_TIME",), ("PARTICIPANT",), ("MODE",),
    ("PATH", "PATH_1", "PATH_2"), ("EPHEMERIS_NAME",), ("TRANSMIT_BAND",), ("RECEIVE_BAND",), ("TURNAROUND_NUMERATOR",),
    ("TURNAROUND_DENOMINATOR",), ("TIMETAG_REF",), ("INTEGRATION_INTERVAL",), ("INTEGRATION_REF",), ("FREQ_OFFSET",),
    ("RANGE_MODE",), ("RANGE_MODULUS",), ("RANGE_UNITS",), ("ANGLE_TYPE",), ("REFERENCE_FRAME",), ("INTERPOLATION",),
    ("INTERPOLATION_DEGREE",), ("DOPPLER_COUNT_BIAS",), ("DOPPLER_COUNT_SCALE",), ("DOPPLER_COUNT_ROLLOVER",),
    ("TRANSMIT_DELAY", "RECEIVE_DELAY"), ("DATA_QUALITY",),
    ("CORRECTION_ANGLE_1", "CORRECTION_ANGLE_2", "CORRECTION_DOPPLER", "CORRECTION_MAG", "CORRECTION_RANGE",
     "CORRECTION_RCS", "CORRECTION_RECEIVE", "CORRECTION_TRANSMIT", "CORRECTION_ABERRATION_YEARLY",
     "CORRECTION_ABERRATION_DIURNAL"),
    ("CORRECTIONS_APPLIED",),
)  # fmt: skip
RANK = {name: k for k, names in enumerate(_ORDER) for name in names}
INDEXED = ("PARTICIPANT", "EPHEMERIS_NAME", "TRANSMIT_DELAY", "RECEIVE_DELAY")
TIME_SYSTEMS = (
    "UTC", "TAI", "GPS", "TT", "TDB", "TCB", "TCG", "UT1", "GMST", "MET", "MRT", "SCLK", "TOD", "TDT", "BDT", "GLO",
    "GAL", "QZS",
)  # fmt: skip
CONVERTIBLE = ("UTC", "TAI", "GPS", "TT")
CHOICES = {
    "MODE": ("SEQUENTIAL", "SINGLE DIFF"),
    "TIMETAG_REF": ("TRANSMIT", "RECEIVE"),
    "INTEGRATION_REF": ("START", "MIDDLE", "END"),
    "RANGE_MODE": ("COHERENT", "CONSTANT", "ONE WAY"),
    "RANGE_UNITS": ("KM", "S", "RU"),
    "ANGLE_TYPE": ("AZEL", "RADEC", "XEYN", "XSYE"),
    "DOPPLER_COUNT_ROLLOVER": ("YES", "NO"),
    "DATA_QUALITY": ("RAW", "VALIDATED", "DEGRADED"),
    "CORRECTIONS_APPLIED": ("YES", "NO"),
    "TIME_SYSTEM": TIME_SYSTEMS,
}
KINDS: dict[str, tuple[str, Callable[[float], bool]]] = {
    "number": (NUMBER_RULE, lambda v: True),
    "positive": ("a number greater than 0", lambda v: v > 0),
    "nonnegative": ("a number of at least 0", lambda v: v >= 0),
    "angle": ("from -180 to below 360 deg", lambda v: -180 <= v < 360),
    "percent": ("from 0 to 100 %", lambda v: 0 <= v <= 100),
}
META_KIND = {
    "INTEGRATION_INTERVAL": "positive", "FREQ_OFFSET": "number", "RANGE_MODULUS": "nonnegative",
    "DOPPLER_COUNT_BIAS": "positive",
    "TRANSMIT_DELAY": "nonnegative", "RECEIVE_DELAY": "nonnegative",
}  # fmt: skip
META_INTEGER = ("TURNAROUND_NUMERATOR", "TURNAROUND_DENOMINATOR", "INTERPOLATION_DEGREE", "DOPPLER_COUNT_SCALE")
# Keyword of a record: kind of its value; indexed keywords are listed by their stem.
DATA_INDEXED_KIND = {
    "TRANSMIT_FREQ": "positive", "TRANSMIT_FREQ_RATE": "number", "RECEIVE_FREQ": "number", "RECEIVE_PHASE_CT": "number",
    "TRANSMIT_PHASE_CT": "number",
}  # fmt: skip
DATA_KIND = {
    "RECEIVE_FREQ": "number", "DOPPLER_INSTANTANEOUS": "number", "DOPPLER_INTEGRATED": "number",
    "DOPPLER_COUNT": "nonnegative",
    "CARRIER_POWER": "number", "PC_N0": "number", "PR_N0": "number", "RANGE": "number", "ANGLE_1": "angle",
    "ANGLE_2": "angle",
    "CLOCK_BIAS": "number", "CLOCK_DRIFT": "number", "STEC": "nonnegative", "TROPO_DRY": "nonnegative",
    "TROPO_WET": "nonnegative",
    "PRESSURE": "number", "RHUMIDITY": "percent", "TEMPERATURE": "positive", "DOR": "number", "VLBI_DELAY": "number",
    "MAG": "number", "RCS": "positive",
}  # fmt: skip
NEW_IN_2 = (
    "MESSAGE_ID",
    "TRACK_ID",
    "DATA_TYPES",
    "EPHEMERIS_NAME",
    "INTERPOLATION",
    "DOPPLER_COUNT",
    "PHASE_CT",
    "MAG",
    "RCS",
)


def stem_and_index(keyword: str) -> tuple[str, int]:
    """Return an indexed keyword as stem and index; index 0 for one without."""
    match = re.fullmatch(r"(.+)_([1-5])", keyword)
    if match and (match[1] in INDEXED or match[1] in DATA_INDEXED_KIND):
        return match[1], int(match[2])
    return keyword, 0
