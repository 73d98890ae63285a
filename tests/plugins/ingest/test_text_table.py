"""Lines to columns of text: every layout, every row of the wrong width by its line, and no file that breaks the reader."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from shiftfix_ingest.source_files import SourceFile
from shiftfix_ingest.text_table import read_text_table


def source(data):
    return SourceFile(Path("log.csv"), "log.csv", "0" * 64, data if isinstance(data, bytes) else data.encode())


def read(data, **options):
    table, problem = read_text_table(source(data), **options)
    assert problem is None, problem
    return table


def columns(table):
    return [table.column(k).tolist() for k in range(table.width)]


PLAIN = "t,f\na,1\nb,2\nc,3\n"


@pytest.mark.parametrize(
    ("text", "options"),
    [
        (PLAIN, {}),
        (PLAIN.replace("\n", "\r\n"), {}),
        (PLAIN.replace("\n", "\r"), {}),
        (PLAIN.encode("utf-8-sig"), {}),
        (PLAIN.encode("utf-16"), {}),
        (PLAIN.replace(",", ";"), {}),
        (PLAIN.replace(",", "\t"), {}),
        (PLAIN.replace(",", "|"), {}),
        (PLAIN.replace(",", " "), {}),
        (PLAIN.replace(",", "   "), {"separator": " "}),
        (PLAIN.replace(",", "\t \t"), {"separator": "whitespace"}),
        (PLAIN.replace(",", " ; "), {}),
        (PLAIN.replace("b,2", '"b","2"'), {}),
        (PLAIN.replace("b,2", "b,2,").replace("a,1", "a,1,"), {}),
        (PLAIN.rstrip("\n"), {}),
    ],
)
def test_layouts_give_the_same_columns(text, options):
    table = read(text, **options)
    assert columns(table) == [["a", "b", "c"], ["1", "2", "3"]]
    assert table.names == ["t", "f"] and table.numbers.tolist() == [2, 3, 4] and not table.ragged


def test_line_numbers_survive_comments_blank_lines_and_a_preamble():
    table = read("Receiver 7\nserial, 12\n#\nt,f\n\na,1\n  \n# retuned\nb,2\nc\nd,4\n", skip=2)
    assert table.head == 4 and table.numbers.tolist() == [6, 9, 11]
    assert table.ragged == {10: "wrong number of fields in the row: 1, not 2"}
    assert len(table) == 4
    assert [table.lines[n - 1] for n in table.numbers] == ["a,1", "b,2", "d,4"]


def test_rows_keep_their_order_when_some_are_quoted():
    table = read('t,f\na,1\n"b, then",2\nc,3\n"d",4\n"e,5\n')
    assert columns(table) == [["a", "b, then", "c", "d"], ["1", "2", "3", "4"]]
    assert table.numbers.tolist() == [2, 3, 4, 5]
    assert table.ragged == {6: "a quote is not closed in the row"}


def test_odd_line_separators_inside_a_line_do_not_shift_numbers():
    """Form feed, NEL and the Unicode separators end no line in an editor, and none here."""
    table = read("t,f\na\x0c,1\nb\u2028x,2\nc\x85,3\n")
    assert table.numbers.tolist() == [2, 3, 4]


def test_columns_by_name_number_and_what_is_said_when_they_are_not_there():
    table = read("utc,freq,rx,rx\na,1,2,3\n")
    where, problems = table.place({"time": 1, "frequency": "freq"})
    assert where == {"time": 0, "frequency": 1} and not problems
    _, problems = table.place({"time": "utz", "station": "rx", "sigma": 5, "cn0": True})
    texts = [str(p) for p in problems]
    assert "log.csv:1: no column 'utz' for time" in texts[0] and "did you mean utc?" in texts[0]
    assert "column 'rx' for station occurs 2 times" in texts[1] and "give its number" in texts[1]
    assert "no column 5 for sigma" in texts[2] and "no column True" in texts[3]


def test_what_is_not_text():
    for data, words in (
        (b"t,f\n1,\xe4\n", "log.csv:2: not UTF-8 text"),
        ("t,f\n1,2".encode("utf-16") + b"\x00", "UTF-16 text is truncated"),
        (b"PK\x03\x04" + b"x" * 50, "is a zip archive"),
        (b"\0\1\2\3" * 20, "the file is binary"),
        (b"t,f\n", "the file has no rows"),
        (b"\n\n", "the file has no rows"),
    ):
        table, problem = read_text_table(source(data))
        assert table is None and words in str(problem), problem
    assert read(b"t,f\n1,\xe4\n", encoding="latin-1").column(1).tolist() == ["ä"]


def test_no_file_breaks_the_reader():
    """Random changes to a log: each gives a table or a problem, and read = kept + of the wrong width."""
    random = np.random.default_rng(20260301)
    good = b't,f,s\n' + b"".join(b'2026-03-01T12:00:%02dZ,1583000%02d.5,"0.5"\n' % (k, k) for k in range(30))
    alphabet = list(b'",;\t \n\r\0\x0b\x0c\x1c\xff\xe2\x80\xa8#-.eE_0179Zn\\\'')
    for _ in range(3000):
        data = bytearray(good)
        for _ in range(int(random.integers(1, 6))):
            at = int(random.integers(len(data)))
            kind = random.integers(3)
            if kind == 0:
                data[at] = random.choice(alphabet)
            elif kind == 1:
                data.insert(at, int(random.choice(alphabet)))
            else:
                del data[at : at + int(random.integers(1, 40))]
        table, problem = read_text_table(source(bytes(data)))
        assert (table is None) != (problem is None)
        if table is not None:
            assert len(table.fields) == len(table.numbers)
            rows = [s for s in table.lines[table.head :] if s.strip() and not s.startswith("#")]
            assert len(table) == len(rows)


def test_an_overlong_quoted_field_is_a_row_of_the_wrong_width():
    table = read('t,f\na,1\n"' + "x" * 200_000 + '",2\n')
    assert table.numbers.tolist() == [2] and list(table.ragged) == [3]
