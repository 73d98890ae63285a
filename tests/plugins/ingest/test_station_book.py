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


GEODETIC = GOOD.split("[stations.B]")[0]
MISTAKES = [
    ('"-38.91 deg"', '"38.91 W"', "book.toml:2:12: stations.A.latitude", "are latitude and longitude swapped?"),
    ('"-23.12 deg"', '"360.5 deg"', "book.toml:3:13: stations.A.longitude", "longitude out of range"),
    ('"31 m"', '"-600 m"', "book.toml:4:10: stations.A.height", "height out of range"),
    (GEODETIC, "stations = 5\n", "book.toml:1:12: stations", "the book has no stations"),
    ('"-23.12 deg"', '"-181 deg"', "book.toml:3:13: stations.A.longitude", "longitude out of range"),
    ('"12 m"', '"1200 m"', "book.toml:6:14: stations.A.undulation", "undulation out of range"),
    ('"sea level"', '"ellipsoid"', "book.toml:6:14: stations.A.undulation", "beside a height above the ellipsoid"),
    ('datum = "WGS84"', 'datum = "ITRFoo"', "book.toml:7:9: stations.A.datum", "not geocentric"),
    ('datum = "WGS84"', "datum = 84", "book.toml:7:9: stations.A.datum", "not geocentric"),
    ('datum = "WGS84"', 'datum = "WGS84"\nframe = "ITRF2014"', "book.toml:8:9: stations.A.frame", "no meaning beside"),
    ('position_sigma = "5 m"', 'position_sigma = "-5 m"', "book.toml:8:18: stations.A.position_sigma", "out of range"),
    (
        'reference = "ocxo"',
        'reference = ["ocxo"]',
        "book.toml:9:13: stations.A.reference",
        "unknown class of reference",
    ),
    ('clock = "ntp"', "clock = {}", "book.toml:10:9: stations.A.clock", "unknown class of clock"),
    ('clock = "ntp"', 'clock = "npt"', "book.toml:10:9: stations.A.clock", "did you mean ntp?"),
    (
        'valid_from = "2026-01-01T00:00:00Z"',
        'valid_from = "2026-01-01T00:00:00Z"\nvalid_until = "2025-06-01T00:00:00Z"',
        "book.toml:12:15: stations.A.valid_until",
        "valid_until is not after valid_from",
    ),
    (
        "valid_from = ",
        'track = "cutter"\nvalid_from = ',
        "book.toml:11:9: stations.A.track",
        "both a track and a fixed place",
    ),
    ("valid_from = ", "track = 5\nvalid_from = ", "book.toml:11:9: stations.A.track", "not the name of an object"),
    ('frame = "ITRF2014"', 'frame = "ITRF2014"\nvx = "12 mm/yr"', "book.toml:13:1: stations.B", "without the epoch"),
    (
        'frame = "ITRF2014"',
        'frame = "ITRF2014"\ndatum = "WGS84"',
        "book.toml:18:9: stations.B.datum",
        "no meaning beside",
    ),
    ('frame = "ITRF2014"', 'frame = "local grid"', "book.toml:17:9: stations.B.frame", "without their frame"),
    ('antenna_up = "2 m"', 'antenna_up = "2"', "book.toml:18:14: stations.B.antenna_up", "bare number"),
    ('antenna_up = "2 m"', 'chain = "10 MHz"', "book.toml:18:9: stations.B.chain", "allowed: a list of converters"),
    ('antenna_up = "2 m"', "chain = [{ lo = 10 }]", "book.toml:18:9: stations.B.chain", "converter 1: lo: bare number"),
    ('"3e-8 +/- 1e-8"', '"13 +/- 1"', "book.toml:19:10: stations.B.offset", "must be divided by the frequency"),
    ("[stations.A]", "stations.C = 5\n[stations.A]", "book.toml:1:14: stations.C", "not an entry"),
    (GEODETIC, '[[stations]]\nid = " A"\n', "book.toml:1:1: stations.0", "an entry without id"),
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
    ("latitude =", "lattitude =", "book.toml:2:1: stations.A.lattitude", "did you mean latitude?"),
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
    text = GOOD.replace(old, new, 1)
    result = read(tmp_path, text.split("[stations.B]")[0] if old is GEODETIC else text)
    assert result.exit_code == 4
    assert any(p.where.startswith(where) and words in str(p) for p in result.error.problems), str(result.error)


def test_clashing_ids_are_refused_unless_their_validity_differs(tmp_path):
    one = GOOD.replace("[stations.A]", '[[stations]]\nid = "A"').split("[stations.B]")[0]
    result = read(tmp_path, one + one)
    assert result.exit_code == 4 and "clashes with the entry at book.toml:1:1" in str(result.error)
    first = one.replace('valid_from = "2026-01-01T00:00:00Z"', 'valid_until = "2025-12-31T23:59:59Z"')
    assert len(read(tmp_path, first + one).tables["s.stations"]) == 2
    touching = first.replace("2025-12-31T23:59:59Z", "2026-01-01T00:00:00Z")
    assert len(read(tmp_path, touching + one).tables["s.stations"]) == 2
    assert len(read(tmp_path, one + touching).tables["s.stations"]) == 2
    overlapping = first.replace("2025-12-31T23:59:59Z", "2026-01-01T00:00:01Z")
    assert "clashes with the entry" in str(read(tmp_path, overlapping + one).error)


def test_all_problems_of_a_book_come_at_once(tmp_path):
    text = (
        GOOD.replace('datum = "WGS84"\n', "").replace('undulation = "12 m"\n', "").replace('frame = "ITRF2014"\n', "")
    )
    text = text.replace('"-38.91 deg"', "-38.91").replace('"ocxo"', '"oxco"')
    assert len(read(tmp_path, text).error.problems) == 5


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('"-38.91 deg"', '"38 54 36 S"'),
        ('"-23.12 deg"', '"23.12 W"'),
        ('"-23.12 deg"', '"336.88 deg"'),
        ('"WGS84"', '"wgs 84"'),
        ('"WGS84"', '"ITRF2020"'),
        ('"31 m"', '"0.031 km"'),
    ],
)
def test_ways_of_writing_one_place(tmp_path, old, new):
    wanted, found = (read(tmp_path, t).tables["s.stations"] for t in (GEODETIC, GEODETIC.replace(old, new)))
    for axis in ("x_m", "y_m", "z_m"):
        assert found.array(axis) == pytest.approx(wanted.array(axis), abs=1e-6)


