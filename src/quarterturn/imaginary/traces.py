"""Traces over the sites of a periodic lattice, from the eigenvalues of its transfer matrix."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from quarterturn.imaginary.basis import Numbers
from quarterturn.imaginary.problem import Local

Floats = NDArray[np.float64]


def pair(ratios: Floats, left: Numbers, right: Numbers, steps: NDArray[np.int_], sites: int) -> Numbers:
    """Tr(T^{N-n} f T^n g) / lambda_0^N at the separations `steps`, (T,); eigenvalues as `ratios` to the largest."""
    before, after = ratios ** (sites - steps)[:, None], ratios ** steps[:, None]
    return np.asarray(np.sum((before @ (left * right.T)) * after, axis=1))


def chain(ratios: Floats, elements: Sequence[Numbers], apart: Sequence[int]) -> float | complex:
    """Tr(f_1 T^n_1 f_2 T^n_2 …) / lambda_0^N, the last distance closing the ring."""
    product = elements[0]
    for distance, element in zip(apart[:-1], elements[1:], strict=True):
        product = (product * ratios[None, :] ** distance) @ element
    value = np.sum(np.diag(product) * ratios ** apart[-1])
    return complex(value) if np.iscomplexobj(value) else float(value)


def together(functions: Sequence[Local]) -> Local:
    """The product of functions of the paths at one time."""

    def product(q: Floats) -> Floats:
        value = functions[0](q)
        for f in functions[1:]:
            value = value * f(q)
        return value

    return product
