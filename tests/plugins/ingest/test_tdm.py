"""Tracking data messages to frequencies: values, conventions of time, and the account of every record."""

from __future__ import annotations

import gzip

import numpy as np
import pytest

from shiftfix.api import InputError, tai_ns_from_utc
from shiftfix_ingest.tdm import TdmParams, read_tdm

C = 299792458.0
META = {
    "TIME_SYSTEM": "UTC", "PARTICIPANT_1": "Cape Merrow", "PARTICIPANT_2": "KITE-4", "MODE": "SEQUENTIAL",
    "PATH": "2,1",
    "INTEGRATION_INTERVAL": "10.0", "INTEGRATION_REF": "MIDDLE",
}  # fmt: skip
ORDER = (
    "TIME_SYSTEM", "START_TIME", "STOP_TIME", "PARTICIPANT_1", "PARTICIPANT_2", "PARTICIPANT_3", "MODE", "PATH",
    "PATH_1", "PATH_2",
    "RECEIVE_BAND", "TIMETAG_REF", "INTEGRATION_INTERVAL", "INTEGRATION_REF", "FREQ_OFFSET", "TRANSMIT_DELAY_1",
    "TRANSMIT_DELAY_2",
    "RECEIVE_DELAY_1", "RECEIVE_DELAY_2", "DATA_QUALITY", "CORRECTION_DOPPLER", "CORRECTION_RECEIVE",
    "CORRECTIONS_APPLIED",
)  # fmt: skip
DATA = (
    ("TRANSMIT_FREQ_2", "2026-03-01T06:00:00", "437150000.0"),
    ("RECEIVE_FREQ_1", "2026-03-01T06:00:10", "437158912.4375"),
    ("PC_N0", "2026-03-01T06:00:10", "41.5"),
    ("RECEIVE_FREQ_1", "2026-03-01T06:00:20", "437158411.28"),
)


def segment(data=DATA, **meta):
    values = {**META, **meta}
    lines = ["META_START"]
    lines += [f"{k} = {values[k]}" for k in ORDER if values.get(k) is not None]
    lines += ["META_STOP", "DATA_START", *(f"{k} = {t} {v}" for k, t, v in data), "DATA_STOP"]
    return lines


def kvn(*segments):
    head = [
        "CCSDS_TDM_VERS = 2.0",
        "COMMENT made for a test",
        "CREATION_DATE = 2026-03-02T00:00:00Z",
        "ORIGINATOR = VELDANE",
    ]
    return "\n".join([*head, *(line for s in segments for line in s)]) + "\n"


def xml(*segments, prefix=""):
    p = prefix
    out = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        f'<{p}tdm xmlns:ndm="urn:ccsds:schema:ndmxml" id="CCSDS_TDM_VERS" version="2.0">',
    ]
    out += [
        f"<{p}header>",
        f"<{p}CREATION_DATE>2026-03-02T00:00:00Z</{p}CREATION_DATE>",
        f"<{p}ORIGINATOR>VELDANE</{p}ORIGINATOR>",
    ]
    out += [f"</{p}header>", f"<{p}body>"]
    for lines in segments:
        out += [f"<{p}segment>", f"<{p}metadata>"]
        for line in lines[1:]:
            keyword, _, value = line.partition(" = ")
            if keyword == "META_STOP":
                out += [f"</{p}metadata>", f"<{p}data>"]
            elif "_START" in keyword and not value:
                continue
            elif keyword == "DATA_STOP":
                out += [f"</{p}data>", f"</{p}segment>"]
            elif " " in value and "T06:" in value:
                tag, number = value.split()
                out += [
                    f"<{p}observation>",
                    f"<{p}EPOCH>{tag}</{p}EPOCH>",
                    f"<{p}{keyword}>{number}</{p}{keyword}>",
                    f"</{p}observation>",
                ]
            else:
                out.append(f"<{p}{keyword}>{value}</{p}{keyword}>")
    return "\n".join([*out, f"</{p}body>", f"</{p}tdm>"]) + "\n"


@pytest.fixture
def read(tmp_path, context):
    def run(*texts, **params):
        paths = []
        for k, text in enumerate(texts):
            path = tmp_path / f"log{k}.tdm"
            path.write_bytes(text if isinstance(text, bytes) else text.encode())
            paths.append(path)
        return read_tdm({}, TdmParams(files=tuple(paths), **{"sigma": 0.5, **params}), context)["frequencies"]

    return run


def reasons(table):
    return sorted({r.reason for r in table.rejects})


