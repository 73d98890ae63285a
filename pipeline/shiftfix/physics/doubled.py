"""Arithmetic with pairs of doubles (32 digits), vectorised: for checks where 16 digits lose all to cancellation."""

from __future__ import annotations

import numpy as np

Pair = tuple[np.ndarray, np.ndarray]
_SPLIT = 134217729.0  # 2**27 + 1


def exact_sum(a: np.ndarray, b: np.ndarray) -> Pair:
    """Return a + b and its rounding error (Knuth 1969)."""
    total = a + b
    part = total - a
    return total, (a - (total - part)) + (b - part)


def exact_product(a: np.ndarray, b: np.ndarray) -> Pair:
    """Return a b and its rounding error (Dekker 1971); factors below 1e300."""
    product = a * b
    a_high, b_high = (_SPLIT * x - (_SPLIT * x - x) for x in (a, b))
    a_low, b_low = a - a_high, b - b_high
    return product, ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low


def add(a: Pair, b: Pair) -> Pair:
    """Return the sum of two pairs."""
    high, low = exact_sum(a[0], b[0])
    low_high, low_low = exact_sum(a[1], b[1])
    high, low = exact_sum(high, low + low_high)
    return exact_sum(high, low + low_low)


def subtract(a: Pair, b: Pair) -> Pair:
    """Return the difference of two pairs."""
    return add(a, (-b[0], -b[1]))


def multiply(a: Pair, b: Pair) -> Pair:
    """Return the product of two pairs."""
    high, low = exact_product(a[0], b[0])
    return exact_sum(high, low + (a[0] * b[1] + a[1] * b[0]))


def divide(a: np.ndarray, b: float) -> Pair:
    """Return the quotient of two doubles as a pair."""
    first = a / b
    high, low = exact_product(first, np.full_like(first, b))
    return exact_sum(first, ((a - high) - low) / b)


def pair(a: np.ndarray | float) -> Pair:
    """Return a double as a pair."""
    a = np.asarray(a, float)
    return a, np.zeros_like(a)


def dot(a: Pair, b: Pair) -> Pair:
    """Return the scalar product over the last axis."""
    products = multiply(a, b)
    total = pair(np.zeros(products[0].shape[:-1]))
    for k in range(products[0].shape[-1]):
        total = add(total, (products[0][..., k], products[1][..., k]))
    return total
