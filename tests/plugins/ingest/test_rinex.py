"""RINEX to frequencies: values, breaks of the phase, and the account of every record."""

from __future__ import annotations

import collections
import dataclasses
import gzip
import logging

import numpy as np
import pytest
from rinex_files import F1, F2, C, Scene, at, noise, rinex, shifted

from shiftfix.api import InputError, tai_ns_from_calendar
from shiftfix_ingest.rinex import RinexParams, read_rinex

MILLISECOND_M = 299792.458


@pytest.fixture
def read(tmp_path, context):
    def run(*texts, **params):
        paths = []
        for k, text in enumerate(texts):
            path = tmp_path / f"file{k}.26o"
            path.write_bytes(text if isinstance(text, bytes) else text.encode())
            paths.append(path)
        return read_rinex({}, RinexParams(files=tuple(paths), **params), context)["frequencies"]

    return run


def reasons(table):
    return collections.Counter(r.reason for r in table.rejects)


def row(table, satellite, k):
    rows = table.rows[table.rows.emitter_id == satellite].reset_index(drop=True)
    return rows.loc[k]


@pytest.mark.parametrize("version", [2.11, 3.04])
def test_phase_gives_the_mean_frequency_over_the_interval(read, version):
    scene = Scene()
    table = read(rinex(scene, version))
    got = row(table, "G17", 3)
    start, stop = 3 * 30.0, 4 * 30.0
    change = scene.range_m("G17", stop) - scene.range_m("G17", start)
    # Phases are written to 0.001 cycle: 2 x 0.0005 cycle over 30 s is 3.3e-5 Hz.
    assert got.received_frequency_hz == pytest.approx(F1 * (1 - change / (C * 30.0)), abs=4e-5)
    assert got.received_frequency_hz < F1 - 1.0  # this range grows
    assert got.interval_s == 30.0
    assert got.time_tai_ns == tai_ns_from_calendar(2026, 3, 1, 6, 1, 45, "GPS")
    assert got.received_frequency_sigma_hz == pytest.approx(F1 * np.sqrt(2) * 0.003 / (C * 30.0), rel=1e-12)
    assert got.pseudorange_m == pytest.approx(scene.range_m("G17", stop) + 2.0, abs=1e-3)
    assert got.pseudorange_start_m == pytest.approx(scene.range_m("G17", start) + 2.0, abs=1e-3)
    assert got.cn0_db_hz == pytest.approx(43.3)
    assert (got.station_id, got.emitter_id, got.nominal_frequency_hz) == ("MERR", "G17", F1)
    assert len(table) == 4 * 11
    assert reasons(table) == {"first of an arc": 4}
    assert table.rows.phase_arc_id.nunique() == 4


def test_row_and_reject_name_file_and_line(read):
    text = rinex(Scene(epochs=3), 2.11)
    table = read(text)
    lines = text.splitlines()
    got = row(table, "G22", 1)
    assert got.source == "file0.26o"
    phase = float(lines[got.row_number - 1][:14])
    assert phase == pytest.approx(Scene().record(2, "G22")["L1"], abs=6e-4)
    first = next(r for r in table.rejects if "file0" in r.source)
    assert float(lines[first.row_number - 1][:14]) == pytest.approx(Scene().record(0, "G03")["L1"], abs=6e-4)


def test_versions_compressions_and_line_ends_agree(read):
    import hatanaka

    scene = Scene(satellites=tuple(f"G{n:02d}" for n in range(1, 15)), epochs=4)  # 14: the list continues
    plain = read(rinex(scene, 2.11))
    three = read(rinex(scene, 3.04))
    packed = read(gzip.compress(rinex(scene, 3.04).encode()))
    compact = read(hatanaka.rnx2crx(rinex(scene, 2.11).encode()))
    windows = read(rinex(scene, 2.11).replace("\n", "\r\n"))
    assert len(plain) == 14 * 3
    for other in (three, packed, compact, windows):
        for column in ("received_frequency_hz", "time_tai_ns", "pseudorange_m", "emitter_id", "phase_arc_id"):
            assert (other.rows[column] == plain.rows[column]).all()


