"""Bad input, as its reader sees it: the whole text of each message, with place, what was found, what is allowed and what to try."""

from __future__ import annotations

import gzip
import subprocess
import sys

import pytest

from shiftfix.api import run_pipeline

LOG = """shiftfix = 1
[nodes.log]
use = "ingest.delimited"
params.files = ["log.csv"]
params.columns = { time = "t", frequency = "f", sigma = "s" }
params.units = { frequency = "Hz", sigma = "Hz" }
params.time_scale = "UTC"
params.station = "ORREL"
params.nominal_frequency = "158.3 MHz"
"""
ROWS = [f"2026-03-01T12:{k:02d}:00Z,{158300000 + k}.25,0.5" for k in range(8)]
GOOD = "t,f,s\n" + "\n".join(ROWS) + "\n"

BOOK = """[stations.ORREL]
latitude = "-38.91 deg"
longitude = "-23.12 deg"
height = "118 m"
height_kind = "sea level"
undulation = "12 m"
datum = "WGS84"
clock = "pps"
"""

LAST = """
log.csv: unusable rows: 1
    allowed: none with on_bad_row = "refuse"
    try: correct them, or set on_bad_row = "reject" to have them counted and listed"""


def added(row):
    return GOOD + row + "\n"


def every(change):
    return "t,f,s\n" + "\n".join(change(k, *row.split(",")) for k, row in enumerate(ROWS)) + "\n"


LOGS = {
    "no such file": (
        None,
        """log.csv: no such file
    try: correct params.files; it is relative to the pipeline file""",
    ),
    "empty": (
        "",
        """log.csv: the file is empty
    found: 0 bytes
    try: fetch or write it again""",
    ),
    "binary": (
        b"\x7fELF\x02\x01\x00\x00 and so on",
        """log.csv:1: the file is binary
    found: b'\\x7fELF\\x02\\x01\\x00\\x00 and so '
    allowed: delimited text""",
    ),
    "truncated": (
        gzip.compress(GOOD.encode(), mtime=0)[:-12],
        """log.csv: the gzip file is truncated or damaged
    found: Compressed file ended before the end-of-stream marker was reached
    try: fetch it again""",
    ),
    "truncated text": (
        GOOD[:-9],
        """log.csv:9: wrong number of fields in the row: 2, not 3
    found: 2026-03-01T12:07:00Z,15830000"""
        + LAST,
    ),
    "kilohertz": (
        every(lambda k, t, f, s: f"{t},{158300.0 + k / 1e3:.5f},{s}"),
        """log.csv:2: the frequencies are 1000 times too small: is the column in kHz?
    found: median 158300.0035 Hz with the declared unit Hz
    allowed: within 10 % of 158300000 Hz
    try: correct units.frequency""",
    ),
    "megahertz": (
        every(lambda k, t, f, s: f"{t},{158.3 + k / 1e6:.8f},{s}"),
        """log.csv:2: the frequencies are 10^6 times too small: is the column in MHz?
    found: median 158.3000035 Hz with the declared unit Hz
    allowed: within 10 % of 158300000 Hz
    try: correct units.frequency""",
    ),
    "one row in kilohertz": (
        added("2026-03-01T12:09:00Z,158300.01,0.5"),
        """log.csv:10: frequency 158300.01 Hz is 0.001 times the nominal frequency
    found: 2026-03-01T12:09:00Z,158300.01,0.5"""
        + LAST,
    ),
    "time without scale": (
        every(lambda k, t, f, s: f"{t[:-1]},{f},{s}"),
        """log.csv:2: time without scale '2026-03-01T12:00:00': UTC must end in Z, as in 2026-03-01T12:00:00Z
    found: 8 of 8 rows are unusable (8 x time without scale)
    allowed: at most half of the rows; times: iso in UTC ending in Z
    try: correct the declared columns, units and time scale""",
    ),
    "local time": (
        added("2026-03-01T12:09:00+02:00,158300000,0.5"),
        """log.csv:10: local time '2026-03-01T12:09:00+02:00': offsets from UTC are not accepted; write UTC ending in Z
    found: 2026-03-01T12:09:00+02:00,158300000,0.5"""
        + LAST,
    ),
    "day first": (
        every(lambda k, t, f, s: f"01.03.2026 12:{k:02d}:00,{f},{s}"),
        """log.csv:2: day-first or month-first date '01.03.2026 12:00:00': write the year first, as in 2026-03-01T12:00:00Z
    found: 8 of 8 rows are unusable (8 x day-first or month-first date)
    allowed: at most half of the rows; times: iso in UTC ending in Z
    try: correct the declared columns, units and time scale""",
    ),
    "not finite": (
        added("2026-03-01T12:09:00Z,inf,0.5"),
        """log.csv:10: frequency is not a finite number: 'inf'
    found: 2026-03-01T12:09:00Z,inf,0.5"""
        + LAST,
    ),
    "decimal comma": (
        added('2026-03-01T12:09:00Z,"158300000,5",0.5'),
        """log.csv:10: frequency is not a finite number: '158300000,5' has a comma; say decimal = ",", or take out thousands separators
    found: 2026-03-01T12:09:00Z,"158300000,5",0.5"""
        + LAST,
    ),
    "negative sigma": (
        added("2026-03-01T12:09:00Z,158300000,-0.5"),
        """log.csv:10: sigma is not greater than 0: -0.5 Hz
    found: 2026-03-01T12:09:00Z,158300000,-0.5"""
        + LAST,
    ),
    "another column": (
        GOOD.replace("t,f,s", "t,freq,s"),
        """log.csv:1: no column 'f' for frequency
    allowed: t, freq, s""",
    ),
}


