"""The mark to beat: the same pass solved by scipy's least_squares with finite differences over a plain numpy model.

One vector of all parameters (state, rest frequency, drift, one offset a station), an orbit integrated by solve_ivp at each
evaluation, light time by iteration, counts by the difference of emission times. What one writes in an afternoon.
"""

from __future__ import annotations

import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import least_squares

C, GM, RADIUS, J2 = 299792458.0, 3.986004415e14, 6378136.3, 1.0826261739e-3


def orbit(state, span):
    def rates(t, y):
        x = y[:3]
        r2 = x @ x
        r = np.sqrt(r2)
        k = 1.5 * J2 * GM * RADIUS**2 / r2**2 / r
        z2 = 5 * x[2] ** 2 / r2
        a = -GM * x / (r2 * r) + k * x * np.array([z2 - 1, z2 - 1, z2 - 3])
        return np.concatenate([y[3:], a])

    run = dict(method="DOP853", rtol=1e-10, atol=1e-6, dense_output=True)
    return solve_ivp(rates, (0, span[1]), state, **run).sol, solve_ivp(rates, (0, span[0]), state, **run).sol


def model(parameters, station, start, stop, places, span, scale):
    """Return predicted ln(frequency / nominal) of every row; `places(t, station)` gives receivers."""
    p = parameters * scale
    after, before = orbit(p[:6], span)

    def at(t):
        return np.where(t[:, None] >= 0, after(np.maximum(t, 0))[:3].T, before(np.minimum(t, 0))[:3].T)

    def travel(t):
        x = places(t)
        light = np.zeros(t.size)
        for _ in range(4):
            light = np.linalg.norm(x - at(t - light), axis=1) / C
        return light

    ratio = -(travel(stop) - travel(start)) / (stop - start)
    return np.log1p(ratio) + p[6] + p[7] * 0.5 * (start + stop) + np.concatenate([[0.0], p[8:]])[station]


def solve(z, sigma, station, start, stop, places, span, guess):
    """Return scipy's answer."""
    scale = np.concatenate([[1e4] * 3, [10.0] * 3, [1e-6], [1e-9], np.full(guess.size - 8, 1e-6)])

    def residuals(parameters):
        return (z - model(parameters, station, start, stop, places, span, scale)) / sigma

    return least_squares(residuals, guess / scale, method="trf", x_scale="jac"), residuals, scale
