"""Pairs of doubles against exact fractions."""

from fractions import Fraction

import numpy as np

from shiftfix.physics import doubled


def exact(value):
    return [Fraction(float(a)) + Fraction(float(b)) for a, b in zip(*value, strict=True)]


def test_errors_of_sums_and_products_are_exact():
    random = np.random.default_rng(1)
    a, b = (random.standard_normal(500) * 10.0 ** random.integers(-20, 20, 500) for _ in range(2))
    assert exact(doubled.exact_sum(a, b)) == [Fraction(x) + Fraction(y) for x, y in zip(a, b, strict=True)]
    assert exact(doubled.exact_product(a, b)) == [Fraction(x) * Fraction(y) for x, y in zip(a, b, strict=True)]


def test_thirty_digits_after_cancellation():
    """(1 + x)**2 - 1 - 2 x = x**2, for x = v/c."""
    v = np.array([7.5e3, 1.0, 2.0e8])
    x = doubled.divide(v, 299792458.0)
    one = doubled.pair(np.ones(3))
    whole = doubled.add(one, x)
    rest = doubled.subtract(doubled.subtract(doubled.multiply(whole, whole), one), doubled.multiply(doubled.pair(2.0), x))
    for found, speed in zip(exact(rest), v, strict=True):
        assert abs(found - (Fraction(speed) / 299792458) ** 2) < Fraction(1, 10**31)
    for found, speed in zip(exact(x), v, strict=True):
        assert abs(found * 299792458 / Fraction(speed) - 1) < Fraction(1, 10**31)
    vector = tuple(part[None] for part in x)
    assert abs(exact(doubled.dot(vector, vector))[0] - sum((Fraction(a) / 299792458) ** 2 for a in v)) < Fraction(1, 10**31)
