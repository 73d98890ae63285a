# ruff: noqa: E501 - one broken rule a line
"""The must-reject list of the tracking data message: each broken rule is named with line and section."""

from __future__ import annotations

import pytest

from shiftfix.api import InputError
from shiftfix_ingest.tdm import TdmParams, read_tdm

GOOD = """CCSDS_TDM_VERS = 2.0
COMMENT made for a test
CREATION_DATE = 2026-03-02T00:00:00Z
ORIGINATOR = VELDANE
META_START
COMMENT one station
TIME_SYSTEM = UTC
PARTICIPANT_1 = MERR
PARTICIPANT_2 = KITE
MODE = SEQUENTIAL
PATH = 2,1
INTEGRATION_INTERVAL = 10.0
INTEGRATION_REF = MIDDLE
RECEIVE_DELAY_1 = 0.000077
DATA_QUALITY = RAW
META_STOP
DATA_START
COMMENT the data
TRANSMIT_FREQ_2 = 2026-03-01T06:00:00 437150000.0
RECEIVE_FREQ_1 = 2026-03-01T06:00:10 437158912.4375
RECEIVE_FREQ_1 = 2026-03-01T06:00:20 437158411.28
DATA_STOP
"""

# what is replaced, by what, line of the message, its words, and the section that it names
BROKEN = {
    "version missing": ("CCSDS_TDM_VERS = 2.0\n", "", 1, "not a tracking data message", "table 3-2"),
    "version not first": ("CCSDS_TDM_VERS = 2.0\nCOMMENT", "COMMENT first\nCCSDS_TDM_VERS = 2.0\nCOMMENT", 1, "not a tracking", "table 3-2"),
    "version unknown": ("VERS = 2.0", "VERS = 3.0", 1, "unsupported version", "table 3-2"),
    "creation date missing": ("CREATION_DATE = 2026-03-02T00:00:00Z\n", "", 1, "CREATION_DATE is missing", "table 3-2"),
    "originator missing": ("ORIGINATOR = VELDANE\n", "", 1, "ORIGINATOR is missing", "table 3-2"),
    "header order": ("CREATION_DATE = 2026-03-02T00:00:00Z\nORIGINATOR = VELDANE", "ORIGINATOR = VELDANE\nCREATION_DATE = 2026-03-02T00:00:00Z", 4, "out of order", "table 3-2"),
    "header keyword": ("ORIGINATOR = VELDANE", "ORIGINATOR = VELDANE\nAUTHOR = ME", 5, "unknown keyword in the header", "table 3-2"),
    "time system missing": ("TIME_SYSTEM = UTC\n", "", 5, "TIME_SYSTEM is missing", "table 3-3"),
    "time system unknown": ("= UTC", "= CET", 7, "outside its list", "table 3-3"),
    "participants missing": ("PARTICIPANT_1 = MERR\nPARTICIPANT_2 = KITE\n", "", 5, "PARTICIPANT_n is missing", "table 3-3"),
    "participant repeated": ("PARTICIPANT_2 = KITE", "PARTICIPANT_1 = KITE", 9, "PARTICIPANT_1 is repeated", "table 3-3"),
    "participant 6": ("PARTICIPANT_2 = KITE", "PARTICIPANT_2 = KITE\nPARTICIPANT_6 = X", 10, "unknown keyword in the metadata", "3.3.1.7"),
    "metadata keyword": ("MODE = SEQ", "COLOUR = RED\nMODE = SEQ", 10, "unknown keyword in the metadata", "3.3.1.7"),
    "metadata order": ("MODE = SEQUENTIAL\nPATH = 2,1", "PATH = 2,1\nMODE = SEQUENTIAL", 11, "MODE out of order", "table 3-3"),
    "path participant": ("PATH = 2,1", "PATH = 3,1", 11, "participant that is not defined", "table 3-3"),
    "path blank": ("PATH = 2,1", "PATH = 2, 1", 11, "PATH cannot be read", "table 3-3"),
    "path with difference": ("MODE = SEQUENTIAL", "MODE = SINGLE_DIFF", 11, "PATH without MODE = SEQUENTIAL", "table 3-3"),
    "path without mode": ("MODE = SEQUENTIAL\n", "", 10, "PATH without MODE = SEQUENTIAL", "table 3-3"),
    "mode without path": ("PATH = 2,1\n", "", 10, "MODE without a path", "table 3-3"),
    "paths with sequential": ("PATH = 2,1", "PATH_1 = 2,1\nPATH_2 = 1,2", 11, "PATH_1 without MODE = SINGLE_DIFF", "table 3-3"),
    "one of two paths": ("MODE = SEQUENTIAL\nPATH = 2,1", "MODE = SINGLE_DIFF\nPATH_1 = 2,1", 11, "PATH_1 and PATH_2 go together", "table 3-3"),
    "receive band": ("MODE = SEQUENTIAL\nPATH = 2,1", "MODE = SINGLE_DIFF\nPATH_1 = 2,1\nPATH_2 = 1,2", 5, "RECEIVE_BAND is missing", "table 3-3"),
    "correction unexplained": ("DATA_QUALITY = RAW", "DATA_QUALITY = RAW\nCORRECTION_RECEIVE = 1.0", 5, "CORRECTIONS_APPLIED is missing", "table 3-3"),
    "interpolation degree": ("RECEIVE_DELAY_1", "INTERPOLATION = HERMITE\nRECEIVE_DELAY_1", 5, "INTERPOLATION_DEGREE is missing", "table 3-3"),
    "interval zero": ("INTERVAL = 10.0", "INTERVAL = 0.0", 12, "INTEGRATION_INTERVAL has a wrong value", "table 3-3"),
    "interval negative": ("INTERVAL = 10.0", "INTERVAL = -10.0", 12, "INTEGRATION_INTERVAL has a wrong value", "table 3-3"),
    "interval without reference": ("INTEGRATION_REF = MIDDLE\n", "", 5, "INTEGRATION_REF is missing", "table 3-3"),
    "reference unknown": ("= MIDDLE", "= CENTRE", 13, "INTEGRATION_REF has a value outside", "table 3-3"),
    "quality unknown": ("= RAW", "= FINE", 15, "DATA_QUALITY has a value outside", "table 3-3"),
    "mode unknown": ("= SEQUENTIAL", "= SERIAL", 10, "MODE has a value outside", "table 3-3"),
    "delay negative": ("= 0.000077", "= -0.000077", 14, "RECEIVE_DELAY_1 has a wrong value", "table 3-3"),
    "transmit negative": ("437150000.0", "-437150000.0", 19, "TRANSMIT_FREQ_2 has a wrong value", "3.5"),
    "angle": ("RECEIVE_FREQ_1 = 2026-03-01T06:00:20 437158411.28", "ANGLE_1 = 2026-03-01T06:00:20 360.0", 21, "ANGLE_1 has a wrong value", "3.5"),
    "nan": ("437158912.4375", "NaN", 20, "RECEIVE_FREQ_1 is not a number", "4.3.5"),
    "infinite": ("437158912.4375", "Inf", 20, "RECEIVE_FREQ_1 is not a number", "4.3.5"),
    "decimal comma": ("437158912.4375", "437158912,4375", 20, "RECEIVE_FREQ_1 is not a number", "4.3.5"),
    "bare point": ("437158912.4375", "437158912.", 20, "RECEIVE_FREQ_1 is not a number", "4.3.5"),
    "long line": ("COMMENT the data", "COMMENT " + "x" * 250, 18, "line too long", "503.0-B-2"),
    "tab": ("PATH = 2,1", "PATH =\t2,1", 11, "character that is not allowed", "503.0-B-2"),
    "umlaut": ("VELDANE", "VELDÄNE", 4, "character that is not allowed", "503.0-B-2"),
    "comment in data": ("RECEIVE_FREQ_1 = 2026-03-01T06:00:20", "COMMENT late\nRECEIVE_FREQ_1 = 2026-03-01T06:00:20", 21, "comment out of place", "4.5.2"),
    "comment in metadata": ("MODE = SEQ", "COMMENT late\nMODE = SEQ", 10, "comment out of place", "4.5.2"),
    "same tag twice": ("06:00:20", "06:00:10", 21, "RECEIVE_FREQ_1 twice at one time", "3.4.11"),
    "backwards": ("06:00:20", "06:00:05", 21, "RECEIVE_FREQ_1 goes back in time", "3.4.10"),
    "calendar": ("2026-03-01T06:00:20", "2026-02-29T06:00:20", 21, "epoch of RECEIVE_FREQ_1 cannot be read", "4.3.9"),
    "day 366": ("2026-03-01T06:00:20", "2026-366T06:00:20", 21, "epoch of RECEIVE_FREQ_1 cannot be read", "4.3.9"),
    "no seconds": ("T06:00:20", "T06:01", 21, "epoch of RECEIVE_FREQ_1 cannot be read", "4.3.9"),
    "not padded": ("T06:00:20", "T6:00:20", 21, "epoch of RECEIVE_FREQ_1 cannot be read", "4.3.9"),
    "local time": ("T06:00:20", "T06:00:20+01:00", 21, "epoch of RECEIVE_FREQ_1 cannot be read", "4.3.9"),
    "creation date": ("2026-03-02T00:00:00Z", "02.03.2026", 3, "epoch of CREATION_DATE cannot be read", "4.3.9"),
    "empty value": ("VELDANE", "", 4, "ORIGINATOR has no value", "503.0-B-2"),
    "no value of a record": (" 437158411.28", "", 21, "needs a time tag and one value", "3.4"),
    "unit shown": ("437158411.28", "437158411.28 [Hz]", 21, "needs a time tag and one value", "3.4"),
    "data keyword": ("RECEIVE_FREQ_1 = 2026-03-01T06:00:20", "RECEIVED_FREQ = 2026-03-01T06:00:20", 21, "unknown keyword in the data", "3.5"),
    "index 6": ("RECEIVE_FREQ_1 = 2026-03-01T06:00:20", "RECEIVE_FREQ_6 = 2026-03-01T06:00:20", 21, "unknown keyword in the data", "3.5"),
    "no meta stop": ("META_STOP\n", "", 16, "DATA_START out of place", "3.1"),
    "no data start": ("DATA_START\n", "", 17, "comment out of place", "4.5.2"),
    "no data stop": ("DATA_STOP\n", "", 21, "the message ends without DATA_STOP", "3.1"),
    "empty data": ("TRANSMIT_FREQ_2 = 2026-03-01T06:00:00 437150000.0\nRECEIVE_FREQ_1 = 2026-03-01T06:00:10 437158912.4375\nRECEIVE_FREQ_1 = 2026-03-01T06:00:20 437158411.28\n", "", 5, "the data section is empty", "3.1"),
    "after the end": ("DATA_STOP\n", "DATA_STOP\nPATH = 2,1\n", 23, "PATH outside metadata and data", "3.1"),
    "lower case": ("PATH = 2,1", "path = 2,1", 11, "line is no assignment", "4.2"),
    "integrated without interval": ("INTEGRATION_INTERVAL = 10.0\nINTEGRATION_REF = MIDDLE\n", "", 5, "INTEGRATION_INTERVAL is missing", "table 3-3"),
    "new keyword in 1.0": ("2.0\nCOMMENT made for a test\n", "1.0\n", 4, "keyword of version 2.0", "1.2.6.6"),
}  # fmt: skip