def test_classes_in_any_case_and_own_values_before_those_of_the_class(tmp_path):
    text = GEODETIC.replace('"ocxo"', '"Double oven OCXO"').replace('"ntp"', '"Hand"')
    table = read(tmp_path, text).tables["s.stations"]
    assert table.array("offset_sigma_1")[0] == 1e-8 and table.array("time_sigma_s")[0] == 0.5
    assert table.array("reference_class")[0] == "double-oven-ocxo" and table.array("position_sigma_m")[0] == 5.0
    own = text + 'offset = "2 ppm +/- 0.5 ppm"\ndrift = "1e-13 1/s +/- 2e-13 1/s"\ntime_bias = "-3 ms +/- 2 ms"\n'
    table = read(tmp_path, own).tables["s.stations"]
    assert table.array("offset_1")[0] == pytest.approx(2e-6) and table.array("offset_sigma_1")[0] == pytest.approx(5e-7)
    assert table.array("drift_1_s")[0] == 1e-13 and table.array("drift_sigma_1_s")[0] == 2e-13
    assert table.array("time_bias_s")[0] == -3e-3 and table.array("time_sigma_s")[0] == 2e-3


def test_plate_motion_and_its_epoch(tmp_path):
    """12 mm a Julian year (31 557 600 s)."""
    text = GOOD.replace('frame = "ITRF2014"', 'frame = "ITRF2014"\nvx = "-12 mm/yr"\nepoch = "2015-01-01T00:00:00Z"')
    table = read(tmp_path, text).tables["s.stations"]
    assert table.array("vx_m_s")[1] == pytest.approx(-0.012 / 31557600.0, rel=1e-12)
    # 2015-01-01 is day 16436 since 1970; TAI - UTC was 35 s.
    assert table.array("position_epoch_tai_ns")[1] == (16436 * 86400 + 35) * 10**9


