"""SP3 to ephemeris: units, time scales, absent values, several files, and what is refused."""

from __future__ import annotations

import gzip
import logging

import numpy as np
import pytest

from shiftfix.api import InputError, tai_ns_from_calendar
from shiftfix_ingest.sp3 import Sp3Params, read_sp3


def sp3(epochs, version="c", kind="P", scale="GPS", announced=None, start="2026  3  1  0  0  0.00000000"):
    """Text of an SP3 file; `epochs` are (epoch text, list of record lines)."""
    count = len(epochs) if announced is None else announced
    lines = [
        f"#{version}{kind}{start}{count:8d} ORBIT IGb14 HLM  IGS",
        "## 2408      0.00000000   900.00000000 61100 0.0000000000000",
        "+    2   G05G17  0  0  0  0  0  0  0  0  0  0  0  0  0  0  0",
        "++         3  7  0  0  0  0  0  0  0  0  0  0  0  0  0  0  0",
        f"%c G  cc {scale} ccc cccc cccc cccc cccc ccccc ccccc ccccc ccccc",
        "%c cc cc ccc ccc cccc cccc cccc cccc ccccc ccccc ccccc ccccc",
        "%f  1.2500000  1.025000000  0.00000000000  0.000000000000000",
        "/* a comment",
    ]
    for epoch, records in epochs:
        lines += [f"*  {epoch}", *records]
    return "\n".join([*lines, "EOF"]) + "\n"


FIRST = ("2026  3  1  0  0  0.00000000", [
    "PG05  14541.643332  21315.318727  -6874.453711    781.168638  9  5 10 102",
    "PG17 -25899.514341  -1247.822189   6722.506273 999999.999999",
])
SECOND = ("2026  3  1  0 15  0.00000000", [
    "PG05  14323.804541  21220.957185  -7609.796688    781.902062  8  8 11 105",
    "PG17 -25683.336478  -1323.013673   7473.973016   -154.743303  8  8 10 131",
])
NEXT_DAY = ("2026  3  2  0  0  0.00000000", [
    "PG05  14088.033848  21113.819154  -8335.622999    782.638337",
])


@pytest.fixture
def read(tmp_path, context):
    def run(*texts, **params):
        paths = []
        for k, text in enumerate(texts):
            path = tmp_path / f"orbit{k}.sp3"
            path.write_bytes(text if isinstance(text, bytes) else text.encode())
            paths.append(path)
        return read_sp3({}, Sp3Params(files=tuple(paths), **params), context)["ephemeris"]

    return run


def test_units_scale_and_absent_clock(read):
    table = read(sp3([FIRST, SECOND]))
    assert table.frame == "ITRS" and table.clock_excludes_periodic_relativity
    first = table.rows[table.rows.object_id == "G05"].iloc[0]
    assert (first.x_m, first.y_m, first.z_m) == pytest.approx((14541643.332, 21315318.727, -6874453.711), abs=1e-7)
    assert first.clock_s == pytest.approx(781.168638e-6, rel=1e-15)
    assert first.time_tai_ns == tai_ns_from_calendar(2026, 3, 1, 0, 0, 19, "TAI")
    other = table.rows[table.rows.object_id == "G17"]
    assert np.isnan(other.clock_s.iloc[0]) and other.clock_s.iloc[1] == pytest.approx(-154.743303e-6)
    assert np.isnan(first.vx_m_s)
    assert table.sources[0].rows_read == table.sources[0].rows_accepted == 4


@pytest.mark.parametrize(("scale", "tai"), [("UTC", 37), ("TAI", 0), ("GLO", 37), ("BDT", 33), ("GAL", 19)])
def test_time_system(read, scale, tai):
    table = read(sp3([FIRST, SECOND], version="d", scale=scale))
    assert table.rows.time_tai_ns.min() == tai_ns_from_calendar(2026, 3, 1, 0, 0, tai, "TAI")


def test_velocities_are_decimetres_per_second(read):
    records = [
        "PG05  14541.643332  21315.318727  -6874.453711    781.168638",
        "VG05 -11434.123456   2001.000000 -30123.500000     -3.000000",
        "PG17 -25899.514341  -1247.822189   6722.506273 999999.999999",
        "VG17      0.000000      0.000000      0.000000 999999.999999",
    ]
    rows = read(sp3([("2026  3  1  0  0  0.00000000", records)], kind="V")).rows
    assert rows.vx_m_s[0] == pytest.approx(-1143.4123456) and rows.vz_m_s[0] == pytest.approx(-3012.35)
    assert np.isnan(rows.vx_m_s[1])


