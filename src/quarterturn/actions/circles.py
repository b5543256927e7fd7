"""Circles: theta and theta + period are one point, so that whatever is evaluated there must have one value."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from quarterturn.actions.confinement import value_at
from quarterturn.actions.expression import PI, Atom, Expression, PathAtom, Symbol

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

TRIED = 40  # random points, from a fixed seed


def phase_of(variable: PathAtom, period: Expression) -> Expression:
    """2 pi x / period: the variable itself where the period is 2 pi."""
    return Expression.of(PI).scaled(2) * period.inverse() * Expression.of(variable)


def changed_by_a_turn(
    expression: Expression, periods: Mapping[PathAtom, Expression | None], couplings: Mapping[str, float]
) -> PathAtom | None:
    """The first angle that changes the expression when it goes once round, or None. Tried at random points."""
    import numpy as np

    periods = {v: periods.get(v.value) for v in sorted({*periods, *expression.paths}, key=lambda a: a.key)}
    circles = {v: p for v, p in periods.items() if p is not None and v in expression.paths}
    if not circles:
        return None
    points = np.random.default_rng(20240229).uniform(-2.0, 2.0, size=(len(periods), TRIED))
    lookup: dict[Atom, object] = {Symbol("coupling", n): np.float64(v) for n, v in couplings.items()}

    def values(turned: PathAtom | None, by: float) -> NDArray[np.complex128]:
        here: dict[Atom, object] = {v: points[i] + (by if v == turned else 0.0) for i, v in enumerate(periods)}
        with np.errstate(all="ignore"):
            try:
                found = np.asarray(expression.evaluate({**lookup, **here}, np)).astype(np.complex128)
            except OverflowError:
                found = np.asarray(np.nan, dtype=np.complex128)
        return np.broadcast_to(found, (TRIED,))

    at = values(None, 0.0)
    for variable, period in circles.items():
        after = values(variable, value_at(period, {}))
        known = np.isfinite(at) & np.isfinite(after)
        if (np.abs(after - at)[known] > 1e-8 * (1 + np.abs(at[known]))).any():
            return variable
    return None
