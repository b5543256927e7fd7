"""Dimensions of couplings and measurements; mass dimensions of scalar theories are textbook (dim-count)."""

from fractions import Fraction
from typing import Any

import pytest

from quarterturn.actions.declare import declare
from quarterturn.actions.model import Action, Geometry
from quarterturn.errors import ActionError, NotationError
from tests.outside.values import value

FIELDS = {1: "(t)", 2: "(t, x)", 3: "(t, x, y)", 4: "(t, x, y, z)"}
MORSE = """q(t)
units amu, angstrom, 1/cm
L = 1/2 m q'^2 - De (1 - exp(-alpha q))^2
m = 0.98, De = 42356, alpha = 1.75
measure <q>, <q^2>, gap(q), <q(t) q(0)>, energy, <De alpha q>"""


def units_of(action: Action) -> dict[str, str]:
    return {name: c.quantity.words for name, c in action.couplings.items()}


@pytest.mark.parametrize("dimension", [1, 2, 3, 4])
def test_mass_dimensions_of_a_scalar_theory(dimension: int) -> None:
    there = FIELDS[dimension]
    kinetic = "1/2 phi'^2" if dimension == 1 else "1/2 (d phi)^2"
    text = f"phi{there}\nL = {kinetic} - 1/2 m2 phi^2 - g3 phi^3 - g4 phi^4 - g6 phi^6 + j phi\n"
    action = declare(text + "m2 = 1, g3 = 0.1, g4 = 1, g6 = 1, j = 0.1\nmeasure <phi>, <phi^4>, gap(phi)")
    table: dict[str, Any] = value("dim-count")["value"][str(dimension)]
    wanted = {"g3": "[phi^3 coupling]", "g4": "[phi^4]", "g6": "[phi^6]", "j": "[J]"}
    assert {n: action.couplings[n].dimension for n in wanted} == {n: Fraction(table[e]) for n, e in wanted.items()}
    assert action.couplings["m2"].dimension == 2
    field = Fraction(table["[phi]"])
    assert [m.quantity.dimension for m in action.measurements] == [field, 4 * field, 1]


def test_mass_dimensions_of_what_is_measured_in_a_field() -> None:
    """A zero-momentum correlator in D = 4 is phi^2 times a volume of space, a susceptibility phi^2 times D lengths."""
    action = declare(
        "phi(t, x, y, z)\nL = 1/2 (d phi)^2 - 1/2 m2 phi^2\nm2 = 1\nlattice 8 x 8 x 8 x 8\nmeasure "
        "<sum_x phi(t,x,y,z) phi(0,0,0,0)>, vol <(mean phi)^2>, binder(phi), xi2(phi), <|mean phi|>"
    )
    assert [m.quantity.dimension for m in action.measurements] == [-1, -2, 0, -1, 1]


def test_couplings_and_results_of_a_molecule_have_their_units() -> None:
    action = declare(MORSE)
    assert units_of(action) == {
        "De": "1/cm", "alpha": "1/angstrom", "hbar": "amu^(1/2) angstrom (1/cm)^(1/2)", "m": "amu",
    }  # fmt: skip
    names = [m.quantity.name for m in action.measurements]
    assert names == ["angstrom", "angstrom^2", "1/cm", "angstrom^2", "1/cm", "1/cm"]


def test_a_time_may_stand_in_the_place_of_the_energy() -> None:
    action = declare("q(t)\nunits amu, angstrom, fs\nL = 1/2 m q'^2 - 1/2 m w^2 q^2\nm = 1, w = 0.1")
    assert units_of(action) == {"hbar": "amu angstrom^2/fs", "m": "amu", "w": "1/fs"}


def test_an_angle_has_a_moment_of_inertia_and_a_massless_path_is_weighted_with_its_mass() -> None:
    rotor = declare("theta(t) mod 2 pi\nunits amu, angstrom, 1/cm\nL = 1/2 I theta'^2 + g cos(theta)\nI = 2, g = 10")
    assert units_of(rotor) | {"hbar": ""} == {"I": "amu angstrom^2", "g": "1/cm", "hbar": ""}
    weighted = declare("q(t)\nunits amu, angstrom, 1/cm\nL = 1/2 q'^2 - k q^2\nk = 2\nmeasure <q>")
    assert weighted.measurements[0].quantity.name == "amu^(1/2) angstrom"


def test_numbers_without_a_name_do_not_confuse_the_mass() -> None:
    """A depth and a range written as numbers contradict a length and an energy: only the kinetic term is believed."""
    action = declare("q(t)\nunits amu, angstrom, 1/cm\nL = 1/2 m q'^2 - 42356 (1 - exp(-1.75 q))^2\nm = 1\nmeasure <q>")
    assert units_of(action)["m"] == "amu"
    assert action.measurements[0].quantity.name == "angstrom"


