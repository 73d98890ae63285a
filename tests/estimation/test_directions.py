"""Directions in words: the shares of the axes are squares and sum to 100 %."""

from __future__ import annotations

import re

import numpy as np
import pytest

from shiftfix.estimation.covariance import describe_direction, local_axes

NAMES = ("radial", "along-track", "cross-track")


@pytest.mark.parametrize(
    ("vector", "text"),
    [
        ((0.6, 0.0, -0.8), "64 % cross-track, 36 % radial"),
        ((5.0, -3.0, 4.0), "50 % radial, 32 % cross-track, 18 % along-track"),
        ((0.0, -7.0, 0.3), "along-track"),
        ((1.0, 0.05, 10.0), "cross-track"),
        ((0.0, 0.0, 0.0), "no direction"),
    ],
)
def test_shares_in_words(vector, text):
    assert describe_direction(np.array(vector), np.eye(3), NAMES) == text


def test_shares_sum_to_all():
    axes = local_axes(np.array([7.0e6, 1.0e5, -2.0e6]), np.array([100.0, 7.5e3, 30.0]))
    for seed in range(20):
        text = describe_direction(np.random.default_rng(seed).standard_normal(3), axes, NAMES)
        shares = [int(s) for s in re.findall(r"(\d+) %", text)]
        assert not shares or abs(sum(shares) - 100) <= 3, "each rounded by half, one of up to 1 % left out"