def test_more_than_ten_codes_and_blank_lines(read):
    kinds = ("D1", "D2", "S1", "S2", "P1", "P2", "L1", "L2")
    scene = Scene(
        edits=[at(2, "G17", D1=None, D2=None, S1=None, S2=None, P1=None), at(3, "G28", P2=None, L1=None, L2=None)]
    )
    table = read(rinex(scene, 2.11, kinds * 1))
    assert reasons(table) == {"first of an arc": 4, "no phase": 1, "first of an arc after a gap": 1}
    assert np.isnan(row(table, "G17", 1).pseudorange_m)
    assert len(table) == 44 - 2


def test_zero_is_missing(read):
    table = read(rinex(Scene(edits=[at(5, "G17", L1=0.0)])))
    assert reasons(table) == {"first of an arc": 4, "no phase": 1, "first of an arc after a gap": 1}


@pytest.mark.parametrize("band", ["lli1", "lli2"])
def test_loss_of_lock_breaks_the_record(read, band):
    text = rinex(Scene(edits=[at(6, "G17", **{band: 5})]), 3.04)  # bit 0 and bit 2
    table = read(text)
    assert reasons(table) == {"first of an arc": 4, "loss of lock": 1}
    lost = next(r for r in table.rejects if r.reason == "loss of lock")
    assert text.splitlines()[lost.row_number - 1].startswith("G17")
    arcs = table.rows[table.rows.emitter_id == "G17"].phase_arc_id.tolist()
    assert arcs == ["MERR/G17/1"] * 5 + ["MERR/G17/2"] * 5


def test_encryption_bit_does_not_break_but_half_cycle_does(read):
    assert reasons(read(rinex(Scene(edits=[at(6, "G17", lli1=4)])))) == {"first of an arc": 4}
    half = reasons(read(rinex(Scene(edits=[at(6, "G17", lli1=2)]))))
    assert half == {"first of an arc": 4, "half-cycle ambiguity changed": 2}  # there and back


def test_millisecond_reset_of_phase_and_code(read):
    jump = {k: MILLISECOND_M for k in ("P1", "P2")} | {"L1": MILLISECOND_M * F1 / C, "L2": MILLISECOND_M * F2 / C}
    table = read(rinex(Scene(edits=[shifted(None, 7, **jump), noise(0.5, 1)])))
    assert reasons(table) == {"first of an arc": 4, "millisecond clock reset": 4}
    assert abs(table.rows.received_frequency_hz - F1).max() < 6000.0


def test_millisecond_reset_of_the_code_alone(read):
    table = read(rinex(Scene(edits=[shifted(None, 7, P1=-3 * MILLISECOND_M, P2=-3 * MILLISECOND_M), noise(0.5, 2)])))
    assert reasons(table) == {"first of an arc": 4, "millisecond clock reset": 4}


def test_millisecond_reset_of_the_tags_alone(read):
    table = read(rinex(Scene(tag_shift=lambda k: 1e-3 if k >= 4 else 0.0)))
    assert reasons(table) == {"first of an arc": 4, "millisecond clock reset": 4}


def test_one_satellite_that_jumps_is_a_slip_not_a_reset(read):
    table = read(rinex(Scene(edits=[shifted(("G22",), 7, L1=MILLISECOND_M * F1 / C, L2=MILLISECOND_M * F2 / C)])))
    assert reasons(table) == {"first of an arc": 4, "cycle slip: phase minus code": 1}


def test_slip_of_many_cycles_is_seen_against_the_code(read):
    scene = Scene(epochs=30, edits=[shifted(("G22",), 11, L1=40.0), noise(0.4, 3)])  # 7.6 m
    table = read(rinex(scene, 2.11, ("L1", "P1")))
    assert reasons(table) == {"first of an arc": 4, "cycle slip: phase minus code": 1}