@pytest.mark.parametrize(("field", "axis"), [("antenna_east", 0), ("antenna_north", 1), ("antenna_up", 2)])
def test_antenna_offset_away_from_the_axes(tmp_path, field, axis):
    """The offset lies along the derivative of the position with longitude, latitude or height."""
    before, after = (read(tmp_path, t).tables["s.stations"] for t in (GEODETIC, GEODETIC + f'{field} = "7 m"\n'))
    shift = np.array([after.array(c)[0] - before.array(c)[0] for c in ("x_m", "y_m", "z_m")])
    place, step = np.array([np.radians(-38.91), np.radians(-23.12), 43.0]), np.zeros(3)
    step[(1, 0, 2)[axis]] = (1e-6, 1e-6, 10.0)[axis]
    direction = itrs_from_geodetic(*(place + step)) - itrs_from_geodetic(*(place - step))
    assert shift == pytest.approx(7.0 * direction / np.linalg.norm(direction), abs=1e-6)


CLASSES = {
    "bare-crystal": (5e-5, 1e-9),
    "tcxo": (1e-6, 1e-11),
    "ocxo": (5e-8, 1e-14),
    "double-oven-ocxo": (1e-8, 1e-15),
    "rubidium": (1e-9, 1e-17),
    "gnss-disciplined": (1e-11, 0.0),
    "hydrogen-maser": (1e-13, 0.0),
}


@pytest.mark.parametrize("kind", CLASSES)
def test_what_each_class_of_oscillator_is_worth(tmp_path, kind):
    """Common practice: accuracy after warm-up 2e-5..1e-4, 0.5..2e-6, 5e-8, 1e-8, 1e-9 and 1e-12..1e-11 in this order."""
    table = read(tmp_path, GEODETIC.replace('"ocxo"', f'"{kind}"')).tables["s.stations"]
    assert (table.array("offset_sigma_1")[0], table.array("drift_sigma_1_s")[0]) == CLASSES[kind]


@pytest.mark.parametrize(
    ("kind", "sigma"), [("gnss", 1e-6), ("pps", 1e-4), ("ntp", 0.02), ("hand", 0.5), ("manual", 0.5)]
)
def test_what_each_class_of_clock_is_worth(tmp_path, kind, sigma):
    """Common practice: pulse per second 1 us to 1 ms, network time 5 to 50 ms, by hand 0.5 s."""
    table = read(tmp_path, GEODETIC.replace('"ntp"', f'"{kind}"')).tables["s.stations"]
    assert table.array("time_sigma_s")[0] == sigma


def test_what_is_not_said_is_unknown_and_wide(tmp_path):
    text = GEODETIC.replace('reference = "ocxo"\n', "").replace('position_sigma = "5 m"\n', "")
    table = read(tmp_path, text).tables["s.stations"]
    assert np.isinf(table.array("offset_sigma_1")[0]) and table.array("reference_class")[0] == "unknown"
    assert table.array("position_sigma_m")[0] == 10.0


def test_antenna_offsets_east_north_and_up(tmp_path):
    """At longitude 0 on the equator east, north and up are y, z and x."""
    text = GEODETIC.replace('"-38.91 deg"', '"0 deg"').replace('"-23.12 deg"', '"0 deg"')
    moved = text + 'antenna_east = "3 m"\nantenna_north = "-4 m"\nantenna_up = "5 m"\n'
    before, after = (read(tmp_path, t).tables["s.stations"] for t in (text, moved))
    for axis, step in (("x_m", 5.0), ("y_m", 3.0), ("z_m", -4.0)):
        assert after.array(axis)[0] - before.array(axis)[0] == pytest.approx(step, abs=1e-6)


def test_chain_stands_in_the_table(tmp_path):
    text = GOOD + 'chain = [{ lo = "137 MHz" }, { lo = "30 MHz", side = "lower" }]\n'
    table = read(tmp_path, text).tables["s.stations"]
    assert table.array("chain_sign_1").tolist() == [0.0, -1.0]
    assert table.array("chain_constant_hz").tolist() == [0.0, 167e6]


