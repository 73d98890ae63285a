"""Receiver chains: sign and sum of every combination, dials and sidebands, chains of the station book."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from shiftfix.api import run_pipeline
from shiftfix_ingest.receiver_chain import chain_terms, sky_frequency

SKY = 158300000.0 + 100.0 * np.arange(6)


def mix(signal, stages):
    """Mix forwards, as the hardware does: what lies above the oscillator keeps its order, what lies below is turned over."""
    for side, lo in stages:
        signal = signal - lo if side == "upper" else lo - signal
    return signal


def chain(stages):
    return [{"lo": f"{lo!r} Hz", "side": side} for side, lo in stages]


@pytest.mark.parametrize(
    ("sides", "oscillators"),
    list(
        itertools.product(
            itertools.product(("upper", "lower"), repeat=2),
            ((147.6e6, 10.695e6), (168.9e6, 10.245e6), (137.6e6, 20.705e6)),
        )
    ),
)
def test_twelve_chains_of_two_converters(sides, oscillators):
    stages = tuple(zip(sides, oscillators, strict=True))
    sign, constant = chain_terms(chain(stages))
    assert sign == (-1.0 if sides.count("lower") % 2 else 1.0)
    assert np.allclose(sky_frequency(mix(SKY, stages), sign, constant), SKY, rtol=0.0, atol=1e-6)


@pytest.mark.parametrize("sides", list(itertools.product(("upper", "lower"), repeat=4)))
def test_longer_chains_before_a_dial(sides):
    """Three converters and a dial with sideband: sixteen combinations."""
    stages = tuple(zip(sides, (130.0e6, 35.0e6, 9.0e6, 2.0e6), strict=True))
    sign, constant = chain_terms(chain(stages[:3]))
    tone = mix(SKY, stages)
    assert np.allclose(sky_frequency(tone, sign, constant, 2.0e6, sides[3]), SKY, rtol=0.0, atol=1e-6)


def test_no_chain_is_no_change():
    assert chain_terms([]) == (1.0, 0.0)
    assert np.array_equal(sky_frequency(SKY, 1.0, 0.0), SKY)


@pytest.mark.parametrize(
    ("stages", "words"),
    [
        ([{"side": "upper"}], "converter 1: found ['side']; allowed: lo, side, name; lo is required"),
        ([{"lo": "1 MHz"}, {"lo": "2 MHz", "if": "1 MHz"}], "converter 2: found ['if', 'lo']"),
        ([{"lo": "1 MHz", "side": "high"}], "found side 'high'; allowed: upper, lower"),
        ([{"lo": 10}], "converter 1: lo: bare number 10"),
        ([{"lo": "10 ms"}], "a quantity in s"),
        ([{"lo": "-10 MHz"}], "greater than 0"),
        ([{"lo": "0 Hz"}], "greater than 0"),
        (["10 MHz"], "converter 1: found '10 MHz'"),
        ("10 MHz", "allowed: a list of converters"),
        ({"lo": "10 MHz"}, "allowed: a list of converters"),
    ],
)
def test_what_is_no_chain(stages, words):
    with pytest.raises(ValueError) as caught:
        chain_terms(stages)
    assert words in str(caught.value)


LOG = """shiftfix = 1
[nodes.log]
use = "ingest.delimited"
params.files = "log.csv"
params.columns = {{ time = "t", frequency = "f", station = "rx"{columns} }}
params.units = {{ frequency = "Hz"{units} }}
params.time_scale = "UTC"
params.sigma = "1 Hz"
params.nominal_frequency = "158.3 MHz"
params.frequency_kind = "audio"
"""
BOOK = """[stations.{id}]
latitude = "38.91 S"
longitude = "23.12 W"
height = "31 m"
height_kind = "ellipsoid"
datum = "WGS84"
clock = "pps"
"""


def run(folder, rows, extra="", columns="", units="", book=None):
    head = "t,rx,f" + (",d" if columns else "")
    (folder / "log.csv").write_text("\n".join([head, *rows]) + "\n")
    text = LOG.format(columns=columns, units=units) + extra
    if book is not None:
        (folder / "book.toml").write_text(book)
        text += '[nodes.stations]\nuse = "ingest.stations"\nparams.file = "book.toml"\n'
        text = text.replace("[nodes.log]\n", '[nodes.log]\ninputs.stations = "stations"\n')
    (folder / "p.toml").write_text(text)
    return run_pipeline(folder / "p.toml")


def rows(tones, station="ORREL", dial=None, day=1):
    dials = [""] * len(tones) if dial is None else [f",{d!r}" for d in dial]
    return [
        f"2026-03-{day:02d}T12:{k:02d}:00Z,{station},{float(f)!r}{d}"
        for k, (f, d) in enumerate(zip(tones, dials, strict=True))
    ]


def received(result):
    assert result.error is None, result.error
    return result.tables["log.frequencies"].array("received_frequency_hz")


@pytest.mark.parametrize("side", ["upper", "lower"])
def test_retuned_dial_in_a_column(tmp_path, side):
    """A receiver retuned in steps of 1 kHz: the tone jumps, the sky frequency does not."""
    dial = [158298.0 + k // 2 for k in range(6)] if side == "upper" else [158302.0 + k // 2 for k in range(6)]
    tones = [(s - 1e3 * d) * (1 if side == "upper" else -1) for s, d in zip(SKY, dial, strict=True)]
    result = run(tmp_path, rows(tones, dial=dial), f'params.sideband = "{side}"\n', ', dial = "d"', ', dial = "kHz"')
    assert np.allclose(received(result), SKY, rtol=0.0, atol=1e-6)


def test_one_dial_for_all_rows(tmp_path):
    extra = 'params.dial = "158.302 MHz"\nparams.sideband = "lower"\n'
    assert np.allclose(received(run(tmp_path, rows(158302000.0 - SKY), extra)), SKY, rtol=0.0, atol=1e-6)


def test_chains_of_the_station_book_by_station_and_time(tmp_path):
    """ORREL changed its converter at noon of the second day; QUOIN turns the spectrum over."""
    book = (
        BOOK.format(id="X").replace("[stations.X]", '[[stations]]\nid = "ORREL"')
        + 'chain = [{ lo = "148 MHz" }]\nvalid_until = "2026-03-02T00:00:00Z"\n'
        + BOOK.format(id="X").replace("[stations.X]", '[[stations]]\nid = "ORREL"')
        + 'chain = [{ lo = "149 MHz" }]\nvalid_from = "2026-03-02T00:00:00Z"\n'
        + BOOK.format(id="X").replace("[stations.X]", '[[stations]]\nid = "QUOIN"')
        + 'chain = [{ lo = "169 MHz", side = "lower" }]\n'
    )
    log = [
        *rows(SKY - 148e6),
        *rows(SKY - 149e6, day=3),
        *rows(169e6 - SKY, station="QUOIN"),
    ]
    result = run(tmp_path, log, book=book)
    assert np.allclose(received(result), np.tile(SKY, 3), rtol=0.0, atol=1e-6)


def test_station_without_chain_is_named(tmp_path):
    book = BOOK.format(id="ORREL") + 'chain = [{ lo = "148 MHz" }]\n' + BOOK.format(id="QUOIN")
    log = [*rows(SKY - 148e6), *rows(SKY[:2] - 148e6, station="QUOIN")]
    result = run(tmp_path, log, book=book)
    assert result.exit_code == 4
    assert "log.csv:8: the station book has no receiver chain of station 'QUOIN' at that time" in str(result.error)


def test_chain_of_the_parameters_goes_before_that_of_the_book(tmp_path):
    book = BOOK.format(id="ORREL") + 'chain = [{ lo = "148 MHz" }]\n'
    result = run(tmp_path, rows(SKY - 149e6), 'params.chain = [{ lo = "149 MHz" }]\n', book=book)
    assert np.allclose(received(result), SKY, rtol=0.0, atol=1e-6)


def test_a_book_without_any_chain_is_no_chain(tmp_path):
    result = run(tmp_path, rows(SKY - 148e6), book=BOOK.format(id="ORREL"))
    assert result.exit_code == 4 and "a tone needs the receiver chain" in str(result.error)


def test_a_dial_needs_no_chain_in_the_book(tmp_path):
    extra = 'params.dial = "158.302 MHz"\nparams.sideband = "lower"\n'
    book = BOOK.format(id="ORREL") + BOOK.format(id="QUOIN") + 'chain = [{ lo = "148 MHz" }]\n'
    found = received(run(tmp_path, rows(158302000.0 - SKY), extra, book=book))
    assert np.allclose(found, SKY, rtol=0.0, atol=1e-6)