def test_slip_of_one_cycle_on_one_or_both_bands_is_seen_against_the_other(read):
    for amounts in ({"L1": 1.0}, {"L2": -1.0}, {"L1": 1.0, "L2": 1.0}):
        table = read(rinex(Scene(epochs=30, edits=[shifted(("G28",), 17, **amounts), noise(0.4, 4)])))
        assert reasons(table) == {"first of an arc": 4, "cycle slip: L1 minus L2": 1}


def test_one_wrong_code_range_is_not_a_slip(read):
    scene = Scene(epochs=30, edits=[noise(0.3, 5), at(12, "G17", P1=2.2e7)])
    assert reasons(read(rinex(scene, 2.11, ("L1", "P1")))) == {"first of an arc": 4}


def test_gap_power_failure_and_events(read):
    missing = Scene(edits=[at(5, "G03", present=False)])
    assert reasons(read(rinex(missing))) == {"first of an arc": 4, "first of an arc after a gap": 1}
    power = read(rinex(Scene(flags={4: 1})))
    assert reasons(power) == {"first of an arc": 4, "power failure": 4}
    for version, event in ((2.11, " " * 28 + "4  1"), (3.04, ">" + " " * 30 + "4  1")):
        lines = rinex(Scene(epochs=6), version).splitlines()
        start = next(k for k, line in enumerate(lines) if " 26  3  1  6  1 30" in line or "06 01 30" in line)
        lines[start:start] = [event, f"{'antenna was cleaned':<60}COMMENT"]
        assert reasons(read("\n".join(lines) + "\n")) == {"first of an arc": 4}


def test_event_with_new_code_list(read):
    first = rinex(Scene(epochs=3), 2.11).splitlines()
    second = rinex(dataclasses.replace(Scene(epochs=3), second_0=30.0, minute_0=1), 2.11, ("P1", "L1", "L2"))
    body = second.split("END OF HEADER\n")[1].splitlines()
    new = ["                            4  1", f"{'     3    P1    L1    L2':<60}# / TYPES OF OBSERV"]
    table = read("\n".join(first + new + body) + "\n")
    got = row(table, "G17", 4)
    change = Scene().range_m("G17", 150.0) - Scene().range_m("G17", 120.0)
    assert got.received_frequency_hz == pytest.approx(F1 * (1 - change / (C * 30.0)), abs=4e-5)


def test_missing_epoch_breaks_all(read):
    scene = Scene(edits=[lambda k, s, r: r.update(present=k != 5)])
    lines = [line for line in rinex(scene, 3.04).splitlines() if not line.endswith("0  0")]
    table = read("\n".join(lines) + "\n")
    assert reasons(table) == {"first of an arc": 4, "first of an arc after a gap": 4}
    assert set(table.rows.interval_s) == {30.0}


def test_files_join_at_their_seam_and_repeated_epochs_are_used_once(read):
    early = rinex(Scene(epochs=6))
    late = rinex(Scene(epochs=6, minute_0=2, second_0=30.0))  # begins with the last epoch of the other
    table = read(late, early)
    assert reasons(table) == {"first of an arc": 4, "repeated epoch": 4}
    assert all(r.source == "file0.26o" for r in table.rejects if r.reason == "repeated epoch")
    assert len(table) == 4 * 10
    assert table.rows.phase_arc_id.nunique() == 4
    for source in table.sources:
        assert source.rows_read == source.rows_accepted + source.rows_rejected == 24


def test_combination_is_free_of_the_ionosphere(read):
    text = rinex(Scene(iono_m_s=0.02))
    free = read(text, combination="ionosphere_free")
    single = read(text)
    scene = Scene()
    expected = F1 * (1 - (scene.range_m("G17", 120.0) - scene.range_m("G17", 90.0)) / (C * 30.0))
    # 0.001 cycle roundings, three times enlarged: 1e-4 Hz.
    assert row(free, "G17", 3).received_frequency_hz == pytest.approx(expected, abs=1.5e-4)
    assert row(single, "G17", 3).received_frequency_hz - expected == pytest.approx(F1 * 0.02 / C, abs=1e-3)
    assert row(free, "G17", 3).pseudorange_m == pytest.approx(scene.range_m("G17", 120.0), abs=5e-3)
    ratio = row(free, "G17", 3).received_frequency_sigma_hz / row(single, "G17", 3).received_frequency_sigma_hz
    assert ratio == pytest.approx(3.0)