@pytest.fixture
def problems(tmp_path, context):
    def run(text):
        path = tmp_path / "log.tdm"
        path.write_text(text, encoding="utf-8")
        try:
            read_tdm({}, TdmParams(files=(path,), sigma=1.0), context)
        except InputError as error:
            return [str(p) for p in error.problems]
        return []

    return run


def test_the_message_that_is_broken_below_is_good(problems):
    assert problems(GOOD) == []


@pytest.mark.parametrize("case", BROKEN)
def test_broken_rule_is_named(problems, case):
    old, new, line, words, rule = BROKEN[case]
    assert GOOD.count(old) >= 1
    text = GOOD.replace(old, new, 1)
    if case == "integrated without interval":
        text = text.replace("RECEIVE_FREQ_1", "DOPPLER_INTEGRATED").replace("4371589", "1.5 4371")[:0] + text.replace(
            "RECEIVE_FREQ_1 =", "DOPPLER_INTEGRATED ="
        )
    if case == "new keyword in 1.0":
        text = text.replace("VELDANE\n", "VELDANE\nMESSAGE_ID = 7\n")
    found = problems(text)
    assert any(f"log.tdm:{line}: " in p and words in p and rule in p for p in found), "\n".join(found)


def test_all_rules_are_named_at_once(problems):
    text = GOOD
    for case in ("header keyword", "reference unknown", "delay negative", "nan", "same tag twice"):
        text = text.replace(*BROKEN[case][:2], 1)
    assert len(problems(text)) == 5


