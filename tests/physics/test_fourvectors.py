"""Four-vectors in their one convention: metric, composition of boosts, aberration, axes, shapes."""

import numpy as np
import pytest

from shiftfix.physics.fourvectors import (
    METRIC,
    boost,
    contraction,
    four_velocity,
    observed_frequency,
    rotation,
    wave_four_vector,
)

N = np.array([0.6, -0.48, 0.64])
BETA = np.array([0.3, 0.5, -0.2])


def test_signature_and_norms():
    """(-, +, +, +): u.u = -1, k.k = 0, and f = -k.u is positive."""
    assert contraction([2.0, 0.0, 0.0, 0.0], [3.0, 0.0, 0.0, 0.0]) == -6.0
    assert contraction([2.0, 1.0, 2.0, 3.0], [3.0, 5.0, 7.0, 11.0]) == -6.0 + 52.0
    u, k = four_velocity(BETA), wave_four_vector(4.0e8, N)
    assert contraction(u, u) == pytest.approx(-1.0, abs=1e-15) and contraction(k, k) == pytest.approx(0.0, abs=1e2)
    assert contraction(k, u) == pytest.approx(k @ METRIC @ u, rel=1e-15)
    assert observed_frequency(k, four_velocity(np.zeros(3))) == 4.0e8
    assert u[0] == pytest.approx(1.0 / np.sqrt(1.0 - 0.38), rel=1e-15)


def test_boosts_keep_the_metric_and_bring_their_own_body_to_rest():
    for beta in (BETA, 1e-9 * BETA, np.zeros(3), np.array([0.0, 0.0, 0.999])):
        matrix = boost(beta)
        # gamma**2 = 500 at 0.999 c
        assert np.abs(matrix.T @ METRIC @ matrix - METRIC).max() < 1e-12
        assert np.abs(matrix @ four_velocity(beta) - [1.0, 0.0, 0.0, 0.0]).max() < 1e-12
    assert (boost(np.zeros(3)) == np.eye(4)).all()


def test_boosts_along_one_line_add_by_einsteins_rule_and_multiply_shifts():
    """beta = (a + b)/(1 + a b); longitudinal factors multiply (Einstein 1905, sec. 5 and 7, from memory)."""
    a, b = 0.5, 0.3
    total = (a + b) / (1.0 + a * b)
    matrix = boost(a * N) @ boost(b * N)
    assert np.abs(matrix - boost(total * N)).max() < 1e-15
    factor = lambda s: np.sqrt((1.0 - s) / (1.0 + s))  # noqa: E731
    k = wave_four_vector(1.0, N)
    assert (matrix @ k)[0] == pytest.approx(factor(a) * factor(b), rel=1e-15)
    assert observed_frequency(k, four_velocity(total * N)) == pytest.approx(factor(a) * factor(b), rel=1e-15)


def test_aberration():
    """cos' = (cos - b)/(1 - b cos) for the direction of travel (Einstein 1905, sec. 7, from memory)."""
    b, cosine = 0.4, -0.3
    k = wave_four_vector(1.0, np.array([cosine, 0.0, np.sqrt(1.0 - cosine**2)]))
    seen = boost(np.array([b, 0.0, 0.0])) @ k
    assert seen[1] / seen[0] == pytest.approx((cosine - b) / (1.0 - b * cosine), rel=1e-15)
    assert seen[0] == pytest.approx((1.0 - b * cosine) / np.sqrt(1.0 - b * b), rel=1e-15)


def test_two_boosts_across_leave_a_rotation():
    """Boosts across each other do not commute; what is left over is a turn by Wigner's angle."""
    first, second = boost([0.6, 0.0, 0.0]), boost([0.0, 0.5, 0.0])
    moved = second @ first
    # The velocity of the rest frame that both together reach, as seen at the start
    u = METRIC @ moved[0] * -1.0
    turn = moved @ boost(-u[1:] / u[0])
    assert np.abs(turn[0] - [1.0, 0.0, 0.0, 0.0]).max() < 1e-14
    g1, g2 = 1.25, 1.0 / np.sqrt(0.75)
    # 1 + cos(angle) = (1 + g1 + g2 + g)**2 / ((1 + g1)(1 + g2)(1 + g)), g = g1 g2
    g = g1 * g2
    expected = (1.0 + g1 + g2 + g) ** 2 / ((1.0 + g1) * (1.0 + g2) * (1.0 + g)) - 1.0
    assert turn[1, 1] == pytest.approx(expected, rel=1e-13) and expected < 0.99
    turned = rotation(turn[1:, 1:])
    assert np.abs(turned - turn).max() < 1e-14 and (turned[0] == [1, 0, 0, 0]).all()


def test_shapes():
    many = np.stack([BETA, -BETA, np.zeros(3), 0.1 * BETA]).reshape(2, 2, 3)
    assert four_velocity(many).shape == (2, 2, 4)
    waves = wave_four_vector(np.full((2, 2), 2.0), np.broadcast_to(N, (2, 2, 3)))
    assert waves.shape == (2, 2, 4) and observed_frequency(waves, four_velocity(many)).shape == (2, 2)
    assert np.ndim(contraction(four_velocity(BETA), wave_four_vector(1.0, N))) == 0