@pytest.mark.parametrize("combination", ["single", "ionosphere_free"])
def test_doppler_is_positive_for_approach(read, combination):
    table = read(rinex(Scene()), observable="doppler", combination=combination)
    got = row(table, "G17", 3)
    scene = Scene()
    rate = scene.range_m("G17", 90.5) - scene.range_m("G17", 89.5)
    assert got.received_frequency_hz == pytest.approx(F1 * (1 - rate / C), abs=4e-3)  # D is written to 0.001 Hz
    assert got.interval_s == 0.0 and got.phase_arc_id == ""
    assert got.time_tai_ns == tai_ns_from_calendar(2026, 3, 1, 6, 1, 30, "GPS")
    assert got.received_frequency_sigma_hz == pytest.approx(0.1 if combination == "single" else 0.3)
    assert len(table) == 48 and not table.rejects


def test_doppler_of_the_wrong_sign_is_refused_until_declared(read):
    text = rinex(Scene(doppler_sign=-1.0))
    with pytest.raises(InputError, match="opposite sign.*\n.*\n.*reversed"):
        read(text, observable="doppler")
    table = read(text, observable="doppler", doppler_sign="reversed")
    right = read(rinex(Scene()), observable="doppler")
    assert (table.rows.received_frequency_hz == right.rows.received_frequency_hz).all()


def test_selection_by_satellite_time_and_strength(read):
    text = rinex(Scene(edits=[at(5, "G17", S1=20.0)]))
    assert set(read(text, satellites=("G17", "G22")).rows.emitter_id) == {"G17", "G22"}
    assert set(read(text, exclude_satellites=("G17",)).rows.emitter_id) == {"G03", "G22", "G28"}
    weak = read(text, satellites=("G17",), minimum_cn0=30.0)
    assert reasons(weak) == {"first of an arc": 1, "weaker than 30 dB-Hz": 1, "first of an arc after a gap": 1}
    some = read(text, start="2026-03-01T06:01:42Z", stop="2026-03-01T06:03:12Z")  # GPS is 18 s ahead of UTC
    assert len(some) == 4 * 4 and some.sources[0].rows_read == 16


def test_strength_that_is_not_in_db_hz_is_left_out(read, caplog):
    with caplog.at_level(logging.WARNING):
        table = read(rinex(Scene(strength=240.0)))
    assert "cn0_db_hz" not in table.rows
    assert any("not in dB-Hz" in n for n in table.notes) and "not in dB-Hz" in caplog.text


def test_longer_interval_is_the_mean_of_the_short_ones(read):
    text = rinex(Scene(epochs=13, edits=[at(8, "G22", lli1=1)]))
    short, long = read(text), read(text, interval=90.0)
    mine = short.rows[short.rows.emitter_id == "G17"].received_frequency_hz.to_numpy().reshape(4, 3).mean(1)
    got = long.rows[long.rows.emitter_id == "G17"]
    assert got.received_frequency_hz.to_numpy() == pytest.approx(mine, abs=1e-6)
    assert set(got.interval_s) == {90.0}
    assert reasons(long) == {"first of an arc": 4, "loss of lock": 1}
    assert long.sources[0].rows_read == 5 * 4


def test_longer_interval_begins_at_whole_multiples_of_gps_time(read):
    table = read(rinex(Scene(epochs=130, interval=1.0, second_0=20.0)), interval=60.0)
    mine = table.rows[table.rows.emitter_id == "G17"]
    assert mine.time_tai_ns.tolist() == [tai_ns_from_calendar(2026, 3, 1, 6, 1, 30, "GPS")]


