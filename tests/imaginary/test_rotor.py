"""A unit vector with three components against closed forms and blocks of fixed m."""

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.rotor import Rotor
from quarterturn.imaginary.rotor_levels import rotor_levels


def in_a_field(strength: float, inertia: float, count: int, highest: int = 40) -> np.ndarray:
    """L^2/2I - strength cos(theta), block by block in m: <l|cos|l-1> = sqrt((l^2 - m^2)/(4 l^2 - 1)) (textbook)."""
    found = []
    for m in range(-highest, highest + 1):
        k = np.arange(abs(m), highest + 1)
        off = np.sqrt((k[1:] ** 2 - m**2) / (4 * k[1:] ** 2 - 1.0))
        free = np.diag(k * (k + 1) / (2 * inertia))
        found.append(np.linalg.eigvalsh(free - strength * (np.diag(off, 1) + np.diag(off, -1))))
    return np.sort(np.concatenate(found))[:count]


@pytest.mark.parametrize("inertia", [0.25, 1.0])
def test_free_rotor_has_its_multiplets(inertia):
    spectrum = rotor_levels(Rotor(inertia, lambda n: 0 * n[0]), 16)
    expected = np.repeat([0, 1, 3, 6], [1, 3, 5, 7]) / inertia
    assert spectrum.energies == pytest.approx(expected, abs=1e-11)
    t = np.array([0.0, 0.4, 2.0])
    total = sum(spectrum.correlator(lambda n, i=i: n[i], lambda n, i=i: n[i], t) for i in range(3))
    assert total == pytest.approx(np.exp(-t / inertia), rel=1e-11)


DIRECTIONS = [(0, 0, 1), (1, 0, 0), (0.48, -0.6, 0.64)]


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("strength", [0.5, 20.0])
def test_rotor_in_a_field_along_any_direction(strength, direction):
    u = np.array(direction)
    spectrum = rotor_levels(Rotor(0.7, lambda n: -strength * np.tensordot(u, n, axes=1)), 9)
    expected = in_a_field(strength, 0.7, 9)
    off = np.abs(spectrum.energies - expected)
    assert np.all(off <= 1e-10 * (1 + np.abs(expected)))
    assert np.all(off <= 10 * spectrum.errors + 1e-14 * strength)


def test_thermal_sums_of_the_free_rotor():
    k = np.arange(60)
    thermal = rotor_levels(Rotor(1.0, lambda n: 0 * n[0]), 4).at(0.5)
    weights = (2 * k + 1) * np.exp(-0.25 * k * (k + 1))
    assert thermal.partition() == pytest.approx(weights.sum(), rel=1e-10)
    assert thermal.expectation(lambda n: n[0] ** 2) == pytest.approx(1 / 3, rel=1e-10)


def test_what_is_not_solved_says_so():
    with pytest.raises(SpectrumError, match="not finite at n"):
        rotor_levels(Rotor(1.0, lambda n: np.log(n[0])), 3)
    with pytest.raises(SpectrumError, match="beyond l = 40"):
        rotor_levels(Rotor(1.0, lambda n: 0 * n[0]), 2000)
    with pytest.raises(SpectrumError, match="inertia must be positive"):
        Rotor(-1.0, lambda n: n[0])
