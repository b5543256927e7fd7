"""Units by name: sizes in the SI, products, and what converts into what.

A unit is a size in the SI and powers of kilogram, metre, second and kelvin. Energies may be written as what is measured
in their place: 1/cm is the energy h c / cm of a spectral line, and Hz the energy h Hz. As a unit of its own, 1/cm is
therefore never an inverse length; the inverse of any other length is one.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cache, lru_cache
from math import prod

from quarterturn.errors import RequestError
from quarterturn.units.constants import constant

Powers = tuple[Fraction, Fraction, Fraction, Fraction]  # of kilogram, metre, second, kelvin


def powers(kilogram: int = 0, metre: int = 0, second: int = 0, kelvin: int = 0) -> Powers:
    return (Fraction(kilogram), Fraction(metre), Fraction(second), Fraction(kelvin))


PURE, MASS, LENGTH, TIME, TEMPERATURE = powers(), powers(1), powers(0, 1), powers(0, 0, 1), powers(0, 0, 0, 1)
ENERGY = powers(1, 2, -2)
CONSTANTS: Mapping[str, Powers] = {"hbar": powers(1, 2, -1), "c": powers(0, 1, -1), "k_B": powers(1, 2, -2, -1)}
KINDS = {
    PURE: "a pure number",
    MASS: "a mass",
    LENGTH: "a length",
    TIME: "a time",
    ENERGY: "an energy",
    TEMPERATURE: "a temperature",
    powers(0, -1): "an inverse length",
    powers(0, 0, -1): "an inverse time",
    powers(-1, -2, 2): "an inverse energy",
    powers(0, 2): "a squared length",
}
PREFIXES = {
    "a": 1e-18, "f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6, "G": 1e9,
    "T": 1e12, "P": 1e15,
}  # fmt: skip
PREFIXED = {"m": "fpnum", "s": "afpnum", "eV": "pnumkMGTP", "J": "afpnumkM", "Hz": "kMGTP", "K": "num", "g": "m"}
ALIASES = {
    "u": "amu", "Da": "amu", "dalton": "amu", "Å": "angstrom", "Angstrom": "angstrom", "ångström": "angstrom",
    "a0": "bohr", "Bohr": "bohr", "Eh": "hartree", "Hartree": "hartree", "Ry": "rydberg", "kelvin": "K",
    "me": "m_e", "electron_mass": "m_e", "mp": "m_p", "proton_mass": "m_p", "wavenumber": "1/cm", "second": "s",
    "metre": "m", "meter": "m", "joule": "J", "kilogram": "kg", "hertz": "Hz", "fermi": "fm", "micron": "um",
    "electronvolt": "eV", "centimetre": "cm", "centimeter": "cm", "kcal_per_mol": "kcal/mol", "kJ_per_mol": "kJ/mol",
}  # fmt: skip
WHOLE = ("kcal/mol", "kJ/mol")  # units whose name has a slash, besides 1/cm
SUPERSCRIPTS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
NUMBER = r"[0-9]+(?:\.[0-9]*)?(?:[eE][-+]?[0-9]+)?|\.[0-9]+(?:[eE][-+]?[0-9]+)?"
FACTOR = re.compile(r"\s*(?P<name>[A-Za-zÅåµμ][A-Za-z_åöÅ0]*)(?:\^(?P<power>-?\d+|\(-?\d+(?:/\d+)?\)))?\s*")
LARGEST_POWER = 64
LONGEST = 60  # letters of a unit that a complaint repeats


@dataclass(frozen=True, slots=True)
class Unit:
    """What a number counts: `size` in the SI, `powers` of kilogram, metre, second and kelvin, and a printed name."""

    name: str
    size: float
    powers: Powers

    @property
    def dimension(self) -> Fraction:
        """The mass dimension where hbar = c = k_B = 1."""
        kilogram, metre, second, kelvin = self.powers
        return kilogram - metre - second + kelvin

    @property
    def kind(self) -> str:
        """In words: an energy, a length, or powers of SI units."""
        if self.powers in KINDS:
            return KINDS[self.powers]
        return "in " + _joined(zip(("kg", "m", "s", "K"), self.powers, strict=True))

    def __str__(self) -> str:
        return self.name


def product(factors: Iterable[tuple[Unit, Fraction | int]]) -> Unit:
    """The unit that is a product of powers of others, named as it would be written."""
    kept = [(u, Fraction(p)) for u, p in factors if p]
    total = list(PURE)
    try:
        size = prod(u.size ** float(p) for u, p in kept)
    except OverflowError:
        size = 0.0
    if not 0 < size < float("inf"):
        raise RequestError(f"{_shown(_joined((u.name, p) for u, p in kept))} is no size that a number can hold")
    for u, p in kept:
        total = [a + b * p for a, b in zip(total, u.powers, strict=True)]
    return Unit(_joined((u.name, p) for u, p in kept), size, (total[0], total[1], total[2], total[3]))


def _shown(text: str) -> str:
    return text if len(text) <= LONGEST else f"{text[:LONGEST]}…"


def _joined(factors: Iterable[tuple[str, Fraction]]) -> str:
    """amu angstrom^2/fs^2; a name with a slash stands in brackets unless it is alone."""
    kept = [(name, p) for name, p in factors if p]
    if len(kept) == 1 and kept[0][1] == 1:
        return kept[0][0]
    if kept == [("cm", Fraction(-1))]:
        return "1/centimetre"  # 1/cm is an energy
    plain = {name for name, _ in kept if " " not in name and "/" not in name}
    above = [_raised(name, p, name in plain) for name, p in kept if p > 0 or name not in plain]
    below = [_raised(name, -p, True) for name, p in kept if p < 0 and name in plain]
    if not below:
        return " ".join(above)
    under = below[0] if len(below) == 1 else f"({' '.join(below)})"
    return f"{' '.join(above) or '1'}/{under}"


def _raised(name: str, power: Fraction, plain: bool) -> str:
    base = name if plain else f"({name})"
    if power == 1:
        return base
    return f"{base}^{power}" if power.denominator == 1 else f"{base}^({power})"


# --- names --------------------------------------------------------------------------------------------------------
@cache
def table() -> Mapping[str, Unit]:
    """Every unit that has a name of its own."""
    per_mol = 1e3 / constant("N_A")
    base = {
        "m": (1.0, LENGTH), "s": (1.0, TIME), "K": (1.0, TEMPERATURE), "J": (1.0, ENERGY), "g": (1e-3, MASS),
        "eV": (constant("e"), ENERGY), "Hz": (constant("h"), ENERGY),
    }  # fmt: skip
    sizes = {p + name: (PREFIXES[p] * size, kind) for name, (size, kind) in base.items() for p in ("", *PREFIXED[name])}
    sizes |= {
        "kg": (1.0, MASS), "amu": (constant("u"), MASS), "m_e": (constant("m_e"), MASS), "m_p": (constant("m_p"), MASS),
        "cm": (1e-2, LENGTH), "km": (1e3, LENGTH), "angstrom": (1e-10, LENGTH), "bohr": (constant("a_0"), LENGTH),
        "hartree": (constant("E_h"), ENERGY), "rydberg": (constant("E_h") / 2, ENERGY),
        "1/cm": (100 * constant("h") * constant("c"), ENERGY),
        "kcal/mol": (4.184 * per_mol, ENERGY), "kJ/mol": (per_mol, ENERGY),
    }  # fmt: skip
    return {name: Unit(name, size, kind) for name, (size, kind) in sizes.items()}


@lru_cache(maxsize=1024)
def unit(text: str) -> Unit:
    """The unit that is called `text`: a name, or a product such as GeV^2, 1/fm, MeV fm, kg m^2/s^2.

    Raises
    ------
    RequestError
        No such unit; names the nearest one.
    """
    plain = text.strip().translate(SUPERSCRIPTS).replace("µ", "u").replace("μ", "u")
    plain = re.sub(r"[·*]", " ", re.sub(r"(?<=[A-Za-zÅ])(?=-\d)", "^", plain.replace("**", "^")))
    if any("⁰" <= c <= "⁹" or c in "¹²³⁻" for c in text):
        plain = re.sub(r"(?<=[A-Za-zÅ])(?=\d)", "^", plain)
    if plain in ("1/cm", "cm^-1"):
        return table()["1/cm"]
    plain = re.sub(r"\((?:1/cm|cm\^-1)\)", "wavenumber", re.sub(r"^(?:1/cm|cm\^-1)(?=\^)", "wavenumber", plain))
    for name in WHOLE:
        plain = re.sub(rf"\(?{name}\)?", name.replace("/", "_per_"), plain)
    parts = list(_factors(plain, text))
    return _named(text) if len(parts) == 1 and parts[0][1] == 1 and plain == text.strip() else product(parts)


def _factors(plain: str, text: str) -> Iterator[tuple[Unit, Fraction]]:
    """The factors above and below the slashes; what stands behind a slash is below it, up to the next blank."""
    above, *below = re.split(r"/(?![^()]*\))", plain)  # slashes outside brackets
    if above.strip() != "1" or not below:
        yield from _product(above, text, 1)
    for part in below:
        grouped = re.fullmatch(r"\s*\((.*)\)\s*", part)
        if not grouped and len(part.split()) > 1:
            raise RequestError(f"{_shown(text)} can be read in two ways: put what stands below the slash in brackets")
        yield from _product(grouped.group(1) if grouped else part, text, -1)


def _product(part: str, text: str, sign: int) -> Iterator[tuple[Unit, Fraction]]:
    at = 0
    while at < len(part) or not part.strip():
        match = FACTOR.match(part, at)
        if match is None:
            raise RequestError(
                f"{_shown(text)!r} is no unit: expected names and powers, such as GeV, 1/fm or amu angstrom^2"
            )
        power = Fraction((match["power"] or "1").strip("()"))
        if abs(power) > LARGEST_POWER:
            raise RequestError(f"{_shown(text)}: a power beyond {LARGEST_POWER}")
        yield _named(match["name"]), sign * power
        at = match.end()


def _named(name: str) -> Unit:
    name = name.strip()
    found = table().get(ALIASES.get(name, name))
    if found is None:
        known = [*table(), *ALIASES]
        near = [k for k in known if k.lower() == name.lower()][:1] or difflib.get_close_matches(name, known, n=1)
        raise RequestError(
            f"there is no unit {_shown(name)!r}" + (f"; there is {ALIASES.get(near[0], near[0])}" if near else ""),
            repair=ALIASES.get(near[0], near[0]) if near else None,
        )
    return found


def amount(text: str) -> tuple[float, Unit]:
    """A number and its unit, such as 300 K or 2.1 GeV; a unit alone stands for one of it. Raises RequestError."""
    match = re.fullmatch(rf"\s*(?P<sign>[-+]?)(?P<number>{NUMBER})(?P<unit>\s.*|[^\s/\d].*)", text, re.DOTALL)
    if match is None:
        return 1.0, unit(text)
    return float(match["sign"] + match["number"]), unit(match["unit"])


# --- conversion ---------------------------------------------------------------------------------------------------
def ratio(given: Unit, wanted: Unit, ones: tuple[str, ...] = ()) -> float | None:
    """How many of `wanted` one of `given` is, where the constants `ones` may be multiplied in; None where it is none.

    The constants are of hbar, c and k_B, each of which stands for 1 in some system of natural units.
    """
    kilogram, metre, second, kelvin = (w - g for w, g in zip(wanted.powers, given.powers, strict=True))
    k_b = -kelvin
    hbar = kilogram - k_b
    c = metre - 2 * k_b - 2 * hbar
    exponents = {"hbar": hbar, "c": c, "k_B": k_b}
    if second + 2 * k_b + hbar + c or any(x and name not in ones for name, x in exponents.items()):
        return None
    size = given.size / wanted.size
    for name, x in exponents.items():
        if x:
            size *= constant(name) ** float(x)
    return size