def test_time_system_of_the_header_is_honoured(read):
    utc = read(rinex(Scene(), 3.04, time_system="GLO"))
    gps = read(rinex(Scene(), 3.04))
    assert set((utc.rows.time_tai_ns - gps.rows.time_tai_ns).tolist()) == {18_000_000_000}


def test_receiver_clock_of_the_epoch_line_travels_along(read):
    for version in (2.11, 3.04):
        table = read(rinex(Scene(clock=lambda k: 1e-4 + 1e-6 * k), version))
        got = row(table, "G22", 2)
        assert got.receiver_clock_start_s == pytest.approx(1.02e-4, abs=1e-12)
        assert got.receiver_clock_s == pytest.approx(1.03e-4, abs=1e-12)
    applied = read(rinex(Scene(), 3.04, RCV_CLOCK_OFFS_APPL="     1"))
    assert any("RCV CLOCK OFFS APPL = 1" in n for n in applied.notes)
    assert any(n.startswith("times are receiver time") for n in read(rinex(Scene())).notes)


def test_stations_by_file_name(read):
    other = rinex(Scene(marker="OTHER STATION"))
    table = read(rinex(Scene()), other, stations={"file1.26o": "CAPE"})
    assert set(table.rows.station_id) == {"MERR", "CAPE"}
    assert set(read(other).rows.station_id) == {"OTHE"}


def test_named_signals_come_first(read):
    text = rinex(Scene(), 2.11).replace("    P1", "    C1")  # two codes of band 1
    lines = text.splitlines()
    assert np.isfinite(read("\n".join(lines) + "\n", signals=("C1",)).rows.pseudorange_m).all()
    with pytest.raises(InputError, match="no file has this observation code"):
        read(text, signals=("L1X",))


def test_account_holds_whatever_is_missing(read):
    random = np.random.default_rng(20260301)

    def mangle(k, satellite, record):
        for kind in ("L1", "L2", "P1", "P2", "S1"):
            if random.random() < 0.1:
                record[kind] = None
        record["lli1"] = int(random.random() < 0.05)
        record["present"] = random.random() > 0.1

    for version in (2.11, 3.04):
        for combination in ("single", "ionosphere_free"):
            scene = Scene(epochs=40, edits=[mangle])
            text = rinex(scene, version)
            records = sum(int(n) for n in _announced(text, version))
            table = read(text, combination=combination)
            source = table.sources[0]
            assert source.rows_read == records
            assert source.rows_read == source.rows_accepted + source.rows_rejected
            assert source.rows_accepted == len(table) > 0 and source.rows_rejected == len(table.rejects)
            assert (
                len(
                    {(r.source, r.row_number) for r in table.rejects}
                    | set(zip(table.rows.source, table.rows.row_number, strict=True))
                )
                == records
            )


def _announced(text, version):
    for line in text.splitlines():
        if version < 3 and line.startswith(" 26  3  1 "):
            yield line[29:32]
        elif version >= 3 and line.startswith(">"):
            yield line[32:35]


def test_text_that_is_no_number_is_a_reject(read):
    lines = rinex(Scene(epochs=4), 3.04).splitlines()
    index = next(k for k, line in enumerate(lines) if "06 01  0." in line) + 2
    lines[index] = lines[index][:3] + "  12x456789.123" + lines[index][18:]
    table = read("\n".join(lines) + "\n")
    bad = next(r for r in table.rejects if r.reason == "not a number")
    assert bad.row_number == index + 1
    assert len(table) == 12 - 2


