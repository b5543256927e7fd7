"""Values with errors: a number, and a curve.

An estimate whose error can't be defended says so in its state and in the way it prints; the error that was found is
kept in the attribute, for those who want to look at it.
"""

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.estimates.printing import format_unresolved, format_value_error
from quarterturn.units.quantity import UNKNOWN, Quantity

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
    quantity: Quantity = UNKNOWN  # what the number counts

    @property
    def pull(self) -> float | None:
        """(value - exact) / error; None where one of them is missing or the error can't be relied on."""
        if self.exact is None or self.state != GOOD or not self.error:
            return None
        return (self.value - self.exact) / self.error

    def with_exact(self, exact: float | None) -> "Estimate":
        """The same estimate beside an independent value."""
        return replace(self, exact=exact)

    @property
    def unit(self) -> str:
        """The unit by name; empty in natural units with a free scale."""
        return self.quantity.name

    def to(self, unit: str, *, scale: str | None = None, dimension: Any = None) -> "Estimate":
        """The estimate counted in another unit, its error with it.

        Parameters
        ----------
        unit
            Such as "GeV", "fm", "kelvin", "1/cm", "eV", "GeV^2".
        scale
            In natural units without a named scale: what 1 stands for, such as "2.1 GeV" or "0.1 fm".
        dimension
            The mass dimension, where the action does not determine it.

        Raises
        ------
        RequestError
            An unknown unit, one of another dimension, a scale that is missing or given twice.
        """
        factor, quantity = self.quantity.converted(unit, scale, dimension)
        scaled = {
            name: None if number is None else number * factor
            for name, number in (("value", self.value), ("error", self.error), ("error_error", self.error_error),
                                 ("exact", self.exact), ("gradient", self.gradient))
        }  # fmt: skip
        return replace(self, quantity=quantity, **scaled)  # type: ignore[arg-type]

    def __float__(self) -> float:
        return float(self.value)

    def __str__(self) -> str:
        if self.state == WITHHELD:
            return "withheld"
        unresolved = self.state == UNRESOLVED
        text = format_unresolved(self.value, "unresolved") if unresolved else format_value_error(self.value, self.error)
        return f"{text} {self.unit}".rstrip()


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
    quantity: Quantity = UNKNOWN  # what its values count
    step: Quantity = UNKNOWN  # what t counts

    def __len__(self) -> int:
        return len(self.t)

    @property
    def unit(self) -> str:
        """The unit of the values by name; empty in natural units with a free scale."""
        return self.quantity.name

    def to(
        self, unit: str | None = None, *, time: str | None = None, scale: str | None = None, dimension: Any = None
    ) -> "CurveEstimate":
        """The curve with its values counted in `unit` and its times in `time`; what is None stays as it is.

        Other parameters and errors as `Estimate.to`.
        """
        factor, quantity = (1.0, self.quantity) if unit is None else self.quantity.converted(unit, scale, dimension)
        pace, step = (1.0, self.step) if time is None else self.step.converted(time, scale)
        return replace(
            self, t=self.t * pace, value=self.value * factor, error=self.error * factor,
            covariance=self.covariance * factor**2, exact=None if self.exact is None else self.exact * factor,
            quantity=quantity, step=step,
        )  # fmt: skip