def test_absent_position_is_left_out_and_counted(read, caplog):
    gone = ("2026  3  1  0 30  0.00000000", ["PG05      0.000000      0.000000      0.000000 999999.999999",
                                             "PG17 -25445.166549  -1405.173668   8216.267838   -154.891367"])
    with caplog.at_level(logging.INFO, logger="shiftfix.test"):
        table = read(sp3([FIRST, SECOND, gone]))
    assert list(table.rows.object_id) == ["G05"] * 2 + ["G17"] * 3
    source = table.sources[0]
    assert (source.rows_read, source.rows_accepted, source.rows_rejected) == (6, 5, 1)
    assert "1 records without position left out" in caplog.text


def test_days_join_and_the_later_file_wins_where_they_differ(read, caplog):
    first = sp3([FIRST, SECOND, NEXT_DAY])
    same = sp3([NEXT_DAY], start="2026  3  2  0  0  0.00000000")
    table = read(first, same)
    assert len(table) == 5 and not caplog.records
    other = same.replace("14088.033848", "14088.033948")
    table = read(first, other)
    assert table.rows[table.rows.object_id == "G05"].x_m.iloc[-1] == pytest.approx(14088033.948)
    assert "1 positions occur twice with differences up to 0.100 m" in caplog.text and "orbit1.sp3" in caplog.text
    assert [s.rows_accepted for s in table.sources] == [4, 1]
    assert all(s.rows_read == s.rows_accepted + s.rows_rejected for s in table.sources)


def test_selection_and_packing(read):
    table = read(gzip.compress(sp3([FIRST, SECOND]).encode()), satellites=("G17",), position_sigma=0.02)
    assert set(table.rows.object_id) == {"G17"} and table.position_sigma_m == 0.02
    with pytest.raises(InputError, match="satellites without any position\n.*G09"):
        read(sp3([FIRST, SECOND]), satellites=("G09", "G05"))


def test_all_unusable_files_are_named_at_once(tmp_path, context):
    good = sp3([FIRST, SECOND])
    files = {
        "nav.26n": "     2.11           NAVIGATION DATA                         RINEX VERSION / TYPE\n",
        "cut.sp3": good.replace("EOF\n", ""),
        "short.sp3": sp3([FIRST], announced=96),
        "number.sp3": good.replace("21220.957185", "21220,957185"),
        "date.sp3": good.replace("*  2026  3  1  0 15", "*  2026  3 32  0 15"),
        "scale.sp3": good.replace(" GPS ", " XXX "),
        "bin.sp3": "#c\0\0\0",
        "none.sp3": "",
    }
    for name, text in files.items():
        (tmp_path / name).write_text(text)
    with pytest.raises(InputError) as caught:
        read_sp3({}, Sp3Params(files=tuple(tmp_path / n for n in [*files, "absent.sp3"])), context)
    text = str(caught.value)
    for expected in (
        "nav.26n:1: not an SP3 file",
        "cut.sp3:14: the file is truncated",
        "short.sp3:12: number of epochs does not agree",
        "96 epochs and an EOF line",
        "number.sp3:13: position record cannot be read",
        "date.sp3:12: epoch cannot be read",
        "scale.sp3:5: unknown time system",
        "bin.sp3:1: the file is binary",
        "none.sp3: the file is empty",
        "absent.sp3: no such file",
    ):
        assert expected in text, expected


def test_public_orbits_of_three_days(shared_data, context):
    files = tuple(sorted((shared_data / "gnss" / "2008_148" / "truth").glob("*.sp3")))
    table = read_sp3({}, Sp3Params(files=files), context)["ephemeris"]
    assert len(table) == 3 * 96 * 31 and table.rows.clock_s.isna().sum() == 128
    mine = table.rows[table.rows.object_id == "G17"]
    assert set(np.diff(mine.time_tai_ns)) == {900_000_000_000}
    radius = np.sqrt(table.rows.x_m**2 + table.rows.y_m**2 + table.rows.z_m**2)
    assert radius.between(2.5e7, 2.8e7).all()
