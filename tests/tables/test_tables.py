"""Tables: every violation in one message, repeated rows once, content decides the fingerprint."""

from __future__ import annotations

import json

import jsonschema
import numpy as np
import pandas as pd
import pytest

from shiftfix.api import (
    FrequencyTable,
    Quantity,
    SchemaError,
    Solution,
    Source,
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


def test_bundled_orientation_says_how_long_it_holds():
    from shiftfix.api import bundled_earth_orientation

    table = bundled_earth_orientation()
    days = table.array("mjd_utc_1")
    assert np.all(np.diff(days) == 1.0) and days[0] < 42000 < table.last_observed_mjd < days[-1]
    # Leap seconds are announced half a year ahead (IERS Bulletin C): the date lies past the last observed day.
    assert table.leap_seconds_hold_until_mjd > table.last_observed_mjd
    assert np.abs(np.diff(table.array("ut1_minus_tai_s"))).max() < 0.01, "no leap second in UT1 - TAI"
