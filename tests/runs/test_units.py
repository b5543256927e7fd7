"""Units beside results: scaling laws, conversions, printing, records, temperatures, and what is refused."""

import math
from typing import Any

import numpy as np
import pytest
from scipy import constants as si

import quarterturn as qt
from quarterturn.errors import RequestError
from quarterturn.records.schema import validate
from quarterturn.runs.settings import resolve
from quarterturn.runs.verification import rerun

OSCILLATOR = """q(t)
units {units}
L = 1/2 m q'^2 - 1/2 k q^2
m = {m!r}, k = {k!r}
lattice {sites}, a = {a!r}
measure <q^2>, gap(q), <q(t) q(0)>, energy"""
BETA_300 = 100 * si.h * si.c / (si.k * 300)  # in (1/cm)^-1


def molecule(sites: int = 32, a: float = 1e-4) -> Any:
    return qt.action(OSCILLATOR.format(units="amu, angstrom, 1/cm", m=1.008, k=240000.0, sites=sites, a=a), name="bond")


@pytest.fixture(scope="module")
def run() -> Any:
    return qt.sample(molecule(), draws=300, seed=7)


def test_an_oscillator_in_three_systems_has_one_spectrum() -> None:
    """m and k in SI give omega = sqrt(k / m); every system returns hbar omega (n + 1/2)."""
    mass, stiffness = 1.5e-27, 500.0  # kg, N/m
    omega = math.sqrt(stiffness / mass)
    amu, cm = si.physical_constants["atomic mass constant"][0], si.h * si.c * 100
    m_e, bohr, hartree = (si.physical_constants[n][0] for n in ("electron mass", "Bohr radius", "Hartree energy"))
    cases = {
        "amu, angstrom, 1/cm": (mass / amu, stiffness * 1e-20 / cm),
        "m_e, bohr, hartree": (mass / m_e, stiffness * bohr**2 / hartree),
        "amu, angstrom, fs": (mass / amu, stiffness / amu * 1e-30),
        "kg, angstrom, K": (mass, stiffness * 1e-20 / si.k),
    }
    for units, (m, k) in cases.items():
        levels = qt.levels(qt.action(OSCILLATOR.format(units=units, m=m, k=k, sites=8, a=1.0)), count=3)
        np.testing.assert_allclose(levels.to("J"), si.hbar * omega * (np.arange(3) + 0.5), rtol=1e-9)
        assert levels["<q^2>"].to("m^2") == pytest.approx(si.hbar / (2 * mass * omega), rel=1e-9)


def test_estimates_print_and_convert_with_their_errors(run: Any) -> None:
    gap = run["gap(q)"]
    assert str(gap).endswith(") 1/cm")
    milli = gap.to("meV")
    factor = 100 * si.h * si.c / si.e * 1e3
    for name in ("value", "error", "exact"):
        assert getattr(milli, name) == pytest.approx(getattr(gap, name) * factor, rel=1e-12)
    assert (milli.pull, milli.unit) == (pytest.approx(gap.pull), "meV")
    assert run["<q^2>"].to("bohr^2").to("angstrom^2").value == pytest.approx(run["<q^2>"].value, rel=1e-14)


def test_a_thermal_oscillator_agrees_with_the_closed_form(run: Any) -> None:
    """<q^2> of the lattice oscillator (Creutz and Freedman 1981): exact column, and sampled within five errors."""
    hbar = run.couplings["hbar"]
    mass, k, a, n = 1.008 / hbar**2, 240000.0, 1e-4, 32
    modes = 2 * mass / a * (1 - np.cos(2 * np.pi * np.arange(n) / n)) + a * k
    closed = np.mean(1 / modes)
    assert run["<q^2>"].exact == pytest.approx(closed, rel=1e-9)
    assert abs(run["<q^2>"].value - closed) < 5 * run["<q^2>"].error  # false alarm 6e-7


