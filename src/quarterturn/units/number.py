"""A plain number that knows what it counts."""

from __future__ import annotations

from typing import Any

from quarterturn.units.quantity import UNKNOWN, Quantity


class Number(float):
    """A float with a `quantity`; arithmetic gives plain floats again."""

    quantity: Quantity

    def __new__(cls, value: float, quantity: Quantity = UNKNOWN) -> Number:
        made = super().__new__(cls, value)
        made.quantity = quantity
        return made

    def __getnewargs__(self) -> tuple[float, Quantity]:  # type: ignore[override]
        return float(self), self.quantity

    @property
    def unit(self) -> str:
        """The unit by name; empty in natural units with a free scale."""
        return self.quantity.name

    def to(self, unit: str, *, scale: str | None = None, dimension: Any = None) -> Number:
        """The number counted in another unit; see `Quantity.converted` for the parameters and errors."""
        factor, quantity = self.quantity.converted(unit, scale, dimension)
        return Number(self * factor, quantity)
