"""Delimited text, station books and positions: what is read, and every bad input refused at once with place and remedy."""

from __future__ import annotations

import gzip
import itertools

import numpy as np
import pytest

from shiftfix.api import run_pipeline

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
    """The same counts tagged at start, middle and end, and late by a known delay, are the same observations (row 17)."""
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
    "decimal comma": (dict(lines=[*LINES, '2026-03-01T13:00:00Z,"158300000,5"']), "log.csv:10", "has a comma; say decimal"),
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


@pytest.mark.parametrize(
    ("sides", "inverted"), [(s, k) for s in itertools.product(("upper", "lower"), repeat=2) for k in (0, 1, 2)]
)
def test_receiver_chains_unwind_to_the_antenna(tmp_path, sides, inverted):
    """Twelve chains of two converters and a tone: sign and sum follow from mixing forwards (common practice)."""
    sky = 158300000.0 + 100.0 * np.arange(6)
    los = (
        (148000000.0, 10295000.0)
        if inverted == 0
        else (168600000.0, 10298000.0)
        if inverted == 1
        else (158000000.0, 298500.0)
    )
    signal = sky
    for side, lo in zip(sides, los, strict=True):
        signal = signal - lo if side == "upper" else lo - signal
    lines = [f"2026-03-01T12:{k:02d}:00Z,{float(v)!r}" for k, v in enumerate(signal)]
    stages = ", ".join(f'{{ lo = "{lo} Hz", side = "{side}" }}' for side, lo in zip(sides, los, strict=True))
    result = run(tmp_path, lines=lines, extra=f'params.frequency_kind = "audio"\nparams.chain = [{stages}]\n')
    assert result.error is None, result.error
    assert np.allclose(result.tables["log.frequencies"].array("received_frequency_hz"), sky, atol=1e-6)


def test_a_million_rows_is_a_matter_for_the_benchmark():
    from pathlib import Path

    assert (Path(__file__).parents[2] / "benchmarks" / "bench_delimited.py").is_file()
