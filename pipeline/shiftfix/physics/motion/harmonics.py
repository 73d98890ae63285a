"""Attraction of the Earth's field in spherical harmonics: acceleration and its gradient, earth-fixed axes.

The regular solid harmonics are homogeneous polynomials of x, y, z. With s = a x / r^2 (the Kelvin transform) the whole
series and its derivatives are a few polynomials of s, evaluated as one matrix product over all points. This is regular
at the poles.
"""

from __future__ import annotations

from functools import lru_cache
from math import factorial, sqrt

import numpy as np

from shiftfix.physics.constants import EARTH_RADIUS_M, GM_EARTH_M3_S2

# EGM2008 (N. K. Pavlis et al., J. Geophys. Res. 117, 2012, B04406), tide-free, fully normalised: degree, order, C, S.
# Degrees 2-4 as published in the model's coefficient file; the zonals of degree 5 and 6 are from memory.
EGM2008_COEFFICIENTS = (
    (2, 0, -4.841651437908150e-04, 0.0),
    (2, 1, -2.066155090741760e-10, 1.384413891379790e-09),
    (2, 2, 2.439383573283130e-06, -1.400273703859340e-06),
    (3, 0, 9.571612070934730e-07, 0.0),
    (3, 1, 2.030462010478640e-06, 2.482004158568720e-07),
    (3, 2, 9.047878948095281e-07, -6.190054751776180e-07),
    (3, 3, 7.213217571215680e-07, 1.414349261929410e-06),
    (4, 0, 5.399658666389910e-07, 0.0),
    (4, 1, -5.361573893888670e-07, -4.735673465180860e-07),
    (4, 2, 3.505016239626490e-07, 6.624800262758289e-07),
    (4, 3, 9.908567666723210e-07, -2.009567235674520e-07),
    (4, 4, -1.885196330230330e-07, 3.088038821491940e-07),
    (5, 0, 6.867029137366810e-08, 0.0),
    (6, 0, -1.499539279785270e-07, 0.0),
)


def _times(polynomial: np.ndarray, axis: int) -> np.ndarray:
    """Multiply a polynomial, held as coefficients [i, j, k] of x^i y^j z^k, by x, y or z."""
    return np.roll(polynomial, 1, axis=axis)


def _derivative(polynomial: np.ndarray, axis: int) -> np.ndarray:
    """Differentiate a polynomial held as coefficients [i, j, k]."""
    shape = [1, 1, 1]
    shape[axis] = -1
    exponent = np.arange(polynomial.shape[axis]).reshape(shape)
    return np.roll(polynomial * exponent, -1, axis=axis)


def _solid_harmonics(degree: int) -> dict[tuple[int, int], tuple[np.ndarray, np.ndarray]]:
    """Return r^n P_nm (cos, sin)(m lambda), unnormalised and without the Condon-Shortley sign, as polynomials."""
    size = degree + 1
    one = np.zeros((size, size, size))
    one[0, 0, 0] = 1.0
    harmonics = {(0, 0): (one, np.zeros_like(one))}
    for m in range(1, degree + 1):
        real, imaginary = harmonics[m - 1, m - 1]
        harmonics[m, m] = (
            (2 * m - 1) * (_times(real, 0) - _times(imaginary, 1)),
            (2 * m - 1) * (_times(imaginary, 0) + _times(real, 1)),
        )
    for m in range(degree):
        for n in range(m + 1, degree + 1):
            parts = []
            for part in (0, 1):
                value = (2 * n - 1) * _times(harmonics[n - 1, m][part], 2)
                if n - 2 >= m:
                    lower = harmonics[n - 2, m][part]
                    square = sum(_times(_times(lower, axis), axis) for axis in range(3))
                    value = value - (n + m - 1) * square
                parts.append(value / (n - m))
            harmonics[n, m] = tuple(parts)
    return harmonics


def _norm(n: int, m: int) -> float:
    """Return the factor from fully normalised to unnormalised coefficients."""
    return sqrt((1 if m == 0 else 2) * (2 * n + 1) * factorial(n - m) / factorial(n + m))


