"""What a number counts, and its conversion into other units.

In natural units a number of mass dimension d becomes GeV^d, fm^-d or kelvin^d through hbar c and k_B, once the one
scale is named. In a laboratory system hbar and k_B may be multiplied in (an inverse time is an energy, a temperature is
one), c may not: a distance between atoms is no inverse energy.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

from quarterturn.errors import RequestError
from quarterturn.units.unit import PURE, Unit, amount, product, ratio, unit

ALL_ONE = ("hbar", "c", "k_B")
IN_A_LABORATORY = ("hbar", "k_B")


@dataclass(frozen=True, slots=True)
class Quantity:
    """What a number counts.

    `unit` is None where natural units name no scale, or where nothing determines the dimension; `ones` are the
    constants that conversions may multiply in.
    """

    unit: Unit | None = None
    dimension: Fraction | None = None  # in powers of mass; natural units only
    ones: tuple[str, ...] = ALL_ONE
    scale: Unit | None = None  # what 1 stands for in natural units, where it has a name

    @property
    def name(self) -> str:
        """The unit as it is printed behind a number; empty where there is none."""
        return self.unit.name if self.unit is not None else ""

    @property
    def words(self) -> str:
        """For a table of couplings: the unit, or the mass dimension; empty where undetermined."""
        if self.unit is not None:
            return self.unit.name or "pure number"
        return "" if self.dimension is None else str(self.dimension)

    def ratio(self, given: Unit, wanted: Unit) -> float | None:
        """How many of `wanted` one of `given` is, in the sense of this system; None where it is none."""
        return ratio(given, wanted, self.ones)

    def converted(self, to: str, scale: str | None = None, dimension: Any = None) -> tuple[float, Quantity]:
        """The factor by which a number is multiplied to be counted in `to`, and what it counts then.

        Parameters
        ----------
        to
            A unit, such as GeV, fm, kelvin, 1/cm, eV, or a product such as GeV^2.
        scale
            In natural units without a named scale: what 1 stands for, such as "GeV", "2.1 GeV" or "0.1 fm".
        dimension
            The mass dimension, where the action does not determine it.

        Raises
        ------
        RequestError
            An unknown unit, one of another dimension (with the dimension that the number has), or a scale that is
            missing or given twice.
        """
        wanted = unit(to)
        given = self._given(wanted, scale, dimension)
        factor = self.ratio(given, wanted)
        if factor is None:
            raise RequestError(f"{self._described(given)}; {wanted.name} {self._wanted(wanted)}")
        return factor, replace(self, unit=wanted)

    def _given(self, wanted: Unit, scale: str | None, dimension: Any) -> Unit:
        if self.unit is not None:
            if scale is not None or dimension is not None:
                word = "scale" if scale is not None else "dimension"
                raise RequestError(f"this number counts {self.name or 'nothing'} already: leave {word} out")
            return self.unit
        if self.ones != ALL_ONE:
            raise RequestError("the action does not determine what this number counts, so it can't be converted")
        mass = self._dimension(dimension)
        if mass == 0:
            return Unit("", 1.0, PURE)
        if scale is None and self.scale is None:
            raise RequestError(
                f"in natural units one scale is free and this number has mass dimension {mass}: name what 1 stands for",
                repair=f'.to("{wanted.name}", scale="GeV")',
            )
        size, named = amount(scale) if scale is not None else (1.0, self.scale)
        assert named is not None
        if not named.dimension or not size > 0:
            raise RequestError(f"scale must be positive and an energy, a length or the like, got {scale!r}")
        power = mass / named.dimension
        return product([(Unit(named.name, size * named.size, named.powers), power)])

    def _dimension(self, given: Any) -> Fraction:
        if self.dimension is None and given is None:
            raise RequestError(
                "the action does not determine the mass dimension of this number: give it, as in dimension=1 for an "
                "energy"
            )
        try:
            asked = None if given is None else Fraction(str(given))
        except (ValueError, ZeroDivisionError):
            raise RequestError(f"dimension must be a number such as 1 or 1/2, got {given!r}") from None
        if self.dimension is not None and asked is not None and asked != self.dimension:
            raise RequestError(f"this number has mass dimension {self.dimension}, not {asked}")
        found = self.dimension if self.dimension is not None else asked
        assert found is not None
        return found

    def _described(self, given: Unit) -> str:
        if given.powers == PURE:
            return "this is a pure number"
        if self.ones == ALL_ONE:
            return f"this number has mass dimension {given.dimension}"
        return f"this number is {given.kind}, in {given.name}"

    def _wanted(self, wanted: Unit) -> str:
        return f"has mass dimension {wanted.dimension}" if self.ones == ALL_ONE else f"is {wanted.kind}"


UNKNOWN = Quantity()  # natural units with a free scale, and a number whose dimension is not determined
