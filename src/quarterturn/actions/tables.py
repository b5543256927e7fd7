"""Functions given by points: piecewise polynomials between them, tangents beyond the ends.

linear joins the points; cubic is the twice continuously differentiable spline with the not-a-knot condition at its ends
(de Boor, A Practical Guide to Splines, 1978, ch. IV), natural where there are three points; monotone is the once
differentiable cubic that never overshoots its points (Fritsch and Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300).
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache
from typing import Any

INTERPOLATIONS = {
    "linear": "straight lines between the points",
    "cubic": "cubic spline, twice continuously differentiable",
    "monotone": "cubic that never overshoots its points, once continuously differentiable",
}


@lru_cache(maxsize=64)
def coefficients(points: tuple[tuple[Fraction, Fraction], ...], interpolation: str, order: int) -> tuple[Any, Any]:
    """Knots (n,), and coefficients (n + 1, 4) of ascending powers of the distance from the knot at the left.

    Row 0 belongs to what lies left of the first knot and is measured from it, row n to what lies right of the last.
    `order` derivatives have been taken.
    """
    import numpy as np
    from scipy.interpolate import CubicSpline, PchipInterpolator

    x = np.array([float(a) for a, _ in points])
    y = np.array([float(b) for _, b in points])
    between = np.zeros((len(x) - 1, 4))
    if interpolation == "linear" or len(x) == 2:
        between[:, 0], between[:, 1] = y[:-1], np.diff(y) / np.diff(x)
    else:
        ends = "natural" if len(x) == 3 else "not-a-knot"
        spline = CubicSpline(x, y, bc_type=ends) if interpolation == "cubic" else PchipInterpolator(x, y)
        between[:] = spline.c[::-1].T
    width = x[-1] - x[-2]
    last = between[-1]
    left = [y[0], between[0, 1], 0.0, 0.0]
    right = [y[-1], last[1] + 2 * last[2] * width + 3 * last[3] * width**2, 0.0, 0.0]
    rows = np.vstack([left, between, right])
    for _ in range(order):
        rows = np.column_stack([rows[:, 1], 2 * rows[:, 2], 3 * rows[:, 3], np.zeros(len(rows))])
    return x, rows


def interpolated(
    points: tuple[tuple[Fraction, Fraction], ...], interpolation: str, order: int, x: Any, module: Any
) -> Any:
    """The value at x, an array of any shape, with functions from `module` (numpy or jax.numpy)."""
    knots, rows = coefficients(points, interpolation, order)
    place = module.searchsorted(module.asarray(knots), module.asarray(x), side="right")
    distance = x - module.asarray(knots)[module.maximum(place - 1, 0)]
    c = module.asarray(rows)[place]
    return c[..., 0] + distance * (c[..., 1] + distance * (c[..., 2] + distance * c[..., 3]))
