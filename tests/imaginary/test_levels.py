"""Levels on the line against published and independently computed values (20 digits), closed forms and sum rules."""

import numpy as np
import pytest
from scipy.special import ai_zeros

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.spectrum import Spectrum

from .problems import anharmonic, double_well, even, line, oscillator, tilted_double_well

EPS = np.finfo(float).eps


def assert_agrees(spectrum: Spectrum, expected: np.ndarray, scale: float = 0.0) -> None:
    """To 1e-10, and the estimated error is honest: no more than ten times too small."""
    off = np.abs(spectrum.energies - expected)
    assert np.all(off <= 1e-10 * np.maximum(1.0, np.abs(expected)))
    assert np.all(off <= 10 * spectrum.errors + 4 * EPS * np.maximum(np.abs(expected), scale))


CONFINED = {
    **{f"qm-aho-levels-lam{lam}": anharmonic(lam) for lam in (0.1, 1, 10, 100)},
    "qm-quartic-half": even(lambda q: q**4),
    "qm-quartic-p2x4": even(lambda q: q**4, mass=0.5),
    "qm-benderwu-lam0.2": even(lambda q: q**2 / 4 + 0.05 * q**4, mass=0.5),
    "qm-sextic-pure": even(lambda q: q**6),
    "qm-x2x6": even(lambda q: q**2 / 2 + 0.1 * q**6),
    "qm-cubic-quartic": line(lambda q: q**2 / 2 + 0.2 * q**3 + 0.1 * q**4),
    "qm-dw-lam1-v21": double_well(1, 1),
    "qm-dw-lam1-v22": double_well(1, 2),
    "qm-dw-lam0.25-v24": double_well(0.25, 4),
}


@pytest.mark.parametrize("name", CONFINED)
def test_confined_levels_agree_with_multiprecision_values(name, outside):
    expected = np.array([float(e) for e in outside(name)["value"]])
    assert_agrees(levels(CONFINED[name], len(expected)), expected)


@pytest.mark.parametrize("name", CONFINED)
def test_levels_do_not_depend_on_the_promise_of_evenness(name):
    problem = CONFINED[name]
    without = levels(line(problem.potential, problem.mass), 8)
    whole = levels(problem, 8)
    assert np.all(np.abs(without.energies - whole.energies) <= without.errors + whole.errors)


@pytest.mark.parametrize(("lam", "v2"), [(1, 1), (1, 2), (0.25, 4)])
def test_tunnelling_splittings_of_the_even_double_well(lam, v2, outside):
    expected = float(outside(f"qm-dw-split-lam{lam}-v2{v2}")["value"]["exact"])
    energies = levels(double_well(lam, v2), 2).energies
    assert energies[1] - energies[0] == pytest.approx(expected, abs=2e-13)


@pytest.mark.parametrize("g", [0.02, 0.01])
def test_tunnelling_splittings_in_zinn_justins_convention(g, outside):
    expected = outside(f"qm-dw-ZJ-g{g}")["value"]
    spectrum = levels(tilted_double_well(g), 2)
    low, high = spectrum.energies
    assert high - low == pytest.approx(float(expected["splitting"]), abs=1e-13)
    assert (high + low) / 2 == pytest.approx(float(expected["mean"]), abs=1e-13)
    assert abs(high - low - float(expected["splitting"])) <= 10 * spectrum.errors.max()


@pytest.mark.parametrize("c", [15, 20, 30, 60, 120])
def test_splittings_down_to_rounding_follow_the_instanton_gas(c):
    """2 sqrt(6 S/pi) e^{-S} (1 - 71/(72 S) - 6299/(10368 S^2)), S = 2c/3 (Jentschura and Zinn-Justin 2004)."""
    spectrum = levels(even(lambda q: (q**2 - c) ** 2 / (8 * c)), 4)
    action = 2 * c / 3
    expected = 2 * np.sqrt(6 * action / np.pi) * np.exp(-action) * (1 - 71 / (72 * action) - 6299 / (10368 * action**2))
    assert spectrum.energies[1] - spectrum.energies[0] == pytest.approx(
        expected, rel=3 / action**3, abs=10 * spectrum.errors[0]
    )
    assert spectrum.matrix_element(lambda q: q, 0, 0) == pytest.approx(0, abs=1e-13)
    assert abs(spectrum.matrix_element(lambda q: q, 0, 1)) == pytest.approx(np.sqrt(c), rel=0.1)


@pytest.mark.parametrize(("j", "c", "algebraic"), [(1, 3, [0.0]), (2, 7, [-2 * np.sqrt(2), 2 * np.sqrt(2)])])
def test_quasi_exactly_solvable_sextic(j, c, algebraic, outside):  # Turbiner 1988; Bender and Dunne 1996
    expected = np.array([float(e) for e in outside(f"qm-qes-J{j}-s1_4")["value"]["E0_5"]])
    spectrum = levels(even(lambda q: q**6 - c * q**2, mass=0.5), 6)
    assert_agrees(spectrum, expected)
    assert np.min(np.abs(spectrum.energies[:, None] - algebraic), axis=0) == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize(("depth", "alpha"), [(10, 1), (8, 0.5)])
