"""Tables: every violation in one message, repeated rows once, content decides the fingerprint."""

from __future__ import annotations

import json

import jsonschema
import numpy as np
import pandas as pd
import pytest

from shiftfix.api import (
    Alternative,
    FrequencyTable,
    Parameter,
    Quantity,
    SchemaError,
    Solution,
    Source,
    StationResult,
    cautions_for,
    merge_frequency_tables,
    solution_document,
    solution_schema,
)
from shiftfix.tables.located_toml import TomlSyntaxError, parse_located_toml


def rows(**changes):
    base = {
        "station_id": ["A", "A", "B"],
        "time_tai_ns": [10, 20, 10],
        "received_frequency_hz": [1e8, 1e8 + 1, 1e8 + 2],
        "received_frequency_sigma_hz": [0.1] * 3,
        "nominal_frequency_hz": [1e8] * 3,
        "row_number": [2, 3, 4],
        "source": ["f"] * 3,
    }
    return pd.DataFrame(base | changes)


def test_all_violations_come_at_once():
    with pytest.raises(SchemaError) as caught:
        FrequencyTable(
            rows=rows(
                received_frequency_hz=[1e8, np.nan, -5.0],
                received_frequency_sigma_hz=[0.0, 1, 1],
                flag=["use", "maybe", "use"],
                extra=[1, 2, 3],
            ).drop(columns="station_id")
        )
    text = str(caught.value)
    for words in (
        "station_id: required column is missing",
        "not finite in 1 of 3",
        "value too small",
        "sigma_hz: value too small",
        "flag: value not in the list",
        "extra column without a unit suffix",
    ):
        assert words in text, text


def test_defaults_fill_and_foreign_columns_with_a_unit_pass():
    table = FrequencyTable(rows=rows(temperature_k=[280.0, 281.0, 282.0]))
    assert list(table.array("flag")) == ["use"] * 3
    assert table.array("temperature_k")[1] == 281.0
    assert np.isnan(table.array("cn0_db_hz")).all()
    with pytest.raises(ValueError):
        table.array("time_tai_ns")[0] = 5


def test_fingerprint_follows_content():
    a, b = FrequencyTable(rows=rows()), FrequencyTable(rows=rows())
    assert a.fingerprint() == b.fingerprint()
    assert FrequencyTable(rows=rows(time_tai_ns=[10, 20, 11])).fingerprint() != a.fingerprint()
    assert FrequencyTable(rows=rows(), notes=("x",)).fingerprint() != a.fingerprint()


def test_same_rows_twice_change_nothing_and_are_noted_once():
    one = FrequencyTable(rows=rows(), sources=(Source("f", "0" * 64, 3, 3, 0),))
    merged = merge_frequency_tables((one, one))
    assert len(merged) == 3 and len(merged.sources) == 1
    assert len(merged.notes) == 1 and "3 rows occur twice" in merged.notes[0]
    assert merged.rejects == () and merged.sources == one.sources
    assert list(merged.array("time_tai_ns")) == [10, 10, 20]
    other = FrequencyTable(rows=rows(received_frequency_hz=[1e8 + 3, 1e8 + 4, 1e8 + 5]))
    assert len(merge_frequency_tables((one, other))) == 6


def test_overlapping_logs_are_used_once_and_counted():
    """Another file that repeats two rows, under another nominal frequency, loses them: read = accepted + rejected."""
    one = FrequencyTable(rows=rows(), sources=(Source("f", "0" * 64, 3, 3, 0),))
    second = rows(source=["g"] * 3, time_tai_ns=[10, 20, 30], nominal_frequency_hz=[1.01e8] * 3, row_number=[7, 8, 9])
    other = FrequencyTable(rows=second, sources=(Source("g", "1" * 64, 4, 3, 1),))
    merged = merge_frequency_tables((one, other))
    assert len(merged) == 4 and list(merged.array("source")) == ["f", "f", "f", "g"]
    assert [(r.source, r.row_number) for r in merged.rejects] == [("g", 7), ("g", 8)]
    assert [(s.rows_read, s.rows_accepted, s.rows_rejected) for s in merged.sources] == [(3, 3, 0), (4, 1, 3)]