def test_all_unusable_files_are_named_at_once(tmp_path, context):
    good = rinex(Scene(epochs=3), 2.11)
    files = {
        "nav.26n": good.replace("OBSERVATION DATA", "NAVIGATION DATA "),
        "five.rnx": good.replace("     2.11", "     5.00"),
        "text.26o": "station;time;frequency\n",
        "cut.26o": "\n".join(good.splitlines()[:-3]) + "\n",
        "head.26o": "\n".join(good.splitlines()[:4]) + "\n",
        "bin.26o": b"\x7fELF\x00\x01" * 40,
        "none.26o": "",
        "short.gz": gzip.compress(good.encode())[:-30],
        "codes.26o": good.replace("     8    L1", "     9    L1"),
        "epoch.26o": good.replace(" 26  3  1  6  0 30", " 26 13  1  6  0 30"),
        "marker.26o": good.replace("MERR", "    "),
        "scale.26o": good.replace("     GPS", "     XYZ"),
    }
    for name, text in files.items():
        (tmp_path / name).write_bytes(text if isinstance(text, bytes) else text.encode())
    paths = tuple(tmp_path / n for n in [*files, "absent.26o"])
    with pytest.raises(InputError) as caught:
        read_rinex({}, RinexParams(files=paths, satellites=("R05",)), context)
    text = str(caught.value)
    last = len(good.splitlines()) - 3
    for expected in (
        "nav.26n:1: not an observation file", "found: a navigation file", "five.rnx:1: unsupported RINEX version",
        "text.26o:1: not a RINEX file", "the file is truncated", "head.26o:4: the file ends within its header",
        "bin.26o:1: the file is binary", "none.26o: the file is empty", "short.gz: the gzip file is truncated",
        "codes.26o:7: list of observation codes incomplete", "epoch.26o:17: epoch line cannot be read", "no such date",
        "marker.26o:7: no MARKER NAME", "scale.26o:7: unknown time system", "absent.26o: no such file",
        "params.satellites: not a satellite that can be read",
    ):
        assert expected in text, expected
    cut = next(p for p in caught.value.problems if p.where.startswith("cut.26o"))
    assert int(cut.where.split(":")[1]) <= last
    assert caught.value.exit_code == 4


@pytest.mark.parametrize("version", [2.11, 3.04])
def test_any_cut_is_noticed(read, version):
    """A file cut after any line but an epoch's last is refused; cut between epochs it is a shorter file."""
    lines = rinex(Scene(epochs=3), version, ("L1", "L2", "P1", "P2", "S1", "S2")).splitlines()
    head = next(k for k, line in enumerate(lines) if "END OF HEADER" in line) + 1
    per = 9 if version < 3 else 5
    for count in range(head + per + 1, len(lines)):
        text = "\n".join(lines[:count]) + "\n"
        if (count - head) % per:
            with pytest.raises(InputError, match="truncated"):
                read(text)
        else:
            assert len(read(text)) == 4 * ((count - head) // per - 1)


def test_missing_observable_names_what_the_file_has(read):
    text = rinex(Scene(), 2.11, ("L1", "P1"))
    with pytest.raises(InputError, match=r"file0.26o:7: no carrier phase on band 2(.|\n)*found: L1 P1(.|\n)*single"):
        read(text, combination="ionosphere_free")
    with pytest.raises(InputError, match="no Doppler on band 1"):
        read(text, observable="doppler")


def test_same_file_twice(read, caplog):
    text = rinex(Scene())
    with pytest.raises(InputError, match="given twice"):
        read(text, text)
    once, twice = read(text), read(text, text, on_repeat="ignore")
    assert once.rows.equals(twice.rows)
    assert sum("same bytes" in n for n in twice.notes) == 1


def test_same_name_at_two_places_clashes(read):
    moved = rinex(Scene(minute_0=30)).replace("  4594489.8901", "  4694489.8901")
    with pytest.raises(InputError, match=r"station id MERR clashes(.|\n)*100\.0 km"):
        read(rinex(Scene()), moved)


def test_nothing_left_says_why(read):
    with pytest.raises(InputError, match="no record makes a row"):
        read(rinex(Scene(epochs=1)))
    with pytest.raises(InputError, match="no record of the wanted satellites"):
        read(rinex(Scene()), satellites=("G09",))
