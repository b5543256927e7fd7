"""Sizes of units and conversions against CODATA 2022 and exact SI values (checks.json, section 6)."""

import pytest

from quarterturn.errors import RequestError
from quarterturn.units.constants import RELEASES, constant, release
from quarterturn.units.unit import amount, product, ratio, table, unit
from tests.outside.values import value

ALL = ("hbar", "c", "k_B")
EXACT = 1e-12


def test_hbar_c_is_the_exact_value_of_the_si() -> None:
    found = constant("hbar") * constant("c") / (unit("MeV").size * unit("fm").size)
    assert found == pytest.approx(float(value("unit-hbarc-exact")["value"]), rel=EXACT)
    assert found == pytest.approx(value("unit-hbarc")["value"], rel=1e-9)


def test_boltzmann_constant_in_electronvolt_per_kelvin() -> None:
    assert ratio(unit("K"), unit("eV"), ALL) == pytest.approx(value("unit-kB-eV")["value"], rel=1e-9)


def test_electron_mass_as_an_energy() -> None:
    assert ratio(unit("m_e"), unit("MeV"), ALL) == pytest.approx(value("unit-me-MeV")["value"], rel=1e-9)


def test_measured_constants_are_those_of_the_release_that_is_named() -> None:
    electrons, atoms, radii = (value("unit-2018-vs-2022")["value"][i : i + 2] for i in (0, 2, 4))
    year = {"CODATA 2018": 0, "CODATA 2022": 1}[release()]
    assert (constant("m_e"), constant("u"), constant("a_0")) == tuple(float(v[year]) for v in (electrons, atoms, radii))
    assert {RELEASES[float(v)] for v in atoms} == {"CODATA 2018", "CODATA 2022"}
    if release() == "CODATA 2022":
        assert (constant("u"), constant("a_0")) == (value("unit-u-kg")["value"], value("unit-a0")["value"])


def test_an_inverse_energy_is_a_length_and_a_temperature_an_energy() -> None:
    spacing = ratio(unit("1/GeV"), unit("fm"), ALL)
    assert spacing is not None
    assert spacing / 2 == pytest.approx(float(value("unit-conv-a[fm]_from_1")["value"]), rel=1e-12)
    kelvin = ratio(unit("MeV"), unit("K"), ALL)
    assert kelvin is not None
    assert 155 * kelvin == pytest.approx(float(value("unit-conv-T=155_MeV_in")["value"]), rel=1e-12)


def test_a_spectral_line_in_every_unit_of_energy() -> None:
    """The fundamental of H2 (Morse form) as the table has it in J, THz, meV and K."""
    line = value("mol-morse-H2")["value"]
    for name, there in (("J", "J"), ("THz", "THz"), ("meV", "meV"), ("K", "K")):
        found = ratio(unit("1/cm"), unit(name), ("k_B",))
        assert found is not None
        assert line["nu01"] * found == pytest.approx(line[there], rel=1e-9)


def test_a_wavenumber_is_h_c_and_the_inverse_of_another_length_is_hbar_c() -> None:
    two_pi = ratio(unit("1/cm"), unit("1/km"), ALL)
    assert two_pi == pytest.approx(2 * 3.141592653589793 * 1e5, rel=1e-14)
    assert unit("cm^-1") == unit("cm⁻¹") == unit("1/cm") == unit("wavenumber")
    assert unit("cm").kind == "a length"


@pytest.mark.parametrize("name", sorted(table()))
def test_every_unit_prints_as_it_is_read(name: str) -> None:
    assert unit(name) == table()[name]
    inverse = unit(product([(unit(name), -1)]).name)
    assert inverse.size == pytest.approx(1 / unit(name).size, rel=1e-15)


@pytest.mark.parametrize(
    ("text", "si"),
    [("GeV^2", 1.602176634e-10**2), ("MeV fm", 1.602176634e-28), ("kg m^2/s^2", 1.0),
     ("1/(GeV fm)", 1e25 / 1.602176634),
     ("GeV/fm^3", 1.602176634e35), ("Å²", 1e-20), ("amu^(1/2)", 1.66053906892e-27**0.5),
     ("kcal/mol", 4184 / 6.02214076e23)],
)  # fmt: skip
def test_products_and_powers_of_units(text: str, si: float) -> None:
    assert unit(text).size == pytest.approx(si, rel=3e-9)  # amu of any release
    assert unit(unit(text).name).size == pytest.approx(unit(text).size, rel=1e-14)


@pytest.mark.parametrize(
    ("text", "words"),
    [("angstrm", "there is angstrom"), ("gev", "there is GeV"), ("GeV^", "no unit"), ("", "no unit"), ("1", "no unit"),
     ("J/mol K", "two ways"), ("m^999", "power beyond 64"),
     ("(1/cm)^64", "no size"), ("PHz^64", "no size"), ("(" * 500, "no unit"), ("m" * 5000, "there is no unit")],
)  # fmt: skip
def test_what_is_no_unit_is_refused_with_the_nearest(text: str, words: str) -> None:
    with pytest.raises(RequestError, match=words):
        unit(text)


def test_amounts() -> None:
    assert amount("300 K") == (300.0, unit("K"))
    assert amount("2.1GeV") == (2.1, unit("GeV"))
    assert amount("5 1/cm") == (5.0, unit("1/cm"))
    assert amount("1/cm") == (1.0, unit("1/cm"))


def test_what_differs_in_dimension_does_not_convert() -> None:
    assert ratio(unit("eV"), unit("fm"), ALL) is None
    assert ratio(unit("angstrom"), unit("1/eV"), ("hbar", "k_B")) is None
    assert ratio(unit("K"), unit("eV")) is None