def test_values_places_and_account(read):
    text = kvn(segment())
    table = read(text)
    row = table.rows.iloc[0]
    assert row.received_frequency_hz == 437158912.4375 and row.nominal_frequency_hz == 437150000.0
    assert row.time_tai_ns == tai_ns_from_utc("2026-03-01T06:00:10Z")
    assert (row.station_id, row.emitter_id, row.interval_s, row.cn0_db_hz) == ("Cape Merrow", "KITE-4", 10.0, 41.5)
    assert np.isnan(table.rows.cn0_db_hz[1])
    assert row.received_frequency_sigma_hz == 0.5 and row.flag == "use"
    assert text.splitlines()[row.row_number - 1].endswith("437158912.4375")
    source = table.sources[0]
    assert (source.rows_read, source.rows_accepted, source.rows_rejected) == (4, 2, 2)
    assert reasons(table) == [
        "PC_N0 stands beside the received frequency; it is no row",
        "TRANSMIT_FREQ gives the nominal frequency; it is no row",
    ]
    assert [text.splitlines()[r.row_number - 1] for r in table.rejects] == [r.text for r in table.rejects]


@pytest.mark.parametrize("prefix", ["", "ndm:"])
def test_xml_of_both_flavours_equals_kvn(read, prefix):
    parts = (
        segment(),
        segment(FREQ_OFFSET="437000000", PATH="2,1", data=(("RECEIVE_FREQ_1", "2026-03-01T06:01:00", "-158912.25"),)),
    )
    lines, tree = read(kvn(*parts)), read(xml(*parts, prefix=prefix))
    assert lines.rows.drop(columns="row_number").equals(tree.rows.drop(columns="row_number"))
    text = xml(*parts, prefix=prefix).splitlines()
    assert "437158912.4375" in text[tree.rows.row_number[0] - 1]


def test_both_directions_of_the_path(read):
    data = [(k.replace("_1", "_9").replace("_2", "_1").replace("_9", "_2"), t, v) for k, t, v in DATA]
    other = read(kvn(segment(data, PATH="1,2")), stations={"kite 4": "KITE"}, emitters={"CAPE MERROW": "MERR"})
    # PARTICIPANT_2 receives now; names compare without case, but "-" is not a blank.
    assert set(other.rows.station_id) == {"KITE-4"} and set(other.rows.emitter_id) == {"MERR"}
    assert other.rows.received_frequency_hz.tolist() == read(kvn(segment())).rows.received_frequency_hz.tolist()
    with pytest.raises(InputError, match="participant 1 receives, not this one"):
        read(kvn(segment(data)))


def test_unindexed_frequency_and_unknown_emitter(read):
    data = [(k.replace("RECEIVE_FREQ_1", "RECEIVE_FREQ"), t, v) for k, t, v in DATA]
    table = read(kvn(segment(data, PARTICIPANT_2="UNKNOWN", PARTICIPANT_1="'DSS-26'")))
    assert set(table.rows.emitter_id) == {""} and set(table.rows.station_id) == {"DSS-26"}


def test_every_integration_reference_gives_the_middle(read):
    tags = {"START": "05", "MIDDLE": "10", "END": "15"}
    times = {
        ref: read(kvn(segment((("RECEIVE_FREQ_1", f"2026-03-01T06:00:{tag}", "437158912.4375"),), INTEGRATION_REF=ref)))
        .rows.time_tai_ns.tolist()
        for ref, tag in tags.items()
    }
    assert len({str(t) for t in times.values()}) == 1
    assert times["END"] == [tai_ns_from_utc("2026-03-01T06:00:10Z")]


def test_receive_delay_is_taken_off_the_tag(read):
    table = read(kvn(segment(RECEIVE_DELAY_1="0.000077", RECEIVE_DELAY_2="0.5", TRANSMIT_DELAY_1="0.3")))
    assert table.rows.time_tai_ns[0] == tai_ns_from_utc("2026-03-01T06:00:10Z") - 77_000


@pytest.mark.parametrize(("scale", "tai"), [("TAI", 0), ("GPS", 19), ("TT", -32.184), ("utc", 37)])
def test_time_systems(read, scale, tai):
    table = read(kvn(segment(TIME_SYSTEM=scale)))
    assert table.rows.time_tai_ns[0] == tai_ns_from_utc("2026-03-01T05:59:33Z") + round(tai * 1e9)