def test_toml_places_and_syntax_errors():
    document = parse_located_toml(
        b'a = 1\n[b]\nc.d = "x"\n"e f" = [1,\n  2]\n[[g]]\nh = {i = 1}\n[[g]]\nh = 2\n[g.k]\nl = 3\n', "f.toml"
    )
    assert document.place(("a",)) == (1, 5)
    assert document.place(("b", "c", "d")) == (3, 7)
    assert document.key_place(("b", "c", "d")) == (3, 1)
    assert document.place(("b", "e f", 1)) == (5, 3)
    assert document.place(("g", 0, "h", "i")) == (7, 10)
    assert document.place(("g", 1, "h")) == (9, 5)
    assert document.place(("g", 1, "k", "l")) == (11, 5)
    assert document.place(("g", 1, "nothing")) == (8, 1)
    for content, where in (
        (b"a = 1\nb = [1,\n", "f.toml:"),
        (b"a = = 1", "f.toml:1:5"),
        (b"a = '\xff'", "f.toml:1:1"),
        (b"a = 1\na = 2", "f.toml:2:"),
    ):
        with pytest.raises(TomlSyntaxError) as caught:
            parse_located_toml(content, "f.toml")
        assert caught.value.problem.where.startswith(where)


def test_refused_solution_has_every_key_and_validates():
    document = solution_document(
        Solution(
            verdict="not observable",
            verdict_text="text",
            covariance_reason="text",
            epoch_utc="2026-03-01T12:00:00.000000Z",
        ),
        title="t",
        emitter_classes=("distress",),
    )
    jsonschema.Draft202012Validator.check_schema(solution_schema())
    jsonschema.validate(document, solution_schema())
    assert set(document) == set(solution_schema()["required"])
    assert document["state"] == {"position_m": None, "velocity_m_s": None} and document["covariance"] is None
    assert document["exit_code"] == 5 and document["cautions"][0].startswith("DISTRESS")
    json.dumps(document, allow_nan=False)
    broken = dict(document, verdict="perhaps")
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(broken, solution_schema())


def test_cautions_are_always_there_and_classes_add_theirs():
    general = cautions_for(())
    assert len(general) >= 4 and any("Another listed solution" in c for c in general)
    for name, word in (
        ("distress", "rescue"),
        ("maritime", "coastguard"),
        ("aviation", "air-navigation"),
        ("personal", "person"),
        ("space", "collision"),
    ):
        texts = cautions_for((name,))
        assert word in texts[0] and texts[1:] == general
    with pytest.raises(ValueError, match="allowed"):
        cautions_for(("pirate",))
    assert Quantity(1.0).sigma is None


@pytest.mark.parametrize(
    ("frequency_hz", "words"),
    [
        (406.028e6, ["DISTRESS"]),
        (121.5e6, ["DISTRESS", "AVIATION"]),
        (156.8e6 - 9e3, ["DISTRESS", "MARITIME"]),
        (2.182e6, ["DISTRESS"]),
        (158.3e6, ["MARITIME"]),
        (1575.42e6 + 5e3, ["NAVIGATION"]),
        (1176.45e6, ["AVIATION", "NAVIGATION"]),
        (437.26e6, []),
        (401.65e6, []),
        (float("nan"), []),
        (None, []),
    ],
)
def test_a_band_of_safety_services_adds_its_caution_undeclared(frequency_hz, words):
    general = cautions_for(())
    texts = cautions_for((), frequency_hz)
    assert [t.split()[0].rstrip(":") for t in texts[: len(words)]] == words and texts[len(words) :] == general
    assert all("lies in a band of this service" in t for t in texts[: len(words)])
    declared = cautions_for(("distress", "aviation", "maritime", "navigation"), frequency_hz)
    assert not any("lies in a band" in t for t in declared), "declared: no reason needed, no second one"


