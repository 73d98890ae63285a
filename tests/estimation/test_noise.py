"""Covariance of consecutive counts: what neighbours share, and what the whitening makes of it."""

from __future__ import annotations

import numpy as np
from scipy.stats import kstest

from shiftfix.estimation.colour import gather, portmanteau
from shiftfix.estimation.editing import NEGLIGIBLE_WEIGHT
from shiftfix.estimation.noise import whitener
from shiftfix.estimation.observations import observations
from shiftfix.estimation.widening import block_covariance


def dense(sigma, chained):
    c = np.diag(sigma**2)
    for i in range(1, sigma.size):
        if chained[i]:
            c[i, i - 1] = c[i - 1, i] = -0.5 * sigma[i] * sigma[i - 1]
    return c


def rows_of(n=40, breaks=(13, 27)):
    record = np.zeros(n, int)
    for b in breaks:
        record[b:] += 1
    return observations(
        station=np.zeros(n, int),
        middle_s=30.0 * np.arange(n),
        interval_s=np.full(n, 30.0),
        received_hz=np.full(n, 1.5e9),
        sigma_hz=np.full(n, 0.002),
        reference_hz=1.5e9,
        phase_arc=record.astype(str),
    )[0]


def test_whitening_is_the_inverse_factor_of_the_true_covariance():
    rows = rows_of()
    assert rows.chained.sum() == 40 - 3
    w = whitener(rows.sigma, rows.chained)
    factor = w(np.eye(40))
    assert np.allclose(factor @ dense(rows.sigma, rows.chained) @ factor.T, np.eye(40), atol=1e-7)


def test_phase_differences_equal_phases_with_one_constant():
    """Estimates from differenced phases with their covariance equal those from the phases themselves."""
    random = np.random.default_rng(3)
    n = 60
    t = np.arange(n + 1.0)
    phase = 0.3 * t + 0.02 * t**2 + 0.1 * random.standard_normal(n + 1)
    design = np.column_stack([t, t**2])
    w = whitener(np.full(n, 0.1 * np.sqrt(2)), np.r_[False, np.ones(n - 1, bool)])
    differenced = np.linalg.lstsq(w(np.diff(design, axis=0)), w(np.diff(phase)), rcond=None)[0]
    direct = np.linalg.lstsq(np.column_stack([design, np.ones(n + 1)]), phase, rcond=None)[0][:2]
    assert np.allclose(differenced, direct, rtol=1e-5)


def test_rejected_row_leaves_the_others_as_if_it_were_not_there():
    rows = rows_of()
    weights = np.ones(40)
    weights[20] = NEGLIGIBLE_WEIGHT
    x = np.random.default_rng(1).standard_normal((40, 2))
    y = np.random.default_rng(2).standard_normal(40)
    w = whitener(rows.sigma, rows.chained, weights)
    with_weight = np.linalg.lstsq(w(x), w(y), rcond=None)[0]
    keep = np.arange(40) != 20
    fewer = rows.select(keep)
    assert not fewer.chained[20], "the row after a gap starts a new chain"
    v = whitener(fewer.sigma, fewer.chained)
    without = np.linalg.lstsq(v(x[keep]), v(y[keep]), rcond=None)[0]
    assert np.allclose(with_weight, without, rtol=1e-6)


def test_portmanteau_is_uniform_for_white_noise_and_small_for_drift():
    p = [
        portmanteau(np.random.default_rng(s).standard_normal(300), np.zeros(300, int), np.arange(300.0))[1]
        for s in range(200)
    ]
    assert kstest(p, "uniform").pvalue > 1e-3
    drifting = np.random.default_rng(0).standard_normal(300) + np.linspace(-1, 1, 300)
    assert portmanteau(drifting, np.zeros(300, int), np.arange(300.0))[1] < 1e-6


def test_blocks_stay_within_records_and_keep_the_covariance():
    rows = rows_of(90, (31,))
    blocks = gather(rows, np.ones(90, bool), 12)
    assert np.allclose(blocks.matrix.sum(1), 1.0)
    assert all((blocks.matrix[:, :31].sum(1) > 0) != (blocks.matrix[:, 31:].sum(1) > 0))
    expected = blocks.matrix @ dense(rows.sigma, rows.chained) @ blocks.matrix.T
    # The whitening's safety term of 1e-9 of the variance is not in the dense matrix.
    assert np.allclose(block_covariance(blocks.matrix, whitener(rows.sigma, rows.chained)), expected, rtol=1e-6)
