"""Delimited text: what is read, what is noted, and every bad input refused at once with place and remedy."""

from __future__ import annotations

import gzip

import numpy as np
import pytest

from shiftfix.api import InputError, run_pipeline, utc_text

HEAD = """shiftfix = 1
[nodes.log]
use = "ingest.delimited"
params.files = "{files}"
params.columns = {{ time = "t", frequency = "f" }}
params.units = {{ frequency = "{unit}" }}
params.time_scale = "{scale}"
params.time_tag = "{tag}"
params.interval = "10 s"
params.sigma = "1 Hz"
params.station = "ORREL"
params.nominal_frequency = "158.3 MHz"
"""
LINES = [f"2026-03-01T12:{k:02d}:00.500Z,{158300000 + k}.25" for k in range(8)]


def run(
    folder,
    text="",
    *,
    name="log.csv",
    lines=LINES,
    head="t,f",
    extra="",
    files=None,
    unit="Hz",
    scale="UTC",
    tag="middle",
):
    if lines is not None:
        content = ("\n".join([head, *lines]) + "\n") if not isinstance(lines, bytes) else lines
        (folder / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    (folder / "p.toml").write_text(HEAD.format(files=files or name, unit=unit, scale=scale, tag=tag) + extra)
    return run_pipeline(folder / "p.toml")


def test_rows_counts_and_lines(tmp_path):
    result = run(tmp_path)
    table = result.tables["log.frequencies"]
    assert len(table) == 8 and table.sources[0].rows_read == 8
    assert table.array("row_number")[0] == 2 and table.array("source")[0] == "log.csv"
    assert table.array("received_frequency_hz")[3] == 158300003.25
    # 2026-03-01T12:00:00.5Z: TAI - UTC is 37 s since 2017 (IERS Bulletin C).
    seconds = (np.datetime64("2026-03-01T12:00:00") - np.datetime64("1970-01-01T00:00:00")).astype(int)
    assert table.array("time_tai_ns")[0] == (int(seconds) + 37) * 10**9 + 500_000_000


def test_encodings_separators_and_gzip_give_the_same_rows(tmp_path):
    plain = run(tmp_path).tables["log.frequencies"].rows.drop(columns=["source"])
    comma = [line.replace(",", ";").replace(".", ",").replace(",500Z", ".500Z") for line in LINES]
    cases = {
        "bom.csv": (b"\xef\xbb\xbf" + "\n".join(["t,f", *LINES]).encode(), ""),
        "crlf.csv": ("\r\n".join(["t,f", *LINES, ""]).encode(), ""),
        "packed.csv.gz": (gzip.compress("\n".join(["t,f", *LINES]).encode()), ""),
        "tabs.txt": ("\n".join(["t\tf", *[x.replace(",", "\t") for x in LINES]]).encode(), ""),
        "comma.txt": ("\n".join(["t;f", *comma]).encode(), 'params.decimal = ","\n'),
    }
    for name, (content, extra) in cases.items():
        result = run(tmp_path, name=name, lines=content, extra=extra)
        assert result.error is None, (name, result.error)
        assert result.tables["log.frequencies"].rows.drop(columns=["source"]).equals(plain), name
    commented = run(tmp_path, lines=["# tuned anew", *LINES]).tables["log.frequencies"]
    assert commented.array("row_number")[0] == 3


def test_three_tag_conventions_and_a_delay_give_one_table(tmp_path):
    """The same counts tagged at start, middle and end, and late by a known delay, are the same observations."""
    reference = run(tmp_path).tables["log.frequencies"].array("time_tai_ns")
    for tag, shift in (("start", -5.0), ("end", 5.0)):
        moved = [f"2026-03-01T{_clock(60 * k + 0.5 + shift)}Z,{158300000 + k}.25" for k in range(8)]
        assert np.array_equal(
            run(tmp_path, lines=moved, tag=tag).tables["log.frequencies"].array("time_tai_ns"), reference
        )
    late = [f"2026-03-01T{_clock(60 * k + 0.75)}Z,{158300000 + k}.25" for k in range(8)]
    assert np.array_equal(
        run(tmp_path, lines=late, extra='params.delay = "250 ms"\n').tables["log.frequencies"].array("time_tai_ns"),
        reference,
    )


def _clock(seconds):
    total = 12 * 3600 + seconds
    return f"{int(total // 3600):02d}:{int(total % 3600 // 60):02d}:{total % 60:06.3f}"


def test_gps_weeks_are_read(tmp_path):
    """GPS week 2408 second 43200 is 2026-03-01T12:00:00 GPS (week 0 began 1980-01-06)."""
    lines = [f"2408,{43200 + k},158300000" for k in range(4)]
    text = HEAD.format(files="log.csv", unit="Hz", scale="GPS", tag="middle").replace(
        'time = "t"', 'time = "s", week = "w"'
    )
    (tmp_path / "log.csv").write_text("w,s,f\n" + "\n".join(lines) + "\n")
    (tmp_path / "p.toml").write_text(text + 'params.time_format = "gps"\n')
    times = run_pipeline(tmp_path / "p.toml").tables["log.frequencies"].array("time_tai_ns")
    seconds = (np.datetime64("2026-03-01T12:00:00") - np.datetime64("1970-01-01T00:00:00")).astype(int)
    assert times[0] == (int(seconds) + 19) * 10**9


BAD = {
    "no such file": (dict(lines=None, files="none.csv"), "none.csv", "no such file"),
    "empty": (dict(lines=b""), "log.csv", "the file is empty"),
    "binary": (dict(lines=b"\x00\x01\x02" * 50), "log.csv:1", "binary"),
    "truncated": (dict(name="log.csv.gz", lines=gzip.compress(b"t,f\n" * 400)[:-12]), "log.csv.gz", "truncated"),
    "no rows": (dict(lines=[]), "log.csv", "no rows"),
    "kilohertz as hertz": (
        dict(
            lines=[x.replace("158300", "158.300") for x in LINES[:1]]
            + [f"2026-03-01T12:{k:02d}:00Z,158300.0{k}" for k in range(8)]
        ),
        "log.csv:2",
        "1000 times too small",
    ),
    "megahertz as hertz": (
        dict(lines=[f"2026-03-01T12:{k:02d}:00Z,158.3000{k}" for k in range(8)]),
        "log.csv:2",
        "10^6 times too small",
    ),
    "hertz as kilohertz": (dict(unit="kHz"), "log.csv:2", "1000 times too large"),
    "wrong kind of unit": (dict(unit="ms"), "nodes.log.params.units.frequency", "needed is one in Hz"),
    "time without scale": (dict(lines=[x.replace("Z", "") for x in LINES]), "log.csv:2", "must end in Z"),
    "local time": (
        dict(lines=[x.replace("Z", "+02:00") for x in LINES]),
        "log.csv:2",
        "offsets from UTC are not accepted",
    ),
    "day first": (
        dict(lines=[f"01.03.2026 12:{k:02d}:00,158300000" for k in range(8)]),
        "log.csv:2",
        "write the year first",
    ),
    "not finite": (
        dict(lines=[*LINES, "2026-03-01T13:00:00Z,nan", "2026-03-01T13:01:00Z,inf"]),
        "log.csv:10",
        "not a finite number",
    ),
    "negative sigma": (
        dict(
            head="t,f,s",
            lines=[x + ",1" for x in LINES] + ["2026-03-01T13:00:00Z,158300000,-1"],
            extra='params.columns.sigma = "s"\nparams.units.sigma = "Hz"\n',
        ),
        "log.csv:10",
        "sigma is not greater than 0",
    ),
    "impossible date": (dict(lines=[*LINES, "2026-02-30T13:00:00Z,158300000"]), "log.csv:10", "no such date"),
    "missing seconds": (dict(lines=[*LINES, "2026-02-20T13:00Z,158300000"]), "log.csv:10", "seconds are missing"),
    "too many fields": (
        dict(lines=[*LINES, "2026-03-01T13:00:00Z,158300000,7"]),
        "log.csv:10",
        "wrong number of fields",
    ),
    "decimal comma": (
        dict(lines=[*LINES, '2026-03-01T13:00:00Z,"158300000,5"']),
        "log.csv:10",
        "has a comma; say decimal",
    ),
    "unknown column": (dict(head="t,freq"), "log.csv:1", "no column 'f'"),
    "Z in another scale": (dict(scale="TAI"), "log.csv:2", "the declared time scale is TAI"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_with_its_place(case, tmp_path):
    arguments, where, words = BAD[case]
    arguments = dict(arguments)
    extra = arguments.pop("extra", "")
    if extra.startswith("params.columns."):
        # A dotted key cannot extend an inline table: rewrite the declaration.
        (tmp_path / "log.csv").write_text("\n".join([arguments["head"], *arguments["lines"]]) + "\n")
        text = HEAD.format(files="log.csv", unit="Hz", scale="UTC", tag="middle")
        text = text.replace('frequency = "f" }', 'frequency = "f", sigma = "s" }').replace(
            'frequency = "Hz" }', 'frequency = "Hz", sigma = "Hz" }'
        )
        (tmp_path / "p.toml").write_text(text)
        result = run_pipeline(tmp_path / "p.toml")
    else:
        result = run(tmp_path, extra=extra, **arguments)
    assert result.exit_code == 4, result.error
    assert any(where in p.where and words in str(p) for p in result.error.problems), str(result.error)


def test_all_problems_of_all_files_come_in_one_message(tmp_path):
    (tmp_path / "a.csv").write_text("")
    (tmp_path / "b.csv").write_bytes(b"\0\1\2\3")
    (tmp_path / "c.csv").write_text("t,f\n" + "\n".join(LINES))
    (tmp_path / "d.csv").write_text("t,f\n" + "\n".join(LINES))
    text = HEAD.format(files="x", unit="Hz", scale="UTC", tag="middle").replace('"x"', '["*.csv", "none.csv"]')
    (tmp_path / "p.toml").write_text(text)
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4
    for words in (
        "a.csv: the file is empty",
        "b.csv:1: the file is binary",
        "none.csv: no such file",
        "d.csv: the same file is given twice",
    ):
        assert words in str(result.error), str(result.error)
    for name in ("a.csv", "b.csv"):
        (tmp_path / name).unlink()
    (tmp_path / "p.toml").write_text(text.replace(', "none.csv"', "") + 'params.on_repeat = "ignore"\n')
    again = run_pipeline(tmp_path / "p.toml")
    table = again.tables["log.frequencies"]
    assert len(table) == 8 and len(table.notes) == 1


def test_bad_rows_can_be_counted_instead(tmp_path):
    lines = [*LINES, "2026-03-01T13:00:00Z,nan", "yesterday,158300000"]
    table = run(tmp_path, lines=lines, extra='params.on_bad_row = "reject"\n').tables["log.frequencies"]
    source = table.sources[0]
    assert (source.rows_read, source.rows_accepted, source.rows_rejected) == (10, 8, 2)
    assert [(r.source, r.row_number) for r in table.rejects] == [("log.csv", 10), ("log.csv", 11)]
    assert all(r.reason and r.text for r in table.rejects)


WIDE = """params.columns = {{ time = "t", frequency = "f"{more} }}
params.units = {{ frequency = "Hz"{units} }}
"""


def run_wide(folder, head, rows, more, units="", extra="", drop=()):
    """Run with further columns declared."""
    (folder / "log.csv").write_text("\n".join([head, *rows]) + "\n")
    text = HEAD.format(files="log.csv", unit="Hz", scale="UTC", tag="middle")
    lines = [x for x in text.splitlines() if not x.startswith(("params.columns", "params.units", *drop))]
    declared = WIDE.format(more=f", {more}" if more else "", units=units)
    (folder / "p.toml").write_text("\n".join(lines) + "\n" + declared + extra)
    return run_pipeline(folder / "p.toml")


def test_empty_fields_take_the_value_of_the_parameter_or_none(tmp_path):
    rows = [
        f"{x},{s},{c},{rx}"
        for x, s, c, rx in zip(
            LINES, "2,,2,,2,,2,".split(","), "33,,,,33,,,".split(","), "A,,A,,A,,A,".split(","), strict=True
        )
    ]
    more = 'sigma = "s", cn0 = "c", station = "rx"'
    result = run_wide(tmp_path, "t,f,s,c,rx", rows, more, ', sigma = "Hz"')
    assert result.error is None, result.error
    table = result.tables["log.frequencies"]
    assert table.array("received_frequency_sigma_hz").tolist() == [2.0, 1.0] * 4
    assert table.array("station_id").tolist() == ["A", "ORREL"] * 4
    assert np.isfinite(table.array("cn0_db_hz")).tolist() == [True, False, False, False] * 2
    result = run_wide(tmp_path, "t,f,s,c,rx", rows, more, ', sigma = "Hz"', drop=("params.station", "params.sigma"))
    assert result.exit_code == 4
    assert "log.csv:3: station is empty" in str(result.error) and "4 of 8" not in str(result.error)
    only = [x.replace(",A", ",") if k == 2 else x for k, x in enumerate(rows)]
    assert "log.csv:4: sigma" not in str(run_wide(tmp_path, "t,f,s,c,rx", only, more, ', sigma = "Hz"').error)


def test_sigma_that_is_empty_without_a_default(tmp_path):
    rows = [f"{x},{'' if k == 5 else 2}" for k, x in enumerate(LINES)]
    result = run_wide(tmp_path, "t,f,s", rows, 'sigma = "s"', ', sigma = "Hz"', drop=("params.sigma",))
    assert result.exit_code == 4 and "log.csv:7: sigma is empty" in str(result.error)


def test_every_number_is_converted_by_its_own_unit(tmp_path):
    rows = [f"2026-03-01T12:{k:02d}:00.500Z,{158300000.25 + k!r},2500,10000,33,-7,158.3" for k in range(8)]
    more = 'sigma = "s", interval = "i", cn0 = "c", rate = "r", nominal = "n"'
    units = ', sigma = "mHz", interval = "ms", cn0 = "dBHz", rate = "kHz/s", nominal = "MHz"'
    drop = ("params.interval", "params.sigma", "params.nominal_frequency")
    result = run_wide(tmp_path, "t,f,s,i,c,r,n", rows, more, units, drop=drop)
    assert result.error is None, result.error
    table = result.tables["log.frequencies"]
    for column, value in (
        ("received_frequency_sigma_hz", 2.5),
        ("interval_s", 10.0),
        ("cn0_db_hz", 33.0),
        ("frequency_rate_hz_s", -7000.0),
        ("nominal_frequency_hz", 158.3e6),
    ):
        assert np.allclose(table.array(column), value, rtol=1e-15), column


def test_offsets_are_added_to_the_nominal_of_their_row(tmp_path):
    rows = [f"2026-03-01T12:{k:02d}:00Z,{k + 0.5},{158.3 + 0.025 * (k % 2)!r}" for k in range(8)]
    extra = 'params.frequency_kind = "offset"\n'
    result = run_wide(
        tmp_path, "t,f,n", rows, 'nominal = "n"', ', nominal = "MHz"', extra, drop=("params.nominal_frequency",)
    )
    found = result.tables["log.frequencies"].array("received_frequency_hz")
    assert np.allclose(found, [158.3e6 + 25e3 * (k % 2) + k + 0.5 for k in range(8)], rtol=0.0, atol=1e-7)


def test_nominal_frequency_that_is_not_given_is_the_median_of_the_emitter(tmp_path):
    rows = [f"2026-03-01T12:{k:02d}:00Z,{158300000 + k},A" for k in range(5)]
    rows += [f"2026-03-01T12:{k:02d}:00Z,{98100000 + k},B" for k in range(5)]
    result = run_wide(tmp_path, "t,f,e", rows, 'emitter = "e"', drop=("params.nominal_frequency",))
    table = result.tables["log.frequencies"]
    assert table.array("nominal_frequency_hz").tolist() == [158300002.0] * 5 + [98100002.0] * 5


def test_further_columns_pass_or_their_rows_do_not(tmp_path):
    rows = [f"{x},{280.5 + k}" for k, x in enumerate(LINES)]
    extra = 'params.extra = { temperature_k = "T" }\n'
    result = run_wide(tmp_path, "t,f,T", rows, "", extra=extra)
    assert result.tables["log.frequencies"].array("temperature_k")[3] == 283.5
    rows[2] = f"{LINES[2]},warm"
    result = run_wide(tmp_path, "t,f,T", rows, "", extra=extra)
    assert "log.csv:4: temperature_k is not a finite number: 'warm'" in str(result.error)


def test_files_without_header_and_with_a_preamble(tmp_path):
    plain = run(tmp_path).tables["log.frequencies"].rows.drop(columns=["row_number"])
    (tmp_path / "log.csv").write_text("VRX receiver\nserial; 12\n" + "\n".join(LINES) + "\n")
    text = HEAD.format(files="log.csv", unit="Hz", scale="UTC", tag="middle")
    text = text.replace('time = "t", frequency = "f"', "time = 1, frequency = 2")
    (tmp_path / "p.toml").write_text(text + "params.header = false\nparams.skip = 2\n")
    table = run_pipeline(tmp_path / "p.toml").tables["log.frequencies"]
    assert table.array("row_number")[0] == 3
    assert table.rows.drop(columns=["row_number"]).equals(plain)


def test_the_leap_second_reaches_the_table(tmp_path):
    lines = [f"2016-12-31T23:59:{s}Z,158300000" for s in ("59.5", "60.5")] + ["2017-01-01T00:00:00.5Z,158300000"]
    times = run(tmp_path, lines=lines).tables["log.frequencies"].array("time_tai_ns")
    assert np.diff(times).tolist() == [10**9, 10**9]
    assert utc_text(int(times[1])) == "2016-12-31T23:59:60.500000Z"


def test_one_row_in_another_unit_is_found(tmp_path):
    lines = [*LINES, "2026-03-01T13:00:00Z,158300.009"]
    result = run(tmp_path, lines=lines)
    assert "log.csv:10: frequency 158300.009 Hz is 0.001 times the nominal frequency" in str(result.error)
    text = (tmp_path / "p.toml").read_text().replace('params.nominal_frequency = "158.3 MHz"\n', "")
    (tmp_path / "p.toml").write_text(text)
    found = str(run_pipeline(tmp_path / "p.toml").error)
    assert "log.csv:10: frequency 158300.009 Hz is 0.001 times the median of the file" in found


def test_overlapping_files_are_used_once_and_counted(tmp_path):
    (tmp_path / "a.csv").write_text("t,f\n" + "\n".join(LINES[:5]) + "\n")
    (tmp_path / "b.csv").write_text("t,f\n" + "\n".join(LINES[3:]) + "\n")
    (tmp_path / "p.toml").write_text(HEAD.format(files="?.csv", unit="Hz", scale="UTC", tag="middle"))
    table = run_pipeline(tmp_path / "p.toml").tables["log.frequencies"]
    assert len(table) == 8
    assert [(s.rows_read, s.rows_accepted, s.rows_rejected) for s in table.sources] == [(5, 5, 0), (5, 3, 2)]
    assert [(r.source, r.row_number, r.reason) for r in table.rejects] == [
        ("b.csv", 2, "the same observation stands at a.csv:5"),
        ("b.csv", 3, "the same observation stands at a.csv:6"),
    ]
    assert table.notes == ("2 rows occur twice and are used once (from b.csv)",)


def test_two_receivers_under_one_name_are_noted(tmp_path):
    lines = [*LINES, *(x.replace(".25", ".75") for x in LINES[:3])]
    notes = run(tmp_path, lines=lines).tables["log.frequencies"].notes
    assert len(notes) == 1 and "6 rows share station, emitter and time" in notes[0] and "log.csv:2" in notes[0]


def test_overlapping_counts_are_noted_and_absurd_ones_refused(tmp_path):
    lines = [f"2026-03-01T12:00:{k:02d}Z,{158300000 + k}" for k in range(30)]
    notes = run(tmp_path, lines=lines).tables["log.frequencies"].notes
    assert len(notes) == 1 and "intervals of 10 s, rows every 1 s" in notes[0]
    assert run(tmp_path, lines=lines[::10]).tables["log.frequencies"].notes == ()
    text = (tmp_path / "p.toml").read_text().replace('"10 s"', '"1000 s"')
    (tmp_path / "log.csv").write_text("t,f\n" + "\n".join(lines) + "\n")
    (tmp_path / "p.toml").write_text(text)
    assert "far longer than the time between rows" in str(run_pipeline(tmp_path / "p.toml").error)


def test_a_last_line_that_is_cut_off_is_not_taken(tmp_path):
    whole = ("t,f\n" + "\n".join(LINES)).encode()
    assert run(tmp_path, lines=whole).error is None
    result = run(tmp_path, lines=whole[:-3])
    assert "log.csv:9" in str(result.error) and "the file looks truncated" in str(result.error)
    assert run(tmp_path, lines=whole[:-3] + b"\n").error is None
    four = ("t,f\n" + "\n".join(LINES[:4])).encode()[:-3]
    assert "the file looks truncated" in str(run(tmp_path, lines=four).error)


@pytest.mark.parametrize("mode", ["refuse", "reject"])
def test_half_of_the_rows_may_be_rejected_and_no_more(tmp_path, mode):
    extra = f'params.on_bad_row = "{mode}"\n'
    bad = [f"2026-03-01T13:{k:02d}:00Z,none" for k in range(9)]
    half = run(tmp_path, lines=[*LINES, *bad[:8]], extra=extra)
    assert (half.exit_code == 4) == (mode == "refuse")
    more = run(tmp_path, lines=[*LINES, *bad], extra=extra)
    assert more.exit_code == 4
    assert "9 of 17 rows are unusable (9 x frequency is not a finite number)" in str(more.error)


def test_only_the_first_rows_are_listed_and_the_rest_counted(tmp_path):
    lines = [f"2026-03-01T12:{k:02d}:00Z,{158300000 + k}" for k in range(60)]
    lines += [f"2026-03-01T13:{k:02d}:00Z,-1" for k in range(27)]
    problems = run(tmp_path, lines=lines).error.problems
    assert len(problems) == 21 and problems[0].where == "log.csv:62"
    assert "7 more unusable rows" in str(problems[-1]) and 'on_bad_row = "reject"' in problems[-1].remedy
    assert "log.csv: unusable rows: 20" in str(run(tmp_path, lines=lines[:80]).error)


def test_content_of_one_file_is_reported_beside_the_absence_of_another(tmp_path):
    (tmp_path / "log.csv").write_text("t,f\n" + "\n".join([*LINES, "2026-03-01T13:00:00Z,nan"]) + "\n")
    text = HEAD.format(files="x", unit="Hz", scale="UTC", tag="middle").replace('"x"', '["log.csv", "none.csv"]')
    (tmp_path / "p.toml").write_text(text)
    found = str(run_pipeline(tmp_path / "p.toml").error)
    assert "none.csv: no such file" in found and "log.csv:10: frequency is not a finite number: 'nan'" in found


def test_any_damage_gives_a_table_or_a_refusal(tmp_path, context):
    """Random damage to a log with on_bad_row = reject: read = accepted + rejected, or one InputError; nothing else."""
    from shiftfix_ingest.delimited import read_delimited
    from shiftfix_ingest.delimited_params import DelimitedParams

    random = np.random.default_rng(1)
    good = ("t,f,s\n" + "".join(f"{x},0.5\n" for x in LINES * 4)).encode()
    path, alphabet = tmp_path / "log.csv", list(b'",;\t \n\r\0\x0c\xff-.eE_0179Zn:+')
    params = DelimitedParams(
        files=(path,),
        columns={"time": "t", "frequency": "f", "sigma": "s"},
        units={"frequency": "Hz", "sigma": "Hz"},
        time_scale="UTC",
        station="ORREL",
        nominal_frequency=158.3e6,
        on_bad_row="reject",
    )
    taken = 0
    for _ in range(400):
        data = bytearray(good)
        for _ in range(int(random.integers(1, 8))):
            at = int(random.integers(len(data)))
            if random.random() < 0.7:
                data[at] = random.choice(alphabet)
            else:
                del data[at : at + int(random.integers(1, 60))]
        path.write_bytes(bytes(data))
        try:
            table = read_delimited({}, params, context)["frequencies"]
        except InputError:
            continue
        taken += 1
        source = table.sources[0]
        assert source.rows_read == source.rows_accepted + source.rows_rejected
        assert source.rows_accepted == len(table) and source.rows_rejected == len(table.rejects)
        assert len({r.row_number for r in table.rejects} | set(table.array("row_number"))) == source.rows_read
    assert taken > 200


DECLARATIONS = {
    'time_scale = "UTC"': ("", "nodes.log.params.time_scale: time without scale"),
    'time_tag = "middle"': ("", "nodes.log.params.time_tag: counts over an interval without time_tag"),
    'station = "ORREL"': ("", "nodes.log.params.station: no station"),
    'sigma = "1 Hz"': ("", "nodes.log.params.sigma: no 1-sigma"),
    'time = "t", ': ("", "nodes.log.params.columns: the time column is not declared"),
    'units = { frequency = "Hz" }': ("", "nodes.log.params.units.frequency: the unit of the frequency column"),
    'frequency = "Hz"': ('frequenzy = "Hz"', "did you mean frequency?"),
    'frequency = "f"': ('frequency = "f", sigm = "s"', "unknown role of a column"),
    'time = "t"': ("time = 1.5", "nodes.log.params.columns.time: not a column"),
    'frequency = "f" ': ('frequency = "f", week = "w" ', 'a week column needs time_format = "gps"'),
    'station = "ORREL"\n': (
        'station = "ORREL"\nparams.sideband = "upper"\n',
        'sideband needs frequency_kind = "audio"',
    ),
    "nominal_frequency = ": (
        'frequency_kind = "audio"\nparams.nominal_frequency = ',
        "a tone needs the receiver chain",
    ),
    'nominal_frequency = "158.3 MHz"': ('frequency_kind = "offset"', "offsets need the nominal frequency"),
    'interval = "10 s"': ('interval = "10 s"\nparams.separator = "; "', "not one character"),
    'interval = "10 s"\n': ('interval = "10 s"\nparams.header = false\n', "columns by name in a file without header"),
    'sigma = "1 Hz"\n': ('sigma = "0 Hz"\n', "sigma is not greater than 0"),
    'params.time_scale = "UTC"': ('params.time_scale = "TAI"\nparams.unmarked_utc = true', "only for UTC texts"),
    'params.time_scale = "UTC"\n': (
        'params.time_scale = "TAI"\nparams.time_format = "posix"\n',
        "counts UTC days of 86400 s",
    ),
    'time_scale = "UTC"\n': (
        'time_scale = "UTC"\nparams.unmarked_utc = true\nparams.time_format = "posix"\n',
        "only for UTC texts",
    ),
    'units = { frequency = "Hz"': ('units = { frequency = "Hz", sigma = "Hz"', "which is not declared"),
}


@pytest.mark.parametrize("old", DECLARATIONS)
def test_what_is_left_unsaid_or_contradicts(tmp_path, old):
    new, words = DECLARATIONS[old]
    run(tmp_path)
    text = (tmp_path / "p.toml").read_text()
    assert old in text
    changed = text.replace(old, new, 1) if new else text.replace(f"params.{old}\n", "").replace(old, "")
    (tmp_path / "p.toml").write_text(changed)
    result = run_pipeline(tmp_path / "p.toml")
    assert result.exit_code == 4, result.error
    assert words in str(result.error), str(result.error)


SIZES = {
    "offsets in kilohertz as megahertz": (
        'params.frequency_kind = "offset"\n',
        "MHz",
        [10.5] * 8,
        "offsets are too large",
    ),
    "frequencies as offsets": ('params.frequency_kind = "offset"\n', "Hz", [158300000.0] * 8, "not near the nominal"),
    "megahertz as kilohertz": ("", "kHz", [158.3] * 8, "is the column in MHz?"),
    "megahertz as gigahertz": ("", "GHz", [158.3] * 8, "1000 times too large: is the column in MHz?"),
    "a higher channel": ("", "MHz", [200.0] * 8, "not near the nominal frequency"),
    "another channel": ("", "MHz", [98.1] * 8, "not near the nominal frequency"),
}


@pytest.mark.parametrize("case", SIZES)
def test_sizes_that_no_log_has(tmp_path, case):
    extra, unit, values, words = SIZES[case]
    lines = [f"2026-03-01T12:{k:02d}:00Z,{v!r}" for k, v in enumerate(values)]
    result = run(tmp_path, lines=lines, extra=extra, unit=unit)
    assert result.exit_code == 4 and words in str(result.error), str(result.error)


def test_sigmas_that_no_log_has(tmp_path):
    rows = [f"{x},0.5" for x in LINES]
    result = run_wide(tmp_path, "t,f,s", rows, 'sigma = "s"', ', sigma = "MHz"')
    assert result.exit_code == 4 and "1-sigmas are too large for their unit" in str(result.error)


def test_short_intervals_need_a_tag_too(tmp_path):
    run(tmp_path)
    text = (tmp_path / "p.toml").read_text().replace('"10 s"', '"0.5 s"').replace('params.time_tag = "middle"\n', "")
    (tmp_path / "p.toml").write_text(text)
    assert "counts over an interval without time_tag" in str(run_pipeline(tmp_path / "p.toml").error)
    (tmp_path / "p.toml").write_text(text.replace('"0.5 s"', '"0 s"'))
    assert run_pipeline(tmp_path / "p.toml").error is None


def test_a_declared_separator_goes_before_the_one_that_is_found(tmp_path):
    lines = [x.replace(",", "|") + ";rest" for x in LINES]
    result = run(tmp_path, lines=lines, head="t|f;note", extra='params.separator = "|"\n')
    assert "no column 'f' for frequency" in str(result.error) and "f;note" in str(result.error)


def test_neighbouring_bands_in_one_log_are_no_mistake(tmp_path):
    """Without a nominal frequency only powers of a thousand are suspicious, not another carrier."""
    run(tmp_path, lines=[*LINES, "2026-03-01T13:00:00Z,225000000", "2026-03-01T13:01:00Z,98100000"])
    text = (tmp_path / "p.toml").read_text().replace('params.nominal_frequency = "158.3 MHz"\n', "")
    (tmp_path / "p.toml").write_text(text)
    assert run_pipeline(tmp_path / "p.toml").error is None
    (tmp_path / "log.csv").write_text((tmp_path / "log.csv").read_text().replace(",225000000", ",225000"))
    assert run_pipeline(tmp_path / "p.toml").error is None
    (tmp_path / "log.csv").write_text((tmp_path / "log.csv").read_text().replace(",225000", ",160000"))
    assert "log.csv:10: frequency 160000 Hz is 0.00101 times" in str(run_pipeline(tmp_path / "p.toml").error)


def test_intervals_in_a_column(tmp_path):
    rows = [f"{x},{0.5 if k else 0}" for k, x in enumerate(LINES)]
    result = run_wide(tmp_path, "t,f,i", rows, 'interval = "i"', ', interval = "s"')
    assert result.tables["log.frequencies"].array("interval_s").tolist() == [0.0] + [0.5] * 7
    rows[4] = f"{LINES[4]},-0.5"
    result = run_wide(tmp_path, "t,f,i", rows, 'interval = "i"', ', interval = "s"')
    assert "log.csv:6: interval is negative: -0.5 s" in str(result.error)


def test_posix_counts_in_their_unit(tmp_path):
    reference = run(tmp_path).tables["log.frequencies"].array("time_tai_ns")
    lines = [f"{1772366400500 + 60000 * k},{158300000 + k}.25" for k in range(8)]
    run(tmp_path, lines=lines, extra='params.time_format = "posix"\n')
    text = (tmp_path / "p.toml").read_text()
    for unit, good in (("ms", True), ("h", False)):
        (tmp_path / "p.toml").write_text(text.replace('"Hz" }', f'"Hz", time = "{unit}" }}'))
        result = run_pipeline(tmp_path / "p.toml")
        if good:
            assert np.array_equal(result.tables["log.frequencies"].array("time_tai_ns"), reference)
        else:
            assert "nodes.log.params.units.time: not a unit of a count" in str(result.error)
    (tmp_path / "p.toml").write_text(text.replace('"Hz" }', '"Hz", time = "ms" }').replace("posix", "iso"))
    assert "nodes.log.params.units.time: a unit for a role that has none" in str(
        run_pipeline(tmp_path / "p.toml").error
    )


def test_spacing_is_that_of_one_emitter_at_one_station(tmp_path):
    """Two stations, two emitters, counts of 10 s back to back, those of one pair between those of the other."""
    rows = [
        f"2026-03-01T12:00:{10 * k + late:02d}Z,158300000,{s},{e}"
        for s, e, late in (("A", "x", 0), ("B", "y", 5), ("A", "y", 2), ("B", "x", 7))
        for k in range(5)
    ]
    result = run_wide(tmp_path, "t,f,rx,e", rows, 'station = "rx", emitter = "e"')
    assert result.error is None and result.tables["log.frequencies"].notes == ()
