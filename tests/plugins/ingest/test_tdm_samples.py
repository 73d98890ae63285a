"""Public samples of tracking data messages, and the values of an independent library beside ours."""

from __future__ import annotations

import pytest

from shiftfix.api import InputError
from shiftfix_ingest.source_files import open_sources
from shiftfix_ingest.tdm import TdmParams, read_tdm
from shiftfix_ingest.tdm_message import parse_message
from shiftfix_ingest.tdm_rules import message_problems

REFUSED = {
    "tdm_e3.kvn": ("tdm_e3.kvn:11: PARTICIPANT_2 out of order", "table 3-3"),  # MODE stands before PARTICIPANT_2
    "tdm_e17.kvn": (
        "tdm_e17.kvn:33: RCS twice at one time",
        "3.4.11",
    ),  # the tag of the last RCS is that of the one before
}


def samples(folder):
    return sorted(p for p in (folder / "tdm").iterdir() if p.suffix in (".kvn", ".xml"))


def test_every_sample_follows_the_rules_or_is_refused_by_number(shared_data):
    found = {}
    for path in samples(shared_data):
        (source,), _, _ = open_sources((path,), lambda p: p.name)
        message, problems = parse_message(source)
        problems += message_problems(message, source.name)
        if problems:
            found[path.name] = str(problems[0])
        else:
            assert all(s.records for s in message.segments) and message.segments
    assert set(found) == set(REFUSED)
    for name, (words, rule) in REFUSED.items():
        assert words in found[name] and rule in found[name]


def test_every_sample_gives_rows_or_says_why_not(shared_data, context):
    rows = {}
    for path in samples(shared_data):
        try:
            table = read_tdm({}, TdmParams(files=(path,), sigma=0.01), context)["frequencies"]
        except InputError as error:
            assert all(p.what and p.where.startswith(path.name) for p in error.problems)
            continue
        rows[path.name] = len(table)
        assert all(s.rows_read == s.rows_accepted + s.rows_rejected for s in table.sources)
    assert rows == {"tdm_e1.kvn": 30, "tdm_e2.kvn": 41}


def test_values_agree_with_an_independent_library(shared_data, tmp_path):
    """Every value of every record, to the last bit (the acceptance is one unit in the last place).

    The library gets the KVN samples without blank lines, as it refuses one before DATA_START.
    """
    library = pytest.importorskip("ccsds_ndm")
    compared = 0
    for path in samples(shared_data):
        (source,), _, _ = open_sources((path,), lambda p: p.name)
        message, _ = parse_message(source)
        copy = tmp_path / path.name
        copy.write_text("\n".join(line for line in path.read_text().splitlines() if line.strip()) + "\n")
        other = library.from_file(str(copy))
        assert len(other.segments) == len(message.segments)
        for mine, theirs in zip(message.segments, other.segments, strict=True):
            assert len(mine.records) == len(theirs.data.observations)
            for record, observation in zip(mine.records, theirs.data.observations, strict=True):
                assert (record.keyword, record.tag) == (observation.keyword, observation.epoch)
                if "PHASE_CT" not in record.keyword:
                    assert float(record.value) == observation.value
                compared += 1
    assert compared > 1500
