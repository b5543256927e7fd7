"""`levels` end to end: the continuum, the lattice, temperatures, and what is refused."""

import sys
from pathlib import Path

import numpy as np
import pytest

from quarterturn.errors import RequestError, SpectrumError
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.spectrum import levels

sys.path.insert(0, str(Path(__file__).parents[1] / "outside"))
from values import value


@pytest.fixture(scope="module")
def quartic() -> DeclaredAction:
    return action(
        "q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 1\nlattice 100, a = 0.1\n"
        "measure <q^2>, <q^4>, <q(t) q(0)>, gap(q), gap(q^2), energy, <|mean q|>"
    )


@pytest.mark.parametrize("lam", ["0.1", "1", "10", "100"])
def test_levels_agree_with_independently_computed_ones(quartic: DeclaredAction, lam: str) -> None:
    """Convention of Hioe and Montroll, J. Math. Phys. 16 (1975) 1945."""
    published = np.array([float(e) for e in value(f"qm-aho-levels-lam{lam}")["value"]])
    found = levels(quartic, lam=float(lam), count=6)
    assert np.all(np.abs(found.energies - published) < 1e-10 * published)
    assert np.all(np.abs(found.energies - published) <= 10 * found.errors)


def test_vacuum_quantities_follow_from_the_spectrum(quartic: DeclaredAction) -> None:
    found = levels(quartic)
    assert found["gap(q)"] == pytest.approx(found.energies[1] - found.energies[0], rel=1e-12)
    assert found["gap(q^2)"] == pytest.approx(found.energies[2] - found.energies[0], rel=1e-12)
    assert found["energy"] == pytest.approx(found.energies[0], rel=1e-12)
    curve = found["<q(t) q(0)>"]
    slope = -np.log(curve.value[-1] / curve.value[-2]) / (curve.t[-1] - curve.t[-2])
    assert slope == pytest.approx(found["gap(q)"], rel=1e-4)
    assert curve.value[0] == pytest.approx(found["<q^2>"], rel=1e-10)
    assert "<|mean q|>" not in list(found)  # a spectrum alone does not give it


@pytest.mark.parametrize("beta", ["0.5", "1", "2", "5"])
def test_thermal_averages_agree_with_independently_computed_ones(quartic: DeclaredAction, beta: str) -> None:
    expected = value(f"thermal-lam1-b{beta}")["value"]
    thermal = levels(quartic).at(float(beta))
    for label, key in (("<q^2>", "q2"), ("<q^4>", "q4"), ("energy", "E")):
        assert thermal[label] == pytest.approx(float(expected[key]), rel=1e-9)


def test_the_lattice_has_its_own_levels(quartic: DeclaredAction) -> None:
    expected = value("tm-aho-lam1-a0.1-N100")["value"]
    found = levels(quartic, spacing="lattice", count=2)
    assert found.energies[0] == pytest.approx(float(expected["E0_lat"]), rel=1e-10)
    assert found["gap(q)"] == pytest.approx(float(expected["gap_lat"]), rel=1e-9)
    assert found["<q^2>"] == pytest.approx(float(expected["x2"]), rel=1e-10)
    assert found["<q(t) q(0)>"].value[5] == pytest.approx(float(expected["C5"]), rel=1e-10)


def test_bound_states_below_a_continuum_are_counted() -> None:
    """Morse, closed form."""
    published = [float(e) for e in value("morse-D10-a1-m1")["value"]["E"]]
    morse = action("q(t)\nL = 1/2 q'^2 - D (1 - exp(-alpha q))^2\nD = 10, alpha = 1")
    assert levels(morse, count=4).energies == pytest.approx(published, rel=1e-10)
    with pytest.raises(SpectrumError) as complaint:
        levels(morse, count=6)
    assert "4" in str(complaint.value)


@pytest.mark.parametrize(
    ("keywords", "words"),
    [
        ({"count": 0}, "count must be a whole number"),
        ({"spacing": "fine"}, "spacing must be 'lattice'"),
        ({"a": 0.1}, "has no meaning in the continuum"),
        ({"beta": -1}, "beta must be positive"),
        ({"lamb": 1}, "no coupling lamb"),
    ],
)
def test_a_senseless_request_is_named(quartic: DeclaredAction, keywords: dict, words: str) -> None:
    with pytest.raises(RequestError) as complaint:
        levels(quartic, **keywords)
    assert words in str(complaint.value)


def test_four_paths_are_referred_to_sampling_and_saddles() -> None:
    four = action("r[4](t)\nL = 1/2 r'.r' - r.r")
    with pytest.raises(SpectrumError, match="up to 3 degrees of freedom, and here are 4: sample it, or look for"):
        levels(four)
