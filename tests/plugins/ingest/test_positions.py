"""Position logs of movers: every accepted form gives the same states, and every unusable row is named by its line."""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.api import itrs_from_geodetic, run_pipeline

PIPELINE = """shiftfix = 1
[nodes.track]
use = "ingest.positions"
params.files = "track.csv"
params.object = "cutter"
params.columns = { time = "utc", latitude = "lat", longitude = "lon", height = "h" }
params.time_scale = "UTC"
params.height_kind = "ellipsoid"
"""
ROWS = [f"2026-03-01T12:{k:02d}:00Z,-41.{k:02d},-26.5{k},15.5" for k in range(8)]
HEAD = "utc,lat,lon,h"


def run(folder, rows=ROWS, head=HEAD, text=PIPELINE, name="track.csv"):
    (folder / name).write_text("\n".join([head, *rows]) + "\n")
    (folder / "p.toml").write_text(text)
    return run_pipeline(folder / "p.toml")


def states(result):
    assert result.error is None, result.error
    table = result.tables["track.ephemeris"]
    return np.column_stack([table.array(c) for c in ("time_tai_ns", "x_m", "y_m", "z_m")])


def test_geodetic_rows(tmp_path):
    result = run(tmp_path)
    found = states(result)
    wanted = itrs_from_geodetic(np.radians(-41.03), np.radians(-26.53), 15.5)
    assert np.allclose(found[3, 1:], wanted, rtol=0.0, atol=1e-6)
    table = result.tables["track.ephemeris"]
    assert table.frame == "ITRS" and table.position_sigma_m == 10.0
    assert set(table.array("object_id")) == {"cutter"} and len(table.sources) == 1


def test_forms_of_one_track(tmp_path):
    wanted = states(run(tmp_path))
    comma = [r.replace(",", ";").replace(".", ",") for r in ROWS]
    cases = [
        (["# helm to port", *ROWS], HEAD, PIPELINE),
        (comma, HEAD.replace(",", ";"), PIPELINE + 'params.decimal = ","\n'),
        ([r.replace(",", " ") for r in ROWS], "utc lat lon h", PIPELINE),
        ([r.replace("T", ",") for r in ROWS], "d,utc,lat,lon,h", PIPELINE.replace("{ time", '{ date = "d", time')),
        ([r.replace("Z", "") for r in ROWS], HEAD, PIPELINE + "params.unmarked_utc = true\n"),
        (
            [r.replace(",15.5", ",3.5") for r in ROWS],
            HEAD,
            PIPELINE.replace('"ellipsoid"', '"sea level"') + 'params.undulation = "12 m"\n',
        ),
        (
            [r.replace(",15.5", ",0.0155") for r in ROWS],
            HEAD,
            PIPELINE + 'params.units = { height = "km" }\n',
        ),
        (ROWS[::-1], HEAD, PIPELINE),
    ]
    for rows, head, text in cases:
        assert np.allclose(states(run(tmp_path, rows, head, text)), wanted, rtol=0.0, atol=1e-6), head


def test_cartesian_rows_velocity_and_clock_of_two_movers(tmp_path):
    text = PIPELINE.replace(
        'latitude = "lat", longitude = "lon", height = "h"',
        'object = "o", x = "x", y = "y", z = "z", vx = "u", vy = "v", vz = "w", clock = "c"',
    )
    text = text.replace('params.object = "cutter"\n', "").replace('params.height_kind = "ellipsoid"\n', "")
    text += 'params.units = { x = "km", y = "km", z = "km", vx = "km/s", vy = "km/s", vz = "km/s", clock = "us" }\n'
    rows = [
        f"2026-03-01T12:0{k}:00Z,{o},7000.25,{100 * k}.5,-3.125,0.5,7.25,{k},{'' if k == 1 else 4}"
        for k in range(3)
        for o in ("B", "A")
    ]
    table = run(tmp_path, rows, "utc,o,x,y,z,u,v,w,c", text + 'params.frame = "GCRS"\n').tables["track.ephemeris"]
    assert table.frame == "GCRS" and table.array("object_id").tolist() == ["A"] * 3 + ["B"] * 3
    assert (
        table.array("x_m")[1] == 7000250.0 and table.array("vy_m_s")[4] == 7250.0 and table.array("vz_m_s")[5] == 2000.0
    )
    assert table.array("clock_s")[0] == pytest.approx(4e-6) and np.isnan(table.array("clock_s")[1])