def test_day_of_year_and_leap_second(read):
    data = (
        ("RECEIVE_FREQ_1", "2016-366T23:59:60.5", "437158912.4375"),
        ("RECEIVE_FREQ_1", "2017-001T00:00:00.5", "437158912.4375"),
    )
    table = read(kvn(segment(data)))
    assert table.rows.time_tai_ns[1] - table.rows.time_tai_ns[0] == 1_000_000_000


def test_offset_is_added_in_decimals(read):
    data = (
        ("RECEIVE_FREQ_1", "2026-03-01T06:00:10", "-0.30000000000000004"),
        ("RECEIVE_FREQ_1", "2026-03-01T06:00:20", "60255.16982"),
    )
    table = read(kvn(segment(data, FREQ_OFFSET="8427221784.667")))
    # Sums made by hand; floats added one by one would also be off by an ulp (9.5e-7 Hz) in places.
    assert table.rows.received_frequency_hz.tolist() == [8427221784.367, 8427282039.83682]


def test_corrections(read):
    yes = segment(CORRECTION_RECEIVE="12.5", CORRECTIONS_APPLIED="YES")
    no = segment(CORRECTION_RECEIVE="12.5", CORRECTIONS_APPLIED="NO")
    logged = 437158912.4375
    for lines, choice, expected in (
        (yes, "applied", 0),
        (no, "applied", 12.5),
        (yes, "undone", -12.5),
        (no, "undone", 0),
    ):
        table = read(kvn(lines), corrections=choice)
        assert table.rows.received_frequency_hz[0] == logged + expected
        assert any("CORRECTION_RECEIVE = 12.5" in n and choice in n for n in table.notes)


def test_doppler_becomes_frequency(read):
    data = (
        ("TRANSMIT_FREQ_2", "2026-03-01T06:00:00", "437150000.0"),
        ("DOPPLER_INTEGRATED", "2026-03-01T06:00:10", "-6.125"),
    )
    table = read(kvn(segment(data, INTEGRATION_REF="END")))
    assert table.rows.received_frequency_hz[0] == pytest.approx(437150000.0 * (1 + 6125.0 / C), abs=1e-7)
    assert table.rows.interval_s[0] == 10.0 and table.rows.time_tai_ns[0] == tai_ns_from_utc("2026-03-01T06:00:05Z")
    moment = [(k.replace("INTEGRATED", "INSTANTANEOUS"), t, v) for k, t, v in data]
    table = read(kvn(segment(moment)))
    assert table.rows.interval_s[0] == 0.0 and table.rows.time_tai_ns[0] == tai_ns_from_utc("2026-03-01T06:00:10Z")
    with pytest.raises(InputError, match="declare params.nominal_frequency"):
        read(kvn(segment(data[1:])))
    assert read(kvn(segment(data[1:])), nominal_frequency=437e6).rows.nominal_frequency_hz[0] == 437e6


def test_degraded_data_are_weighted_down(read):
    table = read(kvn(segment(DATA_QUALITY="degraded")))
    assert set(table.rows.flag) == {"downweight"} and set(table.rows.reason) == {"DATA_QUALITY = DEGRADED"}


def test_nominal_frequency_steps_from_another_segment(read):
    steps = segment(
        (
            ("TRANSMIT_FREQ_2", "2026-03-01T06:00:00", "437150000.0"),
            ("TRANSMIT_FREQ_2", "2026-03-01T06:00:15", "437150100.0"),
        ),
        INTEGRATION_INTERVAL=None,
        INTEGRATION_REF=None,
    )
    table = read(kvn(steps, segment(DATA[1:])))
    assert table.rows.nominal_frequency_hz.tolist() == [437150000.0, 437150100.0]
    alone = read(kvn(segment(DATA[1:])))
    assert set(alone.rows.nominal_frequency_hz) == {437158662.0} and any("no TRANSMIT_FREQ" in n for n in alone.notes)


def test_other_paths_are_refused_segment_by_segment(read):
    two_way = segment(DATA[1:], PATH="1,2,1")
    three_way = segment(DATA[1:], PATH="1,2,3", PARTICIPANT_3="FAR")
    table = read(kvn(segment(), two_way, three_way))
    assert len(table) == 2
    words = " ".join(table.notes)
    assert "segment 2 is not used: PATH = 1,2,1 is two-way: this version takes one-way data only" in words
    assert "segment 3 is not used: PATH = 1,2,3 is three-way" in words
    assert table.sources[0].rows_read == 10 == table.sources[0].rows_accepted + table.sources[0].rows_rejected
    for lines, word in (
        (segment(DATA[1:], TIMETAG_REF="TRANSMIT"), "the time of reception is not known"),
        (segment(DATA[1:], TIME_SYSTEM="TDB"), "TIME_SYSTEM = TDB cannot be converted"),
        (segment(DATA[1:], MODE=None, PATH=None), "no MODE and PATH"),
        (segment((("RECEIVE_FREQ", "2026-03-01T06:00:10", "8.5"),), MODE="SINGLE_DIFF", PATH=None, PATH_1="1,2",
        PATH_2="2,1", RECEIVE_BAND="X"),
         "differenced data are not read"),
        (segment((("RANGE", "2026-03-01T06:00:10", "80452.75"),)), "RANGE is not a received frequency"),
    ):  # fmt: skip
        with pytest.raises(InputError, match=word):
            read(kvn(lines))