def test_morse_oscillator_and_the_number_of_its_bound_levels(depth, alpha, outside):
    case = outside(f"morse-D{depth}-a{alpha}-m1")["value"]
    problem = line(lambda q: depth * (1 - np.exp(-alpha * q)) ** 2)
    assert_agrees(levels(problem, case["count"]), np.array([float(e) for e in case["E"]]), scale=depth)
    with pytest.raises(SpectrumError, match=f"{case['count']} levels are bound, {case['count'] + 1} were asked for"):
        levels(problem, case["count"] + 1)


def test_morse_oscillator_in_its_other_spelling(outside):
    """Infinity minus infinity far to the left is a wall."""
    expected = np.array([float(e) for e in outside("morse-D10-a1-m1")["value"]["E"]]) - 10
    assert_agrees(levels(line(lambda q: 10 * (np.exp(-2 * q) - 2 * np.exp(-q))), 4), expected, scale=10)


@pytest.mark.parametrize("depth", [2, 3])
def test_poeschl_teller_well_and_its_continuum(depth, outside):
    expected = np.array([float(e) for e in outside(f"pt-lam{depth}")["value"]])
    problem = even(lambda q: -depth * (depth + 1) / 2 / np.cosh(q) ** 2)
    assert_agrees(levels(problem, len(expected)), expected)
    with pytest.raises(SpectrumError, match=rf"{depth} levels are bound, {depth + 1} were asked for: above V = 0 is"):
        levels(problem, depth + 1)


def test_soft_coulomb_well_has_its_known_ground_state():
    """-1/sqrt(q^2 + 2) binds at exactly -1/2: psi = (1 + r) exp(-r), r = sqrt(q^2 + 2), solves it by insertion."""
    assert levels(even(lambda q: -1 / np.sqrt(q**2 + 2)), 3).energies[0] == pytest.approx(-0.5, abs=1e-12)


# --- walls and kinks: Airy functions ----------------------------------------------------------------------------
def test_bouncing_ball_has_the_zeros_of_the_airy_function():
    spectrum = levels(line(lambda q: np.where(q < 0, np.inf, q)), 6)
    assert_agrees(spectrum, -ai_zeros(6)[0] / 2 ** (1 / 3))


@pytest.mark.parametrize("problem", [even(np.abs), line(np.abs), line(lambda q: np.abs(q - 0.3))])
def test_kink_has_the_zeros_of_the_airy_function_and_of_its_slope(problem):
    zeros, slopes = ai_zeros(6)[:2]
    expected = np.sort(-np.concatenate([zeros, slopes]))[:6] / 2 ** (1 / 3)
    spectrum = levels(problem, 6)
    off = np.abs(spectrum.energies - expected)
    assert np.all(off < 1e-7)
    assert np.all(off <= 10 * spectrum.errors)
    assert "kinks" in spectrum.facts["basis"]


def test_square_box_between_walls():
    expected = np.pi**2 * np.arange(1, 7) ** 2 / 2
    assert_agrees(levels(line(lambda q: np.where((q < 0) | (q > 1), np.inf, 0.0)), 6), expected)


def test_finite_square_well_says_how_little_its_steps_allow():
    """Even levels solve k tan k = kappa, odd ones -k cot k = kappa, in a well of half width 1 and depth 50."""
    spectrum = levels(even(lambda q: np.where(np.abs(q) < 1, 0.0, 50.0)), 2)
    k = np.sqrt(2 * spectrum.energies)
    kappa = np.sqrt(100 - k**2)
    assert k[0] * np.tan(k[0]) == pytest.approx(kappa[0], rel=1e-3)
    assert -k[1] / np.tan(k[1]) == pytest.approx(kappa[1], rel=1e-3)
    assert np.all(spectrum.errors > 1e-8)


# --- many levels ------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("count", [1, 20, 200])
def test_oscillator_ladder(count):
    assert_agrees(levels(oscillator(), count), np.arange(count) + 0.5)


def test_two_hundred_levels_of_the_quartic_follow_from_its_first_ones():
    """Levels do not depend on how many are asked for."""
    few, many = levels(anharmonic(1), 10), levels(anharmonic(1), 150)
    assert np.all(np.abs(few.energies - many.energies[:10]) <= few.errors + many.errors[:10])


# --- another method ---------------------------------------------------------------------------------------------
def in_oscillator_states(c: np.ndarray, mass: float, size: int) -> np.ndarray:
    """Lowest levels of p^2/2m + sum c_k q^k in a truncated basis of oscillator states, by ladder operators."""
    omega = 1.3 * (4 * c[4] * mass) ** (1 / 3) / mass
    n = np.arange(size + 4)
    q = np.diag(np.sqrt((n[:-1] + 1) / (2 * mass * omega)), 1)
    q = q + q.T
    p = np.diag(np.sqrt((n[:-1] + 1) * mass * omega / 2), 1)
    p = p.T - p  # p / i
    energy = -p @ p / (2 * mass) + sum(ck * np.linalg.matrix_power(q, k) for k, ck in enumerate(c))
    return np.linalg.eigvalsh(energy[:size, :size])[:6]


def test_sixty_random_quartics_agree_with_a_basis_of_oscillator_states():
    rng = np.random.default_rng(20)
    for _ in range(60):
        c, mass = rng.normal(size=5), 10 ** rng.uniform(-1, 1)
        c[4] = abs(c[4]) + 0.2
        spectrum = levels(line(lambda q, c=c: np.polynomial.polynomial.polyval(q, c), mass), 6)
        assert spectrum.energies == pytest.approx(in_oscillator_states(c, mass, 220), abs=1e-9, rel=1e-10)