def test_the_seam_divides_the_mass_by_hbar_squared() -> None:
    action = declare(MORSE)
    assert r"\hbar^{2}" in action.euclidean.latex
    assert "hbar" not in action.latex
    assert declare(action.canonical + "\nm = 1, De = 1, alpha = 1").digest == action.digest
    assert declare(MORSE.replace("units amu, angstrom, 1/cm\n", "")).digest != action.digest
    assert declare(MORSE.replace("amu, angstrom, 1/cm", "1/cm, u, Å")).digest == action.digest


def test_hbar_may_be_written_out() -> None:
    action = declare("theta(t) mod 2 pi\nunits amu, angstrom, 1/cm\nL = 1/2 I theta'^2 + hbar vt/(2 pi) theta'\n"
                     "I = 2, vt = 1")  # fmt: skip
    assert units_of(action)["vt"] == "pure number"
    assert "hbar" not in {s.name for s in action.euclidean.drift[0].symbols}


@pytest.mark.parametrize(
    ("line", "kind", "words"),
    [
        ("units amu, angstrm, 1/cm", NotationError, "angstrom"),
        ("units amu, kg, 1/cm", NotationError, "two units of mass"),
        ("units amu, angstrom", NotationError, "energy"),
        ("units amu, angstrom, 1/cm; units GeV", ActionError, "named twice"),
        ("units amu, angstrom, 1/cm; hbar = 1", ActionError, "hbar is known in these units"),
    ],
)
def test_complaints_about_units_point_at_the_line(line: str, kind: type, words: str) -> None:
    with pytest.raises(kind, match=words) as complaint:
        declare(f"q(t)\n{line}\nL = 1/2 q'^2 - k q^2\nk = 1")
    assert complaint.value.span is not None
    assert complaint.value.span.line == 2


def test_fields_and_lattice_actions_take_no_laboratory_system() -> None:
    with pytest.raises(ActionError, match="natural units"):
        declare("phi(t, x)\nunits amu, angstrom, 1/cm\nL = 1/2 (d phi)^2 - k phi^2\nk = 1")
    with pytest.raises(ActionError, match="pure number"):
        declare("q(t)\nunits amu, angstrom, 1/cm\nSE = -k q q(+t) + q^2\nk = 0.1")
    named = declare("phi(t, x)\nunits GeV\nL = 1/2 (d phi)^2 - 1/2 m2 phi^2\nm2 = 1\nmeasure gap(phi)")
    assert units_of(named) == {"m2": "GeV^2"}
    assert named.measurements[0].quantity.name == "GeV"


def lattice_at(line: str) -> Geometry | None:
    return declare(
        f"q(t)\nunits amu, angstrom, 1/cm\nL = 1/2 m q'^2 - 1/2 k q^2\nm = 1, k = 1000\nlattice {line}"
    ).geometry


def test_a_lattice_may_be_given_by_its_temperature() -> None:
    """beta = 1 / (k_B T) in (1/cm)^-1, with k_B = 0.695034800 1/(cm K) (CODATA)."""
    beta = 1 / (0.695034800 * 300)
    for line, sites in (("64, temperature = 300 K", 64), ("temperature = 300 K, a = 0.0001", 48),
                        ("temperature = 300, a = 0.0001", 48)):  # fmt: skip
        found = lattice_at(line)
        assert found is not None
        assert (found.sites, found.beta) == (sites, pytest.approx(beta, rel=1e-8))
    natural = declare("q(t)\nL = 1/2 q'^2 - 1/2 q^2\nlattice temperature = 0.5, a = 0.1").geometry
    assert natural is not None
    assert (natural.sites, natural.beta) == (20, pytest.approx(2))


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("temperature = 300 fs, a = 0.1", "fs is a time"),
        ("temperature = , a = 1", "a temperature is a number"),
        ("temperature = 0, a = 1", "must be positive"),
        ("temperature = 1e-320 K, a = 1", "can hold"),
        ("temperature = 1e999 K, a = 1", "can hold"),
        ("temperature = 1e-30 K, a = 1", "more than"),
        ("temperature = 300 K, beta = 3", "one thing"),
        ("temperatur = 300 K, a = 1", "there is temperature"),
        ("temperature = 300 K", "lacks its second half"),
        ("64, a = 1, temperature = 300 K", "one thing twice"),
    ],
)
def test_a_temperature_of_the_lattice_that_makes_no_sense(line: str, words: str) -> None:
    with pytest.raises((ActionError, NotationError), match=words) as complaint:
        lattice_at(line)
    assert complaint.value.span is not None
    assert complaint.value.span.line == 5
