"""The solver against NIST StRD nonlinear regression: matching digits of values, standard errors and residual sum.

Source: NIST Statistical Reference Datasets, nonlinear regression (Misra1a, MGH09, BoxBOD, DanWood): data and certified
values from memory; the certified residual sum of squares confirms the data.
"""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.estimation.fit import joint_covariance
from shiftfix.estimation.leastsquares import minimise, projection

MISRA_X = np.array([77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0])
MISRA_Y = np.array([10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78])
MGH_X = np.array([4.0, 2.0, 1.0, 0.5, 0.25, 0.167, 0.125, 0.1, 0.0833, 0.0714, 0.0625])
MGH_Y = np.array([0.1957, 0.1947, 0.1735, 0.16, 0.0844, 0.0627, 0.0456, 0.0342, 0.0323, 0.0235, 0.0246])
BOX_X, BOX_Y = np.array([1.0, 2, 3, 5, 7, 10]), np.array([109.0, 149, 149, 191, 213, 224])
DAN_X = np.array([1.309, 1.471, 1.490, 1.565, 1.611, 1.680])
DAN_Y = np.array([2.138, 3.421, 3.597, 4.340, 4.882, 5.660])


def exponential(b, x):
    return b[0] * (1 - np.exp(-b[1] * x)), np.column_stack([1 - np.exp(-b[1] * x), b[0] * x * np.exp(-b[1] * x)])


def rational(b, x):
    top, bottom = x**2 + x * b[1], x**2 + x * b[2] + b[3]
    partials = [top / bottom, b[0] * x / bottom, -b[0] * top * x / bottom**2, -b[0] * top / bottom**2]
    return b[0] * top / bottom, np.column_stack(partials)


def power(b, x):
    return b[0] * x ** b[1], np.column_stack([x ** b[1], b[0] * x ** b[1] * np.log(x)])


CASES = {
    "Misra1a far": (
        exponential,
        MISRA_X,
        MISRA_Y,
        [500, 0.0001],
        [238.94212918, 5.5015643181e-4],
        [2.7070075241, 7.2668688436e-6],
        0.12455138894,
    ),
    "Misra1a near": (
        exponential,
        MISRA_X,
        MISRA_Y,
        [250, 0.0005],
        [238.94212918, 5.5015643181e-4],
        [2.7070075241, 7.2668688436e-6],
        0.12455138894,
    ),
    "MGH09 near": (
        rational,
        MGH_X,
        MGH_Y,
        [0.25, 0.39, 0.415, 0.39],
        [0.19280693458, 0.19128232873, 0.12305650693, 0.13606233068],
        [0.011435312227, 0.19633220911, 0.080842031232, 0.090025542308],
        3.0750560385e-4,
    ),
    "BoxBOD near": (
        exponential,
        BOX_X,
        BOX_Y,
        [100, 0.75],
        [213.80940889, 0.54723748542],
        [12.354515176, 0.10455993237],
        1168.0088766,
    ),
    "DanWood far": (
        power,
        DAN_X,
        DAN_Y,
        [1, 5],
        [0.76886226176, 3.8604055871],
        [0.018281973860, 0.051726610913],
        4.3173084083e-3,
    ),
    "DanWood near": (
        power,
        DAN_X,
        DAN_Y,
        [0.7, 4],
        [0.76886226176, 3.8604055871],
        [0.018281973860, 0.051726610913],
        4.3173084083e-3,
    ),
}


def digits(found, certified):
    """Return the number of matching digits of the worst value."""
    return float(-np.log10(np.maximum(np.abs(np.asarray(found) / np.asarray(certified) - 1), 1e-16)).min())


@pytest.mark.parametrize("case", CASES)
def test_certified_values(case):
    model, x, y, start, values, errors, residual_sum = CASES[case]
    minimum = minimise(
        lambda b: model(b, x)[0] - y,
        lambda b: model(b, x)[1],
        np.array(start, float),
        max_iterations=500,
        tolerance=1e-22,
    )
    assert digits(minimum.parameters, values) > 7.0
    assert digits([minimum.cost], [residual_sum]) > 9.0
    covariance, _, _ = joint_covariance(minimum.jacobian, np.zeros((0, len(start))))
    sigma = np.sqrt(np.diag(covariance) * minimum.cost / (len(y) - len(start)))
    assert digits(sigma, errors) > 6.0


def test_projection_equals_joint_solution():
    """Eliminating linear parameters and solving for all at once give the same (Golub & Pereyra 1973)."""
    random = np.random.default_rng(5)
    a, b, z = random.standard_normal((40, 2)), random.standard_normal((40, 3)), random.standard_normal(40)
    prior = np.array([[0.0, 2.0, 0.0]])
    eliminate = projection(b, prior, np.array([0.7]))
    step = np.linalg.lstsq(eliminate.jacobian(a), -eliminate.residuals(z), rcond=None)[0]
    stacked = np.vstack([np.hstack([a, b]), np.hstack([np.zeros((1, 2)), prior])])
    joint = np.linalg.lstsq(stacked, np.append(z, 0.7), rcond=None)[0]
    assert np.allclose(step, joint[:2], atol=1e-12)
    assert np.allclose(eliminate.linear(z - a @ step), joint[2:], atol=1e-12)


def test_gain_is_the_derivative_of_the_estimate():
    random = np.random.default_rng(6)
    design, lower = random.standard_normal((30, 4)) * [1, 1e3, 1e-3, 5], np.zeros((0, 4))
    covariance, gain, condition = joint_covariance(design, lower)
    # Columns of size 1e3 and 1e-3: rounding of 1e-16 times their ratio.
    assert np.allclose(gain @ design, np.eye(4), atol=1e-9)
    assert np.allclose(gain @ gain.T, covariance, rtol=1e-10)
    assert 1.0 < condition < 10.0, "columns are scaled before the condition is judged"


def test_steps_shorten_at_a_forbidden_region():
    def residuals(b):
        if b[0] <= 0:
            raise ValueError("outside the domain")
        return np.array([np.log(b[0]) + 3.0])

    minimum = minimise(residuals, lambda b: np.array([[1 / b[0]]]), np.array([9.0]))
    assert minimum.converged
    assert minimum.parameters[0] == pytest.approx(np.exp(-3.0), rel=1e-3)