BAD_ROWS = {
    "-91.0,-26.5,15": "latitude out of range: -91 deg, not -90 to 90; are latitude and longitude swapped?",
    "-41.5,-186.5,15": "longitude out of range",
    "-41.5,370.5,15": "longitude out of range",
    "-41.5,-26.5,-900": "height out of range",
    "-41.5,-26.5,": "height is empty",
    "-41.5,nan,15": "longitude is not a finite number: 'nan'",
    "-41.5,-26.5": "wrong number of fields in the row: 3, not 4",
    "-41.5,-36.5,15": "cutter jumps",
}


@pytest.mark.parametrize("row", BAD_ROWS)
def test_unusable_rows_are_named_by_their_line(tmp_path, row):
    rows = ["# a comment", *ROWS, "", f"2026-03-01T12:08:00Z,{row}"]
    result = run(tmp_path, rows)
    assert result.exit_code == 4
    assert any(p.where == "track.csv:12" and BAD_ROWS[row] in str(p) for p in result.error.problems), str(result.error)


def test_unusable_times_and_repeated_ones(tmp_path):
    result = run(tmp_path, [*ROWS, "1.3.2026 13:00,-41.1,-26.5,15", ROWS[2].replace("15.5", "16.5")])
    assert "track.csv:10: day-first or month-first date" in str(result.error)
    result = run(tmp_path, [*ROWS, ROWS[2].replace("15.5", "16.5")])
    assert "track.csv:10: two positions of cutter at one time" in str(result.error)
    assert "the other at track.csv:4" in str(result.error)


def test_all_files_are_reported_and_repeats_refused_or_noted(tmp_path):
    run(tmp_path)
    (tmp_path / "again.csv").write_text((tmp_path / "track.csv").read_text())
    (tmp_path / "bad.csv").write_text(HEAD + "\n2026-03-01T14:00:00Z,-41,-26\n")
    text = PIPELINE.replace('"track.csv"', '["*.csv", "none.csv"]')
    (tmp_path / "p.toml").write_text(text)
    found = str(run_pipeline(tmp_path / "p.toml").error)
    for words in (
        "none.csv: no such file",
        "track.csv: the same file is given twice",
        "bad.csv:2: wrong number of fields",
    ):
        assert words in found, found
    (tmp_path / "bad.csv").unlink()
    (tmp_path / "p.toml").write_text(text.replace(', "none.csv"', "") + 'params.on_repeat = "ignore"\n')
    result = run_pipeline(tmp_path / "p.toml")
    assert len(result.tables["track.ephemeris"]) == 8
    assert len(result.warnings) == 1 and "holds the same bytes as" in result.warnings[0]


DECLARATIONS = {
    'params.object = "cutter"\n': ("", "no name of the mover"),
    'params.time_scale = "UTC"\n': ("", "time without scale"),
    'params.height_kind = "ellipsoid"\n': ("", "the kind of height is not said"),
    '"ellipsoid"': ('"sea level"', "height above sea level without undulation"),
    '"ellipsoid"\n': ('"ellipsoid"\nparams.undulation = "12 m"\n', "beside a height above the ellipsoid"),
    'time = "utc", ': ("", "the time column is not declared"),
    ', height = "h"': ("", "a position is latitude, longitude and height, or x, y and z"),
    'height = "h"': ('height = "h", x = "h"', "a position is latitude, longitude and height, or x, y and z"),
    'longitude = "lon"': ('longitud = "lon"', "did you mean longitude?"),
    '"UTC"': ('"TAI"\nparams.time_format = "posix"', "not the scale of posix times"),
    '"UTC"\n': ('"GPS"\nparams.time_format = "gps"\n', "go together"),
    "params.time_scale": ('params.units = { height = "s" }\nparams.time_scale', "needed is one in m"),
    "params.time_scale = ": ('params.units = { object = "m" }\nparams.time_scale = ', "a column without unit"),
    'lat", longitude': ('latt", longitude', "did you mean lat?"),
}


