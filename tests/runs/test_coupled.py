"""Two and three paths end to end: levels in the continuum and on the lattice, and the exact column beside samples."""

import sys
from pathlib import Path

import numpy as np
import pytest

from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.sampling import sample
from quarterturn.runs.spectrum import levels

sys.path.insert(0, str(Path(__file__).parents[1] / "outside"))
from values import value

MEASURED = "measure <x^2>, <y^2>, <x y>, <x(t) y(0)>, gap(x), energy, <(mean x)^2>"


@pytest.fixture(scope="module")
def oscillators() -> DeclaredAction:
    return action(
        "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - 1/2 w1^2 x^2 - 1/2 w2^2 y^2 - k x y\nw1 = 1, w2 = 1.5, k = 0.4\n"
        f"lattice 40, a = 0.25\n{MEASURED}"
    )


def test_vacuum_of_two_coupled_oscillators(oscillators: DeclaredAction) -> None:
    expected = value("coupled-ho2-1-1.5-0.4")["value"]
    found = levels(oscillators)
    assert found.energies[0] == pytest.approx(float(expected["E0"]), rel=1e-11)
    for label, key in (("<x^2>", "x2"), ("<y^2>", "y2"), ("<x y>", "xy")):
        assert found[label] == pytest.approx(float(expected[key]), rel=1e-10)
    assert found["gap(x)"] == pytest.approx(float(expected["freq"][0]), rel=1e-10)
    assert found["<x(t) y(0)>"].value[0] == pytest.approx(float(expected["xy"]), rel=1e-10)
    assert found.at(10.0)["energy"] > found["energy"]


def test_the_lattice_has_its_own_answer(oscillators: DeclaredAction) -> None:
    frequencies = np.array([float(f) for f in value("coupled-ho2-1-1.5-0.4")["value"]["freq"]])
    lattice = 2 / 0.25 * np.arcsinh(frequencies * 0.125)  # Creutz and Freedman 1981
    found = levels(oscillators, spacing="lattice", count=2)
    assert found.energies == pytest.approx([lattice.sum() / 2, lattice.sum() / 2 + lattice[0]], rel=1e-9)
    assert found["gap(x)"] == pytest.approx(lattice[0], rel=1e-9)


def test_samples_of_two_paths_have_an_exact_column_that_they_agree_with() -> None:
    """Pulls beyond 5 in seven numbers: a false alarm of 4e-6. Fixed seed."""
    pair = action(
        "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 + 0.3 x' y' - 1/2 x^2 - 1/2 y^2 - g x^2 y^2\ng = 0.5\n"
        f"lattice 24, a = 0.25\n{MEASURED}"
    )
    run = sample(pair, draws=400, chains=32, seed=11)
    for label in ("<x^2>", "<y^2>", "<x y>", "gap(x)", "energy", "<(mean x)^2>"):
        assert run[label].exact is not None
        assert abs(run[label].pull) < 5
    curve = run["<x(t) y(0)>"]
    assert np.all(np.abs(curve.value - curve.exact) < 5.5 * curve.error)


def test_a_ring_with_flux_and_a_stretch(oscillators: DeclaredAction) -> None:
    """A particle on a stiff ring threaded by a flux, in the plane, against the angle alone: E ~ (l - f)^2/2."""
    expected = np.array([float(e) for e in value("ab-ring-phi0.3")["value"]["E"]])
    alone = action("theta(t) mod 2 pi\nL = 1/2 theta'^2 + f theta'\nf = 0.3")
    assert levels(alone, count=4).energies == pytest.approx(expected, abs=1e-12)
    stretched = action("theta(t) mod 2 pi, s(t)\nL = 1/2 theta'^2 + f theta' + 1/2 s'^2 - 1/2 s^2\nf = 0.3")
    assert levels(stretched, count=3).energies == pytest.approx(expected[:3] + 0.5, abs=1e-11)


def test_the_gauge_of_a_magnetic_field_does_not_matter() -> None:
    """Fock 1928, Darwin 1930: (2n + |l| + 1) sqrt(w^2 + B^2/4) - l B/2."""
    omega = np.hypot(1, 0.65)
    expected = np.sort([(2 * n + abs(m) + 1) * omega - 0.65 * m for n in range(9) for m in range(-20, 21)])[:8]
    for term in ("B r[1] r[2]'", "B/2 (r[1] r[2]' - r[2] r[1]')", "B r[1] r[1]' - B r[2] r[1]'"):
        charge = action(f"r[2](t)\nL = 1/2 r'.r' + {term} - 1/2 r.r\nB = 1.3\nmeasure <r.r>")
        found = levels(charge, count=8)
        assert found.energies == pytest.approx(expected, rel=1e-10)
        assert found["<r.r>"] == pytest.approx(1 / omega, rel=1e-10)


def test_three_paths(oscillators: DeclaredAction) -> None:
    ring = action(
        "q[3](t)\nL = 1/2 q'.q' - V\n"
        "V = 1/2 q.q + lam (q[1]^4 + q[2]^4 + q[3]^4) "
        "+ kc/2 ((q[1] - q[2])^2 + (q[2] - q[3])^2 + (q[3] - q[1])^2)\nlam = 0.5, kc = 0.5\nmeasure <q.q>"
    )
    expected = np.array(value("three-dof-ring-lam0.5-k0.5")["value"])
    found = levels(ring, count=5)
    assert found.energies == pytest.approx(expected, rel=1e-10)
    assert "<q.q>" in list(found)


def test_what_is_left_out_is_said() -> None:
    pair = action("r[2](t)\nL = 1/2 r'.r' - r.r/2\nmeasure <r.r>, <abs(r[1])>")
    found = levels(pair)
    assert found["<r.r>"] == pytest.approx(1, rel=1e-11)
    assert any("left out" in name and "kink" in words for name, words in found.facts)


def test_unit_vectors_are_an_angle_and_a_rotor() -> None:
    """Mathieu levels for two components; second-order Stark shift -E^2 I/3 and l(l+1)/2I for three (textbook)."""
    expected = [float(e) for e in value("pendulum-K1")["value"]][:6]
    flat = action("n[2](t), n.n = 1\nL = 1/2 n'.n' + K n[1]\nK = 1\nmeasure <n[1]>, <n[2]>")
    found = levels(flat, count=6)
    assert found.energies == pytest.approx(expected, rel=1e-10)
    assert abs(found["<n[2]>"]) < 1e-10
    rotor = action("n[3](t), n.n = 1\nL = 1/2 I n'.n' + E n[2]\nI = 2, E = 0.001\nmeasure <n[2]>, <n[1](t) n[1](0)>")
    found = levels(rotor, count=4)
    assert found.energies == pytest.approx([-2e-6 / 3, 0.5, 0.5, 0.5], abs=2e-6)
    assert found.energies[0] == pytest.approx(-2e-6 / 3, rel=1e-5)
    assert found["<n[2]>"] == pytest.approx(2 * 2e-3 / 3, rel=1e-5)
    assert found["<n[1](t) n[1](0)>"].value[0] == pytest.approx(1 / 3, rel=1e-5)
