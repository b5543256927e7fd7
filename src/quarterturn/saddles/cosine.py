"""Even paths: functions on [0, L] that come to rest at both ends, by their values at N midpoints.

Such a function is a cosine series of period 2L; its second derivative by the series and its integral by the midpoint
rule converge faster than any power of N where the path is smooth (Boyd, Chebyshev and Fourier Spectral Methods, 2001).
Half of a bounce that is even in time is such a path, and so is an instanton, up to exp(-omega L).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.fft import dct, idct

Floats = NDArray[np.float64]


@lru_cache(maxsize=8)
def second_derivative(points: int) -> Floats:
    """The matrix of d2/ds2 for L = 1, (N, N)."""
    squares = -((np.pi * np.arange(points)) ** 2)
    coefficients = dct(np.eye(points), axis=0, norm="ortho")
    matrix = np.asarray(idct(squares[:, None] * coefficients, axis=0, norm="ortho"))
    matrix.setflags(write=False)
    return matrix


def midpoints(points: int) -> Floats:
    """Of [0, 1]."""
    return (np.arange(points) + 0.5) / points


def coefficients(x: Floats) -> Floats:
    """Of cos(pi k s), along the last axis."""
    c = np.asarray(dct(x, axis=-1)) / x.shape[-1]
    c[..., 0] /= 2
    return c


def tail(x: Floats) -> float:
    """Size of the highest coefficients over the largest beyond the mean."""
    c = np.abs(coefficients(x))
    last = max(4, c.shape[-1] // 16)
    return float(np.max(c[..., -last:]) / max(np.max(c[..., 1:]), 1e-300))


def at(x: Floats, s: Floats, order: int = 0) -> Floats:
    """The series or its first derivative at positions s in units of L, (n, K)."""
    c = coefficients(x)
    k = np.pi * np.arange(x.shape[-1])
    wave = np.cos(np.outer(k, s)) if order == 0 else -k[:, None] * np.sin(np.outer(k, s))
    return np.asarray(c @ wave)


def resampled(x: Floats, points: int) -> Floats:
    """The same path at another number of midpoints."""
    return at(x, midpoints(points))


def kinetic(x: Floats, length: float) -> float:
    """Integral of x'^2 over [0, L], the components summed."""
    c = coefficients(x)
    k = np.pi * np.arange(x.shape[-1])
    return float(np.sum((k * c) ** 2) / (2 * length))


def moments(x: Floats) -> Floats:
    """Mean place and second moments, weighted by the speed squared: they tell paths of equal action apart.

    They do not depend on where the centre lies in time.
    """
    speed = np.sum(at(x, midpoints(x.shape[-1]), order=1) ** 2, axis=0)
    weight = speed / np.sum(speed)
    return np.concatenate([x @ weight, ((x * weight) @ x.T).ravel()])