@pytest.mark.parametrize("case", LOGS)
def test_bad_log(tmp_path, case):
    content, message = LOGS[case]
    if content is not None:
        (tmp_path / "log.csv").write_bytes(content if isinstance(content, bytes) else content.encode())
    (tmp_path / "p.toml").write_text(LOG)
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4
    assert str(result.error) == message


def test_repeated_file(tmp_path):
    for name in ("log.csv", "copy.csv"):
        (tmp_path / name).write_text(GOOD)
    (tmp_path / "p.toml").write_text(LOG.replace('["log.csv"]', '["log.csv", "copy.csv"]'))
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4
    assert (
        str(result.error)
        == """copy.csv: the same file is given twice
    found: copy.csv holds the same bytes as log.csv and is used once
    try: name it once, or set on_repeat = "ignore\""""
    )


BOOKS = {
    "clashing ids": (
        BOOK.replace("[stations.ORREL]", '[[stations]]\nid = "ORREL"')
        + BOOK.replace("[stations.ORREL]", '[[stations]]\nid = "ORREL"').replace("118", "121"),
        """book.toml:10:1: stations.1: station id 'ORREL' clashes with the entry at book.toml:1:1
    try: give each station its own id, or validity dates that do not overlap""",
    ),
    "no datum": (
        BOOK.replace('datum = "WGS84"\n', ""),
        """book.toml:1:1: stations.ORREL: station without datum
    allowed: WGS84, GRS80, ETRS89 or an ITRF realisation
    try: say on which datum the coordinates are; transform local datums first (they differ by up to 1 km)""",
    ),
    "no undulation": (
        BOOK.replace('undulation = "12 m"\n', ""),
        """book.toml:5:15: stations.ORREL.height_kind: height above sea level without undulation
    try: add undulation = "... m" (geoid above ellipsoid), or give the ellipsoidal height""",
    ),
    "swapped": (
        BOOK.replace("-38.91", "-138.91"),
        """book.toml:2:12: stations.ORREL.latitude: latitude out of range
    found: -138.91 deg
    allowed: -90 to 90 deg
    try: are latitude and longitude swapped?""",
    ),
    "bare number": (
        BOOK.replace('"118 m"', "118"),
        """book.toml:4:10: stations.ORREL.height: bare number 118 where a unit is needed; write it as text with one of: m, km, cm, mm
    found: 118""",
    ),
    "misspelt": (
        BOOK.replace("undulation", "undullation"),
        """book.toml:6:1: stations.ORREL.undullation: unknown field
    found: undullation
    allowed: latitude, longitude, height, height_kind, undulation, datum, x, y, z, frame, vx, vy, vz, epoch, antenna_up, """
        """antenna_east, antenna_north, position_sigma, reference, offset, drift, clock, time_bias, track, valid_from, """
        """valid_until, chain, note
    try: did you mean undulation?
book.toml:5:15: stations.ORREL.height_kind: height above sea level without undulation
    try: add undulation = "... m" (geoid above ellipsoid), or give the ellipsoidal height""",
    ),
}


@pytest.mark.parametrize("case", BOOKS)
def test_bad_book(tmp_path, case):
    content, message = BOOKS[case]
    (tmp_path / "book.toml").write_text(content)
    (tmp_path / "p.toml").write_text('shiftfix = 1\n[nodes.s]\nuse = "ingest.stations"\nparams.file = "book.toml"\n')
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4
    assert str(result.error) == message


def test_the_command_line_says_the_same_and_exits_with_four(tmp_path):
    (tmp_path / "log.csv").write_text(LOGS["negative sigma"][0])
    (tmp_path / "p.toml").write_text(LOG)
    command = [sys.executable, "-m", "shiftfix.cli.main", "run", "p.toml"]
    answer = subprocess.run(command, capture_output=True, text=True, cwd=tmp_path, timeout=120)
    assert answer.returncode == 4, answer.stderr
    assert LOGS["negative sigma"][1] in answer.stderr and "Traceback" not in answer.stderr
    assert answer.stdout == ""
