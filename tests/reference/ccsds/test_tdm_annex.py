"""Annex E of CCSDS 503.0-B-2 (June 2020): the same data without and with FREQ_OFFSET are the same frequencies."""

from __future__ import annotations

import csv
from decimal import Decimal
from pathlib import Path

import pytest

from shiftfix.api import tai_ns_from_utc
from shiftfix_ingest.tdm_message import Entry, Message, Record, Segment
from shiftfix_ingest.tdm_rows import _frequencies, nominal_steps, segment_rows

FILE = Path(__file__).with_name("one_way_ka.csv")
TRANSMITTED_HZ = 32023442781.733  # figure E-1, TRANSMIT_FREQ_2


class Params:
    nominal_frequency = None
    stations: dict = {}
    emitters: dict = {}
    corrections = "applied"


def annex(column, offset, **more):
    values = {
        "TIME_SYSTEM": "UTC", "PARTICIPANT_1": "DSS-25", "PARTICIPANT_2": "yyyy-nnnA", "MODE": "SEQUENTIAL",
        "PATH": "2,1",
        "INTEGRATION_INTERVAL": "1.0", "INTEGRATION_REF": "MIDDLE", "FREQ_OFFSET": offset,
        "RECEIVE_DELAY_1": "0.000077", **more,
    }  # fmt: skip
    segment = Segment(5, [Entry(k, v, n) for n, (k, v) in enumerate(values.items(), 6)])
    segment.records = [Record("TRANSMIT_FREQ_2", "2005-159T17:41:00", str(TRANSMITTED_HZ), 20)]
    with FILE.open() as lines:
        for k, row in enumerate(csv.DictReader(lines)):
            segment.records.append(
                Record("RECEIVE_FREQ_1", f"2005-159T17:41:{int(row['seconds_s']):02d}", row[column], 21 + k)
            )
    return segment_rows(segment, "segment 1", "annex", Params, nominal_steps([Message(segments=[segment])])).frame()


def test_offset_equivalence_over_thirty_epochs():
    plain, shifted = annex("without_offset_hz", "0"), annex("with_offset_hz", "32021035200.0")
    assert len(plain) == len(shifted) == 30
    difference = plain.received_frequency_hz - shifted.received_frequency_hz
    # Both are decimals of 4 places; a double resolves 3.8e-6 Hz at 32 GHz, and exact sums round to the same double.
    assert difference.abs().max() == 0.0


def test_first_doppler_and_time():
    plain = annex("without_offset_hz", "0")
    # Dm = Ft - Fr, positive when receding (section 3.5.2.8): 2407991.0065 Hz, range rate 22.54278 km/s.
    shift = plain.nominal_frequency_hz[0] - plain.received_frequency_hz[0]
    assert shift == pytest.approx(2407991.0065, abs=1e-5)
    assert 299792.458 * shift / TRANSMITTED_HZ == pytest.approx(22.54278, abs=5e-6)
    assert plain.time_tai_ns[0] == tai_ns_from_utc("2005-06-08T17:41:00Z") - 77_000


def test_sixty_second_offset():
    """Figure E-20: 8427221784.667 + 60255.16982 = 8427282039.83682 Hz (the sum in decimals)."""


    segment = Segment(1)

    segment.metadata = [Entry("FREQ_OFFSET", "8427221784.667", 2)]
    value = _frequencies(
        segment, [Record("RECEIVE_FREQ_1", "2010-049T16:49:43.000", "60255.16982", 3)], False, None, "applied"
    )[0]
    assert value == float(Decimal("8427282039.83682"))