@pytest.mark.parametrize("old", DECLARATIONS)
def test_what_is_left_unsaid_or_contradicts(tmp_path, old):
    new, words = DECLARATIONS[old]
    assert old in PIPELINE
    result = run(tmp_path, text=PIPELINE.replace(old, new, 1))
    assert result.exit_code == 4 and words in str(result.error), str(result.error)


BOOK = '[stations.SHIP]\ntrack = "cutter"\nposition_sigma = "20 m"\nclock = "gnss"\n'


def test_one_mover_in_two_ephemerides_is_refused_where_it_is_used(tmp_path):
    (tmp_path / "book.toml").write_text(BOOK)
    second = PIPELINE.split("[nodes.track]")[1].replace("track.csv", "more.csv")
    (tmp_path / "more.csv").write_text(HEAD + "\n" + "\n".join(r.replace("T12", "T13") for r in ROWS) + "\n")
    text = PIPELINE + "[nodes.more]" + second + '[nodes.s]\nuse = "ingest.stations"\nparams.file = "book.toml"\n'
    both = run(tmp_path, text=text + 'inputs.ephemeris = ["track", "more"]\n')
    assert "book.toml:2:9: stations.SHIP.track: several connected ephemerides hold this track" in str(both.error)
    one = run(tmp_path, text=text + 'inputs.ephemeris = ["more"]\n')
    assert len(one.tables["s.stations"].ephemerides["SHIP"]) == 8


XYZ = PIPELINE.replace(
    'latitude = "lat", longitude = "lon", height = "h"', 'object = "o", x = "x", y = "y", z = "z"'
).replace('params.height_kind = "ellipsoid"\n', "")


def test_movers_are_apart_and_high_ones_may_be_fast(tmp_path):
    """Two ships 90 degrees apart do not jump; a body at 40 000 km in the rotating frame may pass 12 km/s."""
    rows = [
        f"2026-03-01T12:0{k}:00Z,{o},{x},{y},10000"
        for k in range(3)
        for o, x, y in (("A", 6.37e6, 0), ("B", 0, 6.37e6))
    ]
    assert len(run(tmp_path, rows, "utc,o,x,y,z", XYZ).tables["track.ephemeris"]) == 6
    rows = [f"2026-03-01T12:0{k}:00Z,A,4e7,{k * 15e3 * 60},10000" for k in range(3)]
    assert len(run(tmp_path, rows, "utc,o,x,y,z", XYZ).tables["track.ephemeris"]) == 3
    rows[2] = "2026-03-01T12:02:00Z,A,6.37e6,0,10000"
    assert len(run(tmp_path, rows, "utc,o,x,y,z", XYZ).tables["track.ephemeris"]) == 3
    rows = [f"2026-03-01T12:0{k}:00Z,A,6.37e6,{k * 11e3 * 60 / 10},10000" for k in range(3)]
    assert run(tmp_path, rows, "utc,o,x,y,z", XYZ).error is None


def test_counts_as_times(tmp_path):
    wanted = states(run(tmp_path))
    rows = [f"{1772366400000 + 60000 * k}{r[20:]}" for k, r in enumerate(ROWS)]
    text = PIPELINE + 'params.time_format = "posix"\nparams.units = { time = "ms" }\n'
    assert np.allclose(states(run(tmp_path, rows, text=text)), wanted, rtol=0.0, atol=1e-6)
    wrong = run(tmp_path, rows, text=text.replace('"ms"', '"weeks"'))
    assert "found 'weeks'; allowed: s, ms, us, ns" in str(wrong.error)
    rows = [f"2408,{43218 + 60 * k}{r[20:]}" for k, r in enumerate(ROWS)]
    text = PIPELINE.replace("{ time", '{ week = "w", time').replace('"UTC"', '"GPS"') + 'params.time_format = "gps"\n'
    assert np.allclose(states(run(tmp_path, rows, "w," + HEAD, text)), wanted, rtol=0.0, atol=1e-6)


def test_only_the_first_rows_are_listed(tmp_path):
    problems = run(tmp_path, [r.replace("15.5", "x") for r in ROWS * 3]).error.problems
    assert len(problems) == 21 and "4 more unusable rows" in str(problems[-1])