def delivered(**changes):
    ellipse = {"semi_major_m": 12.0, "semi_minor_m": 7.0, "azimuth_deg": 33.0}
    place = {"latitude_deg": -41.0, "longitude_deg": -26.0, "height_m": 5.1e5}
    base = dict(
        verdict="ambiguous",
        verdict_text="2 solutions fit",
        epoch_utc="2026-03-01T12:00:00.000000Z",
        position_m=np.array([7e6, 1.0, 2.0]),
        velocity_m_s=np.array([3.0, 7.5e3, 4.0]),
        covariance=np.diag([4.0, 5, 6, 7, 8, 9]),
        geodetic=place | {"height_sigma_m": np.float64(3.0), "ellipse_95": ellipse, "ellipse_50": ellipse},
        rest_frequency_hz=437e6,
        rest_frequency_sigma_hz=0.2,
        stations=(StationResult("A", 1e-9, None, None, float("nan"), 3, 1),),
        parameters=(Parameter("x_m", np.float64(7e6), 2.0), Parameter("turn_2_s", 5.0, None, "fixed", "prior")),
        chi_square=np.float64(3.5),
        degrees_of_freedom=4,
        odds=0.7,
        alternatives=(Alternative({"position_m": [1.0, 2.0, 3.0], "velocity_m_s": [4.0, 5.0, 6.0]}, 0.3, 1.1, place),),
        budget={"total": {"position_m": 3.9, "velocity_m_s": 4.9}},
    )
    return Solution(**(base | changes))


def test_delivered_solution_validates_with_everything_in_it():
    document = solution_document(delivered(), title="t", emitter_classes=())
    jsonschema.validate(document, solution_schema())
    assert document["covariance"][1] == [0.0, 5.0, 0.0, 0.0, 0.0, 0.0]
    assert document["stations"][0]["residual_rms_hz"] is None, "not a number becomes null"
    assert document["alternatives"][0]["geodetic"]["latitude_deg"] == -41.0
    assert document["remedy"] and document["exit_code"] == 6
    assert json.loads(json.dumps(document, allow_nan=False)) == document


def test_a_covariance_that_is_not_finite_is_none_with_a_reason():
    document = solution_document(delivered(covariance=np.full((6, 6), np.nan)), title="t", emitter_classes=())
    jsonschema.validate(document, solution_schema())
    assert document["covariance"] is None and "not finite" in document["covariance_reason"]


def test_the_schema_refuses_what_is_no_solution():
    good = solution_document(delivered(), title="t", emitter_classes=())
    for key, value in (
        ("schema_version", 2),
        ("verdict", "perhaps"),
        ("epoch_utc", "2026-03-01 12:00:00"),
        ("frame", "TEME"),
        ("covariance", [[1.0]]),
        ("rest_frequency_hz", None),
        ("cautions", []),
        ("odds", 1.5),
        ("surplus", 1),
    ):
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate(good | {key: value}, solution_schema())
    for key in good:
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate({k: v for k, v in good.items() if k != key}, solution_schema())


def test_every_verdict_has_an_exit_code_and_a_remedy():
    from shiftfix.tables.solution import REMEDIES, VERDICTS

    assert set(REMEDIES) == set(VERDICTS) == set(solution_schema()["properties"]["verdict"]["enum"])
    assert all(bool(REMEDIES[v]) == (code != 0) for v, code in VERDICTS.items())


def test_bundled_orientation_says_how_long_it_holds():
    from shiftfix.api import bundled_earth_orientation

    table = bundled_earth_orientation()
    days = table.array("mjd_utc_1")
    assert np.all(np.diff(days) == 1.0) and days[0] < 42000 < table.last_observed_mjd < days[-1]
    # Leap seconds are announced half a year ahead (IERS Bulletin C): the date lies past the last observed day.
    assert table.leap_seconds_hold_until_mjd > table.last_observed_mjd
    assert np.abs(np.diff(table.array("ut1_minus_tai_s"))).max() < 0.01, "no leap second in UT1 - TAI"
