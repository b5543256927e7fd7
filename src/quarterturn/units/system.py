"""The units of an action: natural ones, natural ones with a named scale, and a laboratory system.

Natural: hbar = c = k_B = 1. Numbers are powers of one free scale, which `units GeV` (or `units fm`) may name.

Laboratory: `units amu, angstrom, 1/cm` names a mass M, a length L and an energy E; paths are lengths, and couplings are
given in these units, derived ones by their dimension. The time of the Lagrangian is the coherent one, L sqrt(M / E), so
that m/2 q'^2 and V are energies in the same unit, and hbar is a known number: hbar / (L sqrt(M E)). Imaginary time is
measured in inverse energies, tau = t / hbar, so that exp(-beta V) has no constant in it:

    S / hbar = integral dtau [ m / (2 hbar^2) (dq/dtau)^2 + V(q) ]  -  i integral A / hbar dq

`a` and `beta` of the lattice are then in 1/E, and every energy that comes back (a level, a gap) is in E.

With a time T in the place of the energy, as in `units amu, angstrom, fs`, energies in the Lagrangian are in
M L^2 / T^2 and hbar is a number in M L^2 / T. Imaginary time is in T,

    S / hbar = integral dt [ m/(2 hbar) q'^2 + V(q) / hbar ]  -  i integral A / hbar dq

and the energies of states come back as E / hbar in 1 / T, angular frequencies.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cache

from quarterturn.errors import NotationError, RequestError
from quarterturn.units.constants import constant
from quarterturn.units.quantity import ALL_ONE, IN_A_LABORATORY, Quantity
from quarterturn.units.unit import ENERGY, LENGTH, MASS, TEMPERATURE, TIME, Unit, amount, product, table, unit

Dimension = tuple[Fraction, ...]  # natural: powers of mass; laboratory: of the mass, the length and the energy or time
EXAMPLE = "units amu, angstrom, 1/cm"
NATURAL = "natural"
HALF = Fraction(1, 2)
ROLES = {MASS: "mass", LENGTH: "length", TIME: "time", ENERGY: "energy", TEMPERATURE: "temperature"}


def _vector(*parts: int | Fraction) -> Dimension:
    return tuple(Fraction(p) for p in parts)


@dataclass(frozen=True, slots=True)
class System:
    """What the numbers of an action count. `names` are in a fixed order, so that equal systems are equal.

    Dimensions (`energy`, `time`, …) are powers of `bases`; `bases` is empty where the one scale has no name.
    """

    names: tuple[str, ...]
    bases: tuple[Unit, ...]
    laboratory: bool
    energy: Dimension  # of a term of the Lagrangian of paths
    time: Dimension  # of the time in the Lagrangian
    level: Dimension  # of an energy that comes back
    step: Dimension  # of imaginary time: a, beta, t
    length: Dimension
    hbar: float = 1.0
    hbar_dimension: Dimension = (Fraction(0),)
    seam: tuple[int, int, int] = (0, 0, 0)  # powers of hbar that go to m, A and V of the turned action
    temperature: Unit | None = None  # for plain numbers given as a temperature

    def quantity(self, dimension: Dimension | None) -> Quantity:
        """What a number of this dimension counts; None: nothing determines it."""
        if self.laboratory:
            found = None if dimension is None else product(zip(self.bases, dimension, strict=True))
            return Quantity(found, None, IN_A_LABORATORY)
        mass = None if dimension is None else dimension[0]
        scale = self.bases[0] if self.bases else None
        known = None if mass is None or scale is None else product([(scale, mass / scale.dimension)])
        return Quantity(known, mass, ALL_ONE, scale)

    def beta_at(self, temperature: str | float) -> float:
        """An inverse temperature from a number (in the unit of temperature, or with k_B = 1) or an amount as a text.

        Raises RequestError where it is no temperature or energy, or not positive.
        """
        try:
            value, given = float(temperature), self.temperature
        except ValueError:
            value, given = amount(str(temperature))
        if given is not None and given.powers not in (TEMPERATURE, ENERGY):
            raise RequestError(f"temperature must be a temperature or an energy; {given} is {given.kind}")
        if not value > 0:
            raise RequestError(f"temperature must be positive, got {temperature}")
        found = 1 / value if given is None else self.beta(value, given)
        if not 0 < found < float("inf"):
            raise RequestError(f"temperature = {temperature} gives no inverse temperature that a number can hold")
        return found

    def beta(self, value: float, given: Unit) -> float:
        """An inverse temperature as this system counts it, from a temperature, an energy or a time.

        Raises RequestError where the unit is none of these, or where natural units name no scale.
        """
        inverse = given.powers in (TEMPERATURE, ENERGY)
        if inverse and not value > 0:
            raise RequestError(f"a temperature must be positive, got {value:g} {given}")
        wanted = self._unit_of(self.step)
        if wanted is None:
            raise RequestError(
                f"natural units with a free scale do not know what 1 {given} is: name the scale, as in units GeV"
            )
        source = Unit(given.name, 1 / given.size, _inverse(given)) if inverse else given
        found = self.quantity(self.step).ratio(source, wanted)
        if found is None:
            raise RequestError(f"{given} is {given.kind}; expected a temperature, an energy or a time")
        return (1 / value if inverse else value) * found

    def _unit_of(self, dimension: Dimension) -> Unit | None:
        return self.quantity(dimension).unit


def _inverse(given: Unit):  # type: ignore[no-untyped-def]
    kilogram, metre, second, kelvin = given.powers
    return (-kilogram, -metre, -second, -kelvin)


@cache
def natural(scale: Unit | None = None) -> System:
    """hbar = c = k_B = 1; `scale` names what the number 1 stands for."""
    one, minus = _vector(1), _vector(-1)
    names = () if scale is None else (scale.name,)
    return System(names, () if scale is None else (scale,), False, one, minus, one, minus, minus)


def system(names: Sequence[str]) -> System:
    """The system that a `units` statement names.

    Parameters
    ----------
    names
        Nothing, or "natural"; one energy or length (natural units with that scale); or a mass, a length, and an energy
        or a time, and if wanted a temperature, in any order.

    Raises
    ------
    NotationError
        An unknown unit (with the nearest name), two units for one thing, or one that is missing. Without a place: the
        caller knows it.
    """
    return _system(tuple(names))


@cache
def _system(names: tuple[str, ...]) -> System:
    if names in ((), (NATURAL,)):
        return natural()
    roles: dict[str, Unit] = {}
    for name in names:
        found = _known(name)
        role = ROLES.get(found.powers)
        if role is None:
            raise NotationError(
                f"{name} is {found.kind}: units are named one by one, a mass, a length, and an energy or a time",
                repair=EXAMPLE,
            )
        if role in roles:
            raise NotationError(f"two units of {role}, {roles[role].name} and {found.name}: one is enough")
        roles[role] = found
    if len(roles) == 1 and ("energy" in roles or "length" in roles):
        return natural(next(iter(roles.values())))
    return _laboratory(roles)


def _known(name: str) -> Unit:
    if name == NATURAL:
        raise NotationError("natural units have hbar = c = 1 and stand alone", repair="units natural")
    try:
        return unit(name)
    except RequestError as trouble:
        raise NotationError(trouble.message, repair=trouble.repair) from None


def _laboratory(roles: dict[str, Unit]) -> System:
    temperature = roles.get("temperature", table()["K"])
    third = roles.get("energy") or roles.get("time")
    if third is None and "temperature" in roles:  # energies in kelvin: the energy k_B K
        third = Unit(temperature.name, temperature.size * constant("k_B"), ENERGY)
    missing = [role for role in ("mass", "length") if role not in roles]
    missing += ["energy (or time)"] if third is None else []
    if missing:
        raise NotationError(
            f"a unit of {' and a unit of '.join(missing)} is missing: a laboratory system names a mass, a length, and "
            "an energy or a time; one energy alone, such as units GeV, means natural units",
            repair=EXAMPLE,
        )
    if "energy" in roles and "time" in roles:
        raise NotationError(
            f"energy and time are both named, {roles['energy'].name} and {roles['time'].name}: with a mass and a "
            "length one of them follows from the other"
        )
    assert third is not None
    bases = (roles["mass"], roles["length"], third)
    named = [u.name for u in bases] + ([temperature.name] if "temperature" in roles and "energy" in roles else [])
    hbar, m, l, x = constant("hbar"), *(u.size for u in bases)  # noqa: E741 - the letters of the formula
    length = _vector(0, 1, 0)
    if third.powers == ENERGY:
        return System(
            tuple(named), bases, True, _vector(0, 0, 1), _vector(HALF, 1, -HALF), _vector(0, 0, 1), _vector(0, 0, -1),
            length, hbar / (l * (m * x) ** 0.5), _vector(HALF, 1, HALF), (-2, -1, 0), temperature,
        )  # fmt: skip
    return System(
        tuple(named), bases, True, _vector(1, 2, -2), _vector(0, 0, 1), _vector(0, 0, -1), _vector(0, 0, 1),
        length, hbar * x / (m * l**2), _vector(1, 2, -1), (-1, -1, -1), temperature,
    )  # fmt: skip
