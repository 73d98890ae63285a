"""Station books: positions from every accepted form, and every ambiguity refused with line, column and remedy."""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.api import itrs_from_geodetic, run_pipeline

PIPELINE = 'shiftfix = 1\n[nodes.s]\nuse = "ingest.stations"\nparams.file = "book.toml"\n'
GOOD = """[stations.A]
latitude = "-38.91 deg"
longitude = "-23.12 deg"
height = "31 m"
height_kind = "sea level"
undulation = "12 m"
datum = "WGS84"
position_sigma = "5 m"
reference = "ocxo"
clock = "ntp"
valid_from = "2026-01-01T00:00:00Z"

[stations.B]
x = "4075578.385 m"
y = "931852.890 m"
z = "4801570.154 m"
frame = "ITRF2014"
antenna_up = "2 m"
offset = "3e-8 +/- 1e-8"
time_bias = "2 ms +/- 1 ms"
"""


def read(folder, text):
    (folder / "book.toml").write_text(text)
    (folder / "p.toml").write_text(PIPELINE)
    return run_pipeline(folder / "p.toml")


def test_positions_and_priors(tmp_path):
    table = read(tmp_path, GOOD).tables["s.stations"]
    position = np.column_stack([table.array(c) for c in ("x_m", "y_m", "z_m")])
    assert np.allclose(position[0], itrs_from_geodetic(np.radians(-38.91), np.radians(-23.12), 43.0), atol=1e-6)
    # 49.1442261 N 12.8789043 E 666.04 m: a published pair of coordinates, moved up by the antenna.
    up = position[1] - [4075578.385, 931852.890, 4801570.154]
    assert np.linalg.norm(up) == pytest.approx(2.0, abs=1e-9)
    assert np.allclose(
        position[1], itrs_from_geodetic(np.radians(49.1442261), np.radians(12.8789043), 668.04), atol=0.02
    )
    assert table.array("offset_1")[1] == 3e-8 and table.array("offset_sigma_1")[1] == 1e-8
    assert table.array("offset_sigma_1")[0] == 5e-8 and table.array("time_sigma_s")[0] == 0.02
    assert table.array("time_bias_s")[1] == pytest.approx(2e-3)


MISTAKES = [
    ('datum = "WGS84"\n', "", "book.toml:1:1: stations.A", "station without datum"),
    ('datum = "WGS84"', 'datum = "ED50"', "book.toml:7:9: stations.A.datum", "transform local datums"),
    ('undulation = "12 m"\n', "", "book.toml:5:15: stations.A.height_kind", "without undulation"),
    ('height_kind = "sea level"', 'height_kind = "msl"', "book.toml:5:15: stations.A.height_kind", "kind of height"),
    ('height_kind = "sea level"\n', "", "book.toml:1:1: stations.A", "kind of height"),
    ('"-38.91 deg"', "-38.91", "book.toml:2:12: stations.A.latitude", "bare number"),
    ('"-38.91 deg"', '"-138.91 deg"', "book.toml:2:12: stations.A.latitude", "swapped"),
    ('"31 m"', '"31 km"', "book.toml:4:10: stations.A.height", "height out of range"),
    ('longitude = "-23.12 deg"\n', "", "book.toml:1:1: stations.A", "longitude is missing"),
    ('reference = "ocxo"', 'reference = "oxco"', "book.toml:9:13: stations.A.reference", "did you mean ocxo?"),
    ('clock = "ntp"', 'clock = "sundial"', "book.toml:10:9: stations.A.clock", "unknown class of clock"),
    ("latitude =", "lattitude =", "book.toml:2:1", "did you mean latitude?"),
    ("2026-01-01T00:00:00Z", "1.1.2026", "book.toml:11:14: stations.A.valid_from", "write the year first"),
    ('frame = "ITRF2014"\n', "", "book.toml:13:1: stations.B", "without their frame"),
    ('"4075578.385 m"', '"4075.578385 m"', "book.toml:14:5: stations.B.x", "not near the Earth's surface"),
    ('x = "4075578.385 m"\n', "", "book.toml:13:1: stations.B", "x is missing"),
    (
        'x = "4075578.385 m"',
        'x = "4075578.385 m"\nlatitude = "1 deg"',
        "book.toml:13:1: stations.B",
        "both geodetic and Cartesian",
    ),
    ('x = "4075578.385 m"\ny = "931852.890 m"\nz = "4801570.154 m"\n', "", "book.toml:13:1: stations.B", "no position"),
    ('"3e-8 +/- 1e-8"', '"3e-8 +/- 0"', "book.toml:19:10: stations.B.offset", "greater than 0"),
    ("[stations.B]", "[station.B]", "book.toml:13:1: station", "unknown table"),
    ("[stations.B]", "[stations.B", "book.toml:13:", "not valid TOML"),
]


@pytest.mark.parametrize("number", range(len(MISTAKES)))
def test_each_mistake_is_named_at_its_place(number, tmp_path):
    old, new, where, words = MISTAKES[number]
    assert old in GOOD
    result = read(tmp_path, GOOD.replace(old, new, 1))
    assert result.exit_code == 4
    assert any(p.where.startswith(where) and words in str(p) for p in result.error.problems), str(result.error)


def test_clashing_ids_are_refused_unless_their_validity_differs(tmp_path):
    one = GOOD.replace("[stations.A]", '[[stations]]\nid = "A"').split("[stations.B]")[0]
    result = read(tmp_path, one + one)
    assert result.exit_code == 4 and "clashes with the entry at book.toml:1:1" in str(result.error)
    first = one.replace('valid_from = "2026-01-01T00:00:00Z"', 'valid_until = "2025-12-31T23:59:59Z"')
    assert len(read(tmp_path, first + one).tables["s.stations"]) == 2


def test_station_on_a_ship_takes_its_track(tmp_path):
    (tmp_path / "track.csv").write_text(
        "utc,lat,lon,h\n" + "\n".join(f"2026-03-01T12:{k:02d}:00Z,-41.{k:02d},-26.5,15" for k in range(5))
    )
    (tmp_path / "book.toml").write_text('[stations.SHIP]\ntrack = "cutter"\nposition_sigma = "20 m"\nclock = "gnss"\n')
    text = PIPELINE + 'inputs.ephemeris = ["track"]\n[nodes.track]\nuse = "ingest.positions"\n'
    text += 'params.files = "track.csv"\nparams.object = "cutter"\n'
    text += 'params.columns = { time = "utc", latitude = "lat", longitude = "lon", height = "h" }\nparams.time_scale = "UTC"\n'
    (tmp_path / "p.toml").write_text(text + 'params.height_kind = "ellipsoid"\n')
    result = run_pipeline(tmp_path / "p.toml")
    table = result.tables["s.stations"]
    assert list(table.ephemerides) == ["SHIP"] and len(table.ephemerides["SHIP"]) == 5
    (tmp_path / "p.toml").write_text(text)
    assert "kind of height is not said" in str(run_pipeline(tmp_path / "p.toml").error)
    (tmp_path / "p.toml").write_text(PIPELINE)
    assert "no connected ephemeris holds this track" in str(run_pipeline(tmp_path / "p.toml").error)