def test_station_without_clock_is_said(tmp_path):
    result = read(tmp_path, GEODETIC.replace('clock = "ntp"\n', ""))
    assert len(result.warnings) == 1 and "for A: their time tags are taken as exact" in result.warnings[0]
    assert read(tmp_path, GEODETIC).warnings == ()
    assert read(tmp_path, GOOD).warnings == ()


def test_moving_station_needs_an_id_of_its_own(tmp_path):
    one = GEODETIC.replace("[stations.A]", '[[stations]]\nid = "A"')
    text = one + '[[stations]]\nid = "A"\ntrack = "cutter"\nclock = "gnss"\nvalid_until = "2025-01-01T00:00:00Z"\n'
    (tmp_path / "track.csv").write_text(
        "t,x,y,z\n" + "".join(f"2024-03-01T12:0{k}:00Z,4.6e6,1.1e6,4.2e6\n" for k in range(3))
    )
    (tmp_path / "book.toml").write_text(text)
    (tmp_path / "p.toml").write_text(
        PIPELINE + 'inputs.ephemeris = "track"\n[nodes.track]\nuse = "ingest.positions"\nparams.files = "track.csv"\n'
        'params.object = "cutter"\nparams.time_scale = "UTC"\nparams.columns = { time = "t", x = "x", y = "y", z = "z" }\n'
    )
    assert "one of the two moves" in str(run_pipeline(tmp_path / "p.toml").error)
    (tmp_path / "book.toml").write_text(text[len(one) :] + one)
    assert "one of the two moves" in str(run_pipeline(tmp_path / "p.toml").error)


EMITTERS = """[[emitters]]
id = "PILOT"
latitude = "40 43 12 S"
longitude = "-25.05 deg"
height = "210 m"
height_kind = "ellipsoid"
datum = "WGS84"
rest_frequency = "98.1 MHz +/- 1 mHz"
[[emitters]]
id = "ORBITER"
rest_frequency = "437.2 MHz"
"""


def read_emitters(folder, text):
    (folder / "book.toml").write_text(text)
    (folder / "p.toml").write_text(PIPELINE.replace("ingest.stations", "ingest.emitters"))
    return run_pipeline(folder / "p.toml")


def test_known_emitters(tmp_path):
    table = read_emitters(tmp_path, EMITTERS).tables["s.emitters"]
    assert table.array("rest_frequency_hz").tolist() == [98.1e6, 437.2e6]
    assert table.array("rest_frequency_sigma_hz").tolist() == [1e-3, 0.0]
    place = itrs_from_geodetic(np.radians(-40.72), np.radians(-25.05), 210.0)
    assert [table.array(c)[0] for c in ("x_m", "y_m", "z_m")] == pytest.approx(list(place), abs=1e-6)
    assert np.isnan(table.array("x_m")[1])


@pytest.mark.parametrize(
    ("old", "new", "where", "words"),
    [
        ('"ORBITER"', '"PILOT"', "book.toml:9:1: emitters.1", "occurs twice"),
        ('rest_frequency = "437.2 MHz"\n', "", "book.toml:9:1: emitters.1", "rest_frequency is missing"),
        ('"437.2 MHz"', '"437.2 Hz"', "book.toml:11:18: emitters.1.rest_frequency", "not a radio frequency"),
        ('"437.2 MHz"', '"437.2 s"', "book.toml:11:18: emitters.1.rest_frequency", "needed is one in Hz"),
        ('latitude = "40 43 12 S"\n', "", "book.toml:1:1: emitters.0", "latitude is missing"),
        ('id = "PILOT"', 'id = "PILOT"\nclock = "pps"', "book.toml:3:1: emitters.0.clock", "unknown field"),
    ],
)
def test_mistakes_about_emitters(tmp_path, old, new, where, words):
    result = read_emitters(tmp_path, EMITTERS.replace(old, new, 1))
    assert result.exit_code == 4
    assert any(p.where.startswith(where) and words in str(p) for p in result.error.problems), str(result.error)


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