def test_negative_sky_frequency_is_a_reject(read):
    data = [*DATA[:2], ("RECEIVE_FREQ_1", "2026-03-01T06:00:30", "-437158911.0")]
    table = read(kvn(segment(data)))
    assert len(table) == 1 and "received frequency is not above 0 Hz at sky level" in reasons(table)


def test_missing_sigma_and_interval_are_said(read):
    table = read(kvn(segment(INTEGRATION_INTERVAL=None, INTEGRATION_REF=None)), sigma=None)
    assert set(table.rows.received_frequency_sigma_hz) == {1.0} and set(table.rows.interval_s) == {0.0}
    assert any("no sigma is declared" in n for n in table.notes) and any(
        "taken as instantaneous" in n for n in table.notes
    )


def test_line_ends_blank_lines_and_packing(read):
    text = kvn(segment())
    plain = read(text)
    for other in (text.replace("\n", "\r\n"), text.replace("\n", "\r"), text.replace("\n", "\n\r"), text.rstrip("\n"),
                  text.replace(" = ", "   =  "), gzip.compress(text.encode()), "\ufeff" + text):
        assert read(other).rows.equals(plain.rows)
    loose = read("\n\n" + text.replace("DATA_START", "\n\nDATA_START\n"))
    assert loose.rows.row_number.tolist() == [n + 5 for n in plain.rows.row_number]


def test_same_file_twice(read):
    text = kvn(segment())
    with pytest.raises(InputError, match="given twice"):
        read(text, text)
    assert len(read(text, text, on_repeat="ignore")) == 2


def test_all_unusable_files_are_named_at_once(tmp_path, context):
    good = kvn(segment())
    files = {
        "opm.kvn": good.replace("TDM", "OPM"),
        "cut.tdm": "\n".join(good.splitlines()[:-1]),
        "blank.tdm": "\n\n",
        "bin.tdm": "CCSDS\0\0",
        "none.tdm": "",
        "broken.xml": xml(segment())[:-30],
        "rinex.26o": "     2.11  OBSERVATION DATA\n",
        "other.xml": "<oem id='CCSDS_OEM_VERS' version='2.0'></oem>",
        "type.xml": '<!DOCTYPE tdm><tdm id="CCSDS_TDM_VERS" version="2.0"></tdm>',
        "entity.xml": '<!DOCTYPE tdm [<!ENTITY a "b">]><tdm id="CCSDS_TDM_VERS" version="2.0"/>',
    }
    for name, text in files.items():
        (tmp_path / name).write_text(text)
    with pytest.raises(InputError) as caught:
        read_tdm({}, TdmParams(files=tuple(tmp_path / n for n in [*files, "absent.tdm"])), context)
    text = str(caught.value)
    for expected in (
        "opm.kvn:1: not a tracking data message",
        "cut.tdm:18: the message ends without DATA_STOP",
        "blank.tdm:1: the file has only blank",
        "bin.tdm:1: the file is binary",
        "none.tdm: the file is empty",
        "broken.xml:35: not well-formed XML",
        "rinex.26o:1: not a tracking data message",
        "other.xml:1: another kind of message",
        "entity.xml:1: a document type declaration",
        "absent.tdm: no such file", "type.xml:1: a document type declaration",
    ):
        assert expected in text, expected


def test_a_hundred_thousand_records(read):
    """0.05 s in the Rust library; here a few seconds at most, with every rule checked."""
    import time

    data = [
        (
            "RECEIVE_FREQ_1",
            f"2026-03-01T{k // 3600 % 24:02d}:{k // 60 % 60:02d}:{k % 60:02d}.{k // 86400}",
            f"{437158912.4375 + k}",
        )
        for k in range(86400)
    ]
    text = kvn(segment(data))
    begin = time.perf_counter()
    assert len(read(text)) == 86400
    assert time.perf_counter() - begin < 10.0