class EarthField:
    """Spherical-harmonic attraction of the Earth, monopole included.

    Parameters
    ----------
    degree : int
        Degree and order up to which all terms are kept, 0 to 4.
    zonal_degree : int
        Degree up to which the zonal terms are kept, 0 to 6.

    Notes
    -----
    Left out: terms of degree 5 and above but two zonals (about 1e-7 of the monopole each in LEO, hundreds of metres
    after a day), tides (3e-8 of it) and the rates of the coefficients (below 1e-10).
    """

    def __init__(self, degree: int, zonal_degree: int):
        if not (0 <= degree <= 4 and 0 <= zonal_degree <= 6):
            raise ValueError(f"field: found degree {degree}, zonals to {zonal_degree}; allowed 0..4 and 0..6")
        kept = [
            term for term in EGM2008_COEFFICIENTS if term[0] <= degree or (term[1] == 0 and term[0] <= zonal_degree)
        ]
        self.needs_rotation = any(m > 0 for _, m, _, _ in kept)
        largest = max((n for n, *_ in kept), default=1)
        harmonics = _solid_harmonics(largest)
        size = largest + 1
        total, once, twice = (np.zeros((size, size, size)) for _ in range(3))
        for n, m, cosine, sine in ((0, 0, 1.0, 0.0), *kept):
            polynomial = _norm(n, m) * (cosine * harmonics[n, m][0] + sine * harmonics[n, m][1])
            total += polynomial
            once += (2 * n + 1) * polynomial
            twice += (2 * n + 1) * (2 * n + 3) * polynomial
        gradient = [_derivative(total, axis) for axis in range(3)]
        pairs = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))
        rows = [once, twice, *gradient, *(_derivative(once, axis) for axis in range(3))]
        rows += [_derivative(gradient[a], b) for a, b in pairs]
        table = np.array(rows).reshape(len(rows), -1)
        used = np.flatnonzero(np.any(table != 0.0, axis=0))
        self._exponents = np.unravel_index(used, (size, size, size))
        self._table = np.ascontiguousarray(table[:, used])
        self._size = size

    def attraction(self, position: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return acceleration and its gradient.

        Parameters
        ----------
        position : ndarray (k, 3)
            Earth-fixed (ITRS) position [m], outside the Earth.

        Returns
        -------
        acceleration : ndarray (k, 3)
            [m/s2], earth-fixed axes.
        gradient : ndarray (k, 3, 3)
            d acceleration / d position [1/s2], symmetric.
        """
        x = np.ascontiguousarray(position.T)
        inverse = 1.0 / np.sqrt(np.einsum("ik,ik->k", x, x))
        unit = x * inverse
        ratio = EARTH_RADIUS_M * inverse
        s = unit * ratio
        powers = np.empty((self._size, 3, x.shape[1]))
        powers[0] = 1.0
        for k in range(1, self._size):
            np.multiply(powers[k - 1], s, out=powers[k])
        i, j, k = self._exponents
        values = self._table @ (powers[i, 0] * powers[j, 1] * powers[k, 2])
        once, twice, gradient, weighted, second = values[0], values[1], values[2:5], values[5:8], values[8:14]
        strength = GM_EARTH_M3_S2 * inverse * inverse
        acceleration = strength * (ratio * gradient - once * unit)
        strength *= inverse
        mixed = ratio * weighted - (0.5 * twice) * unit
        square = ratio * ratio
        tensor = np.empty((3, 3, x.shape[1]))
        row = 0
        for a in range(3):
            for b in range(a, 3):
                tensor[a, b] = square * second[row] - mixed[a] * unit[b] - unit[a] * mixed[b]
                if a == b:
                    tensor[a, a] -= once
                else:
                    tensor[b, a] = tensor[a, b]
                row += 1
        tensor *= strength
        return acceleration.T, tensor.transpose(2, 0, 1)


@lru_cache(maxsize=32)
def earth_field(degree: int, zonal_degree: int) -> EarthField:
    """Return the field for a degree and a zonal degree (built once in a process)."""
    return EarthField(degree, zonal_degree)