def test_curves_convert_in_both_directions(run: Any) -> None:
    curve = run["<q(t) q(0)>"]
    other = curve.to("bohr^2", time="fs")
    per_fs = si.hbar / (100 * si.h * si.c) * 1e15
    np.testing.assert_allclose(other.t, curve.t * per_fs, rtol=1e-12)
    ratio = (other.value / curve.value)[0]
    assert ratio == pytest.approx((1e-10 / si.physical_constants["Bohr radius"][0]) ** 2, rel=1e-9)
    np.testing.assert_allclose(other.covariance, curve.covariance * ratio**2, rtol=1e-12)


def test_the_report_and_the_record_carry_the_units(run: Any) -> None:
    text = repr(run)
    assert "angstrom^2" in text and "t [(1/cm)^-1]" in text and "CODATA" in text
    assert [row.unit for row in run.report().rows] == ["angstrom^2", "1/cm", "1/cm"]
    validate(run.record)
    assert run.record["units"]["names"] == ["amu", "angstrom", "1/cm"]
    assert [r["unit"] for r in run.record["results"]] == ["angstrom^2", "1/cm", "1/cm", "angstrom^2"]
    assert rerun(run.record)["results"] == run.record["results"]


def test_hbar_is_known_and_can_not_be_changed() -> None:
    with pytest.raises(RequestError, match="hbar is known in these units"):
        qt.levels(molecule(), hbar=1)


def test_a_temperature_sets_beta() -> None:
    action = molecule()
    for keywords in ({"temperature": "300 K"}, {"temperature": 300}, {"beta": "300 K"}):
        assert qt.levels(action, count=2, **keywords).beta == pytest.approx(BETA_300, rel=1e-12)
    settings = resolve(action, {"temperature": "300K"})
    assert (settings.beta, settings.sites) == (pytest.approx(BETA_300), math.ceil(BETA_300 / 1e-4))
    natural = qt.action("q(t)\nL = 1/2 q'^2 - 1/2 q^2\nlattice 20, a = 0.1")
    assert resolve(natural, {"temperature": 0.5}).beta == pytest.approx(2)


@pytest.mark.parametrize(
    ("keywords", "words"),
    [
        ({"temperature": "300 fs"}, "fs is a time"),
        ({"temperature": -3}, "must be positive"),
        ({"beta": "3 amu"}, "amu is a mass"),
        ({"beta": "3 fsx"}, "there is fs"),
        ({"temperature": 300, "beta": 1}, "one thing"),
    ],
)
def test_a_temperature_that_is_none_is_refused(keywords: dict, words: str) -> None:
    with pytest.raises(RequestError, match=words):
        resolve(molecule(), keywords)


def test_natural_results_need_a_scale() -> None:
    action = qt.action("q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1\nmeasure gap(q), <q^2>")
    levels = qt.levels(action, count=2)
    gap = levels["gap(q)"]
    assert gap.to("GeV", scale="2 GeV") == pytest.approx(2 * gap, rel=1e-14)
    assert levels.to("GeV", scale="0.1 fm")[0] == pytest.approx(levels.energies[0] * 1.973269804593, rel=1e-11)
    assert levels["<q^2>"].to("fm", scale="2 GeV") == pytest.approx(levels["<q^2>"] * 0.098663490229651, rel=1e-11)
    with pytest.raises(RequestError, match="name what 1 stands for"):
        gap.to("GeV")
    with pytest.raises(RequestError, match="mass dimension 1; fm has mass dimension -1"):
        gap.to("fm", scale="GeV")
    named = qt.levels(qt.action(action.canonical + "\nunits GeV\nw = 1, lam = 0.1\nmeasure gap(q)"), count=2)
    assert named["gap(q)"].to("1/fm") == pytest.approx(gap / 0.1973269804593, rel=1e-11)


def test_what_the_action_does_not_determine_needs_a_dimension() -> None:
    action = qt.action("q(t)\nL = 1/2 q'^2 - 1/2 q^2\nmeasure <q^2>, gap(q)")
    levels = qt.levels(action, count=2)
    with pytest.raises(RequestError, match="dimension=1"):
        levels["<q^2>"].to("fm", scale="GeV")
    assert levels["<q^2>"].to("fm", scale="GeV", dimension=-1) == pytest.approx(0.5 * 0.1973269804593, rel=1e-9)
    assert levels["gap(q)"].to("GeV", scale="3 GeV") == pytest.approx(3, rel=1e-9)


