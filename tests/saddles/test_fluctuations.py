"""Determinants and modes against closed forms: Poeschl-Teller wells, oscillators on intervals and on lattices."""

from collections.abc import Callable

import numpy as np
import pytest
from values import value

from quarterturn.errors import SaddleError
from quarterturn.saddles.fluctuations import (
    Operator,
    _determinant,
    _lattice_matrix,
    _log_determinant,
    _quotient,
    _sampled,
    gelfand_yaglom,
    lattice_modes,
)


def operator(curvature: Callable[[np.ndarray], np.ndarray], span: float, ends: str) -> Operator:
    return Operator(lambda t: curvature(t)[:, None, None], -span / 2, span, ends, 1)


def constant(squared: float) -> Callable[[np.ndarray], np.ndarray]:
    return lambda t: np.full_like(t, squared)


@pytest.mark.parametrize("name", ["gy-pt-l1-k1.5", "gy-pt-l2-k3"])
def test_poeschl_teller_determinants_are_exact(name: str) -> None:
    """Gamma(k+1) Gamma(k) / [Gamma(k+l+1) Gamma(k-l)]: Dunne, J. Phys. A 41 (2008) 304006."""
    entry = value(name)
    depth, k = int(entry["parameters"]["l"]), float(entry["parameters"]["kappa"])
    whole = operator(lambda t: k**2 - depth * (depth + 1) / np.cosh(t) ** 2, 40.0, "decaying")
    found = gelfand_yaglom(whole, np.array([[k**2]]), 0)
    assert found.ratio == pytest.approx(float(entry["value"]), rel=1e-9)
    assert found.error < 1e-8


def test_fixed_and_periodic_oscillators_are_exact() -> None:
    """sinh(w T)/(w T) and 4 sinh^2(w T/2): Gelfand and Yaglom, J. Math. Phys. 1 (1960) 48."""
    entry = value("gy-ho-w1-T3")
    expected = {key: float(v) for key, v in entry["value"].items()}
    fixed = operator(constant(1.0), 3.0, "fixed")
    free = _determinant(_sampled(fixed.harmonic(np.zeros((1, 1))), 100), 0.0)
    ratio = _quotient(_determinant(_sampled(fixed, 100), 0.0), free)
    assert np.real(ratio) == pytest.approx(expected["ratio"], rel=1e-10)
    # det(1 - M) of the periodic one is -4 sinh^2(w T / 2)
    sign, log = _determinant(_sampled(operator(constant(1.0), 3.0, "periodic"), 100), 0.0)
    assert np.exp(log) == pytest.approx(expected["periodic"], rel=1e-10)
    assert sign == pytest.approx(-1)


def test_lattice_determinants_are_exact() -> None:
    entry = value("gy-lattice-N10")
    sites, a = int(entry["parameters"]["N"]), float(entry["parameters"]["a"])
    for ends, key in (("fixed", "dir"), ("periodic", "per")):
        _, log = _log_determinant(_lattice_matrix(np.ones((sites, 1, 1)), a, ends))
        assert np.exp(log) * a ** (2 * sites) == pytest.approx(float(entry["value"][key]), rel=1e-12)


@pytest.mark.parametrize(("depth", "k", "exact"), [(2, 2, 1 / 48), (2, 1, -1 / 12), (3, 2, -1 / 240)])
def test_a_zero_mode_is_taken_out(depth: int, k: int, exact: float) -> None:
    """The slope in k^2 of the Poeschl-Teller determinant at its zero, by hand: d/dk of 1/Gamma(k-l) is (-1)^n n!."""
    whole = operator(lambda t: k**2 - depth * (depth + 1) / np.cosh(t) ** 2, 50.0, "decaying")
    part = operator(lambda t: k**2 - depth * (depth + 1) / np.cosh(t) ** 2, 36.0 / k, "fixed")
    free = np.array([[float(k**2)]])
    by_time, on_lattice = gelfand_yaglom(whole, free, 1), lattice_modes(part, free, 1)
    assert by_time.ratio == pytest.approx(exact, rel=1e-8)
    assert on_lattice.ratio == pytest.approx(exact, rel=1e-5)
    bound = [k**2 - n**2 for n in range(depth, 0, -1)]
    assert on_lattice.values[: len(bound)] == pytest.approx(bound, abs=1e-5)
    assert on_lattice.negative == sum(b < 0 for b in bound)


def test_two_coupled_wells_are_the_product_of_their_normal_modes() -> None:
    """A rotation mixes two Poeschl-Teller wells; the determinant does not know it."""
    c, s = np.cos(0.7), np.sin(0.7)
    turn = np.array([[c, -s], [s, c]])

    def curvature(t: np.ndarray) -> np.ndarray:
        wells = np.stack([4 - 6 / np.cosh(t) ** 2, 2.25 - 2 / np.cosh(t) ** 2], axis=-1)
        return np.asarray(turn @ (wells[:, :, None] * np.eye(2)) @ turn.T)

    free = turn @ np.diag([4.0, 2.25]) @ turn.T
    found = gelfand_yaglom(Operator(curvature, -20.0, 40.0, "decaying", 2), free, 1)
    assert found.ratio == pytest.approx(0.2 / 48, rel=1e-8)


def test_a_path_that_is_not_stationary_has_no_zero_mode_and_is_refused() -> None:
    with pytest.raises(SaddleError, match="one zero mode"):
        gelfand_yaglom(operator(lambda t: 4 - 5.5 / np.cosh(t) ** 2, 40.0, "decaying"), np.array([[4.0]]), 1)
