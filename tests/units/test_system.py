"""Systems of units: which there are, hbar in each, and conversion of what numbers count."""

from fractions import Fraction

import pytest
from scipy import constants as si

from quarterturn.errors import NotationError, RequestError
from quarterturn.units.system import natural, system
from quarterturn.units.unit import unit

MOLECULE = ("amu", "angstrom", "1/cm")


def test_hbar_is_one_in_atomic_units() -> None:
    """m_e, a_0 and E_h are defined by hbar = 1; CODATA's digits agree to 1e-11."""
    assert system(("m_e", "bohr", "hartree")).hbar == pytest.approx(1, abs=1e-11)


def test_hbar_of_a_molecule_against_its_definition() -> None:
    """hbar^2 / (amu angstrom^2) in 1/cm; half of it is the rotational constant of spectroscopy, 505379 MHz."""
    found = system(MOLECULE).hbar ** 2
    mass = si.physical_constants["atomic mass constant"][0]
    assert found == pytest.approx(si.hbar**2 / (mass * 1e-20) / (si.h * si.c * 100), rel=1e-12)
    assert found / 2 * si.c * 1e-4 == pytest.approx(505379.0, rel=1e-6)


def test_si_units_name_a_time() -> None:
    named = system(("kg", "m", "s"))
    assert named.hbar == pytest.approx(si.hbar, rel=1e-15)
    factor, _ = named.quantity(named.level).converted("J")
    assert factor == pytest.approx(si.hbar, rel=1e-14)  # energies come back as E / hbar
    factor, _ = named.quantity(named.energy).converted("eV")
    assert factor == pytest.approx(1 / si.e, rel=1e-14)


def test_energies_in_kelvin() -> None:
    assert system(("amu", "angstrom", "K")).hbar ** 2 == pytest.approx(48.5087, rel=1e-5)  # hbar^2/(amu A^2 k_B)


def test_order_and_spelling_do_not_matter() -> None:
    assert system(("1/cm", "Å", "u")) == system(MOLECULE)
    assert system(()) is system(("natural",))


def test_inverse_temperature_from_a_temperature_an_energy_or_a_time() -> None:
    named = system(MOLECULE)
    wanted = 100 * si.h * si.c / (si.k * 300)
    assert named.beta(300, unit("K")) == pytest.approx(wanted, rel=1e-13)
    assert named.beta(1 / wanted, unit("1/cm")) == pytest.approx(wanted, rel=1e-13)
    assert named.beta(si.hbar / (si.k * 300) * 1e15, unit("fs")) == pytest.approx(wanted, rel=1e-13)
    assert system(("GeV",)).beta(155, unit("MeV")) == pytest.approx(1 / 0.155, rel=1e-13)
    with pytest.raises(RequestError, match="name the scale"):
        natural().beta(300, unit("K"))
    with pytest.raises(RequestError, match="positive"):
        named.beta(0, unit("K"))
    with pytest.raises(RequestError, match="a mass"):
        named.beta(1, unit("amu"))


@pytest.mark.parametrize(
    ("names", "words"),
    [
        (("amu", "kg", "1/cm"), "two units of mass, amu and kg"),
        (("amu", "angstrom"), "energy"),
        (("amu",), "a unit of length and a unit of energy"),
        (("angstrom", "1/cm"), "a unit of mass is missing"),
        (("amu", "angstrm", "1/cm"), "there is angstrom"),
        (("GeV^2",), "named one by one"),
        (("amu", "angstrom", "1/cm", "fs"), "one of them follows"),
        (("natural", "amu"), "stand alone"),
        (("",), "no unit"),
    ],
)
def test_a_system_that_is_none_is_refused_with_what_was_expected(names: tuple[str, ...], words: str) -> None:
    with pytest.raises(NotationError, match=words):
        system(names)


def test_natural_numbers_convert_once_the_scale_is_named() -> None:
    mass, length = natural().quantity((Fraction(1),)), natural().quantity((Fraction(-1),))
    assert mass.converted("MeV", scale="2.1 GeV")[0] == pytest.approx(2100, rel=1e-14)
    assert mass.converted("GeV", scale="0.1 fm")[0] == pytest.approx(1.973269804593, rel=1e-12)
    assert length.converted("fm", scale="2 GeV")[0] == pytest.approx(0.098663490229651, rel=1e-12)
    assert natural().quantity((Fraction(4),)).converted("GeV/fm^3", scale="GeV")[0] == pytest.approx(130.1473, rel=1e-4)
    twice = mass.converted("GeV", scale="2 GeV")[1].converted("1/fm")[0]
    assert twice == pytest.approx(1 / 0.1973269804593, rel=1e-12)


def test_a_conversion_that_makes_no_sense_says_which_dimension_the_number_has() -> None:
    mass, unknown = natural().quantity((Fraction(1),)), natural().quantity(None)
    gap = system(MOLECULE).quantity(system(MOLECULE).level)
    for quantity, arguments, words in (
        (mass, {"to": "fm", "scale": "GeV"}, "mass dimension 1; fm has mass dimension -1"),
        (mass, {"to": "GeV"}, "name what 1 stands for"),
        (mass, {"to": "GeV", "scale": "GeV", "dimension": 2}, "mass dimension 1, not 2"),
        (unknown, {"to": "GeV", "scale": "GeV"}, "dimension=1"),
        (unknown, {"to": "GeV", "scale": "GeV", "dimension": "x"}, "must be a number"),
        (mass, {"to": "GeV", "scale": "MeV fm"}, "scale must be"),
        (natural().quantity((Fraction(0),)), {"to": "GeV", "scale": "GeV"}, "mass dimension 0|pure number"),
        (gap, {"to": "fm"}, "an energy, in 1/cm; fm is a length"),
        (gap, {"to": "eV", "scale": "GeV"}, "leave scale out"),
        (system(MOLECULE).quantity(None), {"to": "eV"}, "does not determine"),
    ):
        with pytest.raises(RequestError, match=words):
            quantity.converted(**arguments)
    assert unknown.converted("GeV", scale="GeV", dimension=1)[0] == 1