def test_numbers_of_a_saddle_have_their_units() -> None:
    """x0 = L and V_b = hbar^2 / (m L^2) v: an instanton in two systems is one number after conversion."""
    text = "x(t)\nunits {}\nL = 1/2 m x'^2 - v (x^2/l^2 - 1)^2\nm = {!r}, v = {!r}, l = {!r}"
    amu = si.physical_constants["atomic mass constant"][0]
    m_e, bohr, hartree = (si.physical_constants[n][0] for n in ("electron mass", "Bohr radius", "Hartree energy"))
    cm = si.h * si.c * 100
    one = qt.saddle(qt.action(text.format("amu, angstrom, 1/cm", 2.487, 2018.0, 0.3816)))
    scaled = (2.487 * amu / m_e, 2018.0 * cm / hartree, 0.3816e-10 / bohr)
    other = qt.saddle(qt.action(text.format("m_e, bohr, hartree", *scaled)))
    assert one["S"] == pytest.approx(other["S"], rel=1e-7)
    for label, unit in (("E_1 - E_0", "GHz"), ("omega", "eV"), ("duration", "fs"), ("det'/det_0", "1/eV^2")):
        assert one[label].to(unit) == pytest.approx(other[label].to(unit), rel=1e-6)
    units = {row.label: row.unit for row in one.report().rows}
    assert (units["S"], units["E_1 - E_0"], units["duration"]) == ("", "1/cm", "(1/cm)^-1")


def test_the_steps_of_the_turn_end_with_the_seam() -> None:
    last = molecule().steps.steps[-1]
    assert "tau / hbar" in last[0]
    assert "hbar^-2" in last[1]


def test_the_picture_of_levels_has_each_wave_on_its_energy() -> None:
    levels = qt.levels(molecule(), count=3)
    waves = [c for c in levels.report().curves if c.style == "wave"]
    assert [c.baseline for c in waves] == list(levels.energies)
    assert all(abs(np.sum(np.square(c.y)) * (c.x[1] - c.x[0]) - 1) < 1e-3 for c in waves)  # bare and normalised
    assert {c.unit for c in waves} == {"1/cm"}


@pytest.mark.parametrize("theta", [0.0, 1.0])
def test_a_lattice_in_time_steps_is_the_lattice_in_inverse_energies(theta: float) -> None:
    """A rotor with a theta term: the seams of both kinds of system, at a finite spacing, with a complex weight."""
    text = ("x(t) mod 2 pi\nunits {}\nL = 1/2 I x'^2 + g cos(x) + hbar vt/(2 pi) x'\nI = {!r}, g = {!r}, vt = {!r}\n"
            "lattice 24, a = {!r}\nmeasure <cos(x)>, energy, gap(cos(x))")  # fmt: skip
    amu, cm = si.physical_constants["atomic mass constant"][0], si.h * si.c * 100
    tau = cm / si.hbar * 1e-15  # 1 fs in (1/cm)^-1
    one = qt.action(text.format("amu, angstrom, 1/cm", 2.0, 10.0, theta, 20.0 * tau))
    other = qt.action(text.format("amu, angstrom, fs", 2.0, 10.0 * cm / (amu * 1e10), theta, 20.0))
    left, right = (qt.levels(action, count=3, spacing="lattice") for action in (one, other))
    np.testing.assert_allclose(left.to("meV"), right.to("meV"), rtol=1e-9)
    assert left["<cos(x)>"] == pytest.approx(right["<cos(x)>"], rel=1e-9)
    assert left["energy"].to("K") == pytest.approx(right["energy"].to("K"), rel=1e-8)
    free = si.hbar**2 / (2 * 2.0 * amu * 1e-20) / cm  # (n - theta / 2 pi)^2 hbar^2 / 2I without the potential
    plain = qt.levels(one, count=2, g=0)
    shift = theta / (2 * math.pi)
    np.testing.assert_allclose(plain.energies, [free * shift**2, free * (1 - shift) ** 2], atol=1e-8)