def test_xml_follows_the_same_rules(tmp_path, context):
    text = """<?xml version="1.0" encoding="UTF-8"?>
<tdm id="CCSDS_TDM_VERS" version="2.0">
<header><CREATION_DATE>2026-03-02T00:00:00</CREATION_DATE><ORIGINATOR>V</ORIGINATOR></header>
<body><segment><metadata>
<TIME_SYSTEM>UTC</TIME_SYSTEM>
<PARTICIPANT_1>MERR</PARTICIPANT_1>
<MODE>SERIAL</MODE>
<PATH>2,1</PATH>
</metadata><data>
<observation><EPOCH>2026-03-01T06:00:10</EPOCH><RECEIVE_FREQ_1>NaN</RECEIVE_FREQ_1></observation>
<observation><EPOCH>2026-03-01T06:00:20</EPOCH><RECEIVE_FREQ_1>1.0</RECEIVE_FREQ_1><RANGE>2.0</RANGE></observation>
</data></segment></body></tdm>
"""
    path = tmp_path / "log.xml"
    path.write_text(text)
    with pytest.raises(InputError) as caught:
        read_tdm({}, TdmParams(files=(path,)), context)
    found = str(caught.value)
    for expected in (
        "log.xml:7: MODE has a value",
        "log.xml:8: PATH names a participant",
        "log.xml:10: RECEIVE_FREQ_1 is not a number",
        "log.xml:11: observation of EPOCH and one keyword",
    ):
        assert expected in found, expected
