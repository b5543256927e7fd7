"""Taylor polynomials of sine and cosine, and how they are summed."""

from __future__ import annotations

import math

import jax.numpy as jnp
from jax import Array

# in x^2, to 1e-16 on an eighth of a turn
SINE = tuple((-1) ** j / math.factorial(2 * j + 1) for j in range(8))  # of sin(x)/x
COSINE = tuple((-1) ** j / math.factorial(2 * j) for j in range(9))


def horner(coefficients: tuple[float, ...], z: Array) -> Array:
    total: Array | float = coefficients[-1]
    for coefficient in coefficients[-2::-1]:
        total = total * z + coefficient
    return jnp.asarray(total)
