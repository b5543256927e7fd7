"""Values with errors: a number, and a curve.

An estimate whose error can't be defended says so in its state and in the way it prints; the error that was found is
kept in the attribute, for those who want to look at it.
"""

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.estimates.printing import format_unresolved, format_value_error

Array = NDArray[np.float64]

GOOD, UNRESOLVED, WITHHELD = "good", "unresolved", "withheld"


@dataclass(frozen=True)
class Estimate:
    """A number with its error, and how the error was found.

    `float(estimate)` is the value; `str(estimate)` the printed form, 0.3058(12).
    """

    value: float
    error: float | None  # one sigma
    error_error: float | None = None  # one sigma of the error
    tau: float | None = None  # integrated autocorrelation time [draws], 1/2 + sum rho
    tau_error: float | None = None
    n_eff: float | None = None  # effective number of samples, draws / (2 tau)
    window: int | None = None  # lags summed [draws]
    replica_q: float | None = None  # probability that chains which agree differ by more than these do
    state: str = GOOD  # good | unresolved | withheld
    remark: str = ""  # words beside the number
    exact: float | None = None  # an independent value, where there is one
    gradient: Array | None = field(default=None, compare=False, repr=False)  # with respect to the means, (quantities,)

    @property
    def pull(self) -> float | None:
        """(value - exact) / error; None where one of them is missing or the error can't be relied on."""
        if self.exact is None or self.state != GOOD or not self.error:
            return None
        return (self.value - self.exact) / self.error

    def with_exact(self, exact: float | None) -> "Estimate":
        """The same estimate beside an independent value."""
        return replace(self, exact=exact)

    def __float__(self) -> float:
        return float(self.value)

    def __str__(self) -> str:
        if self.state == WITHHELD:
            return "withheld"
        if self.state == UNRESOLVED:
            return format_unresolved(self.value, "unresolved")
        return format_value_error(self.value, self.error)


def withheld(reason: str) -> Estimate:
    """The place of a number that the samples do not support; `reason` says why."""
    return Estimate(value=float("nan"), error=None, state=WITHHELD, remark=reason)


@dataclass(frozen=True, eq=False)
class CurveEstimate:
    """A function of time with correlated errors. Points that do not exist are nan, in all columns."""

    t: Array  # (T,)
    value: Array  # (T,)
    error: Array  # (T,), one sigma
    covariance: Array  # (T, T), of the values
    exact: Array | None = None  # (T,)
    label: str = ""
    state: str = GOOD
    remark: str = ""

    def __len__(self) -> int:
        return len(self.t)
