"""Exact series coefficients, their growth, and their sums against levels that are solved for."""

import math
from collections.abc import Callable
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.growth import large_orders
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.perturbation import PerturbedOscillator, energy_coefficients
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.resummation import borel, borel_pade_sum, continued_fraction, pade_values, truncated
from quarterturn.imaginary.summation import BOREL, MAPPED, PADE, PARTIAL, summation
from quarterturn.imaginary.surds import Surd, decimal, square_root

HALF, ONE = Fraction(1, 2), Fraction(1)
Outside = Callable[[str], dict[str, Any]]
Terms = dict[tuple[int, int], Fraction]
QUARTIC: Terms = {(0, 2): HALF, (1, 4): ONE}
SEXTIC: Terms = {(0, 2): HALF, (1, 6): ONE}
OCTIC: Terms = {(0, 2): HALF, (1, 8): ONE}
WELL: Terms = {(0, 2): HALF, (1, 3): -ONE, (2, 4): HALF}  # q^2 (1 - c q)^2 / 2, a series in g = c^2


def problem(terms: Terms, mass: Fraction = ONE) -> PerturbedOscillator:
    return PerturbedOscillator(mass, terms)


def solved(terms: Terms, g: float, level: int, mass: float = 1.0) -> tuple[float, float]:
    """The level at coupling g with its error, by the discrete basis: no code in common with the series."""
    found = levels(OnePath(mass, lambda q: sum(float(c) * g**p * q**k for (p, k), c in terms.items())), level + 1)
    return float(found.energies[level]), float(found.errors[level])


# --- coefficients -----------------------------------------------------------------------------------------------
def test_coefficients_of_the_quartic_oscillator_are_those_of_bender_and_wu(outside: Outside) -> None:
    """Phys. Rev. 184 (1969) 1231; Phys. Rev. D 7 (1973) 1620."""
    published = [Fraction(a) for a in outside("series-aho-BW")["value"]]
    assert list(energy_coefficients(problem(QUARTIC), len(published) - 1)) == published


def test_coefficients_of_the_double_well_agree_with_zinn_justin_and_jentschura(outside: Outside) -> None:
    """Ann. Phys. 313 (2004) 197: the mean of the lowest doublet, in g = c^2."""
    published = [Fraction(a) for a in outside("series-dw")["value"]]
    found = energy_coefficients(problem(WELL), 2 * len(published) - 2)
    assert list(found[::2]) == published
    assert not any(found[1::2])


@pytest.mark.parametrize("n", [0, 1, 2, 3, 7])
def test_second_order_for_any_level_is_the_textbook_formula(n: int) -> None:
    """E_1 = 3/4 (2n^2 + 2n + 1), E_2 = -(34 n^3 + 51 n^2 + 59 n + 21)/8: Landau and Lifshitz, section 38, problem 3."""
    found = energy_coefficients(problem(QUARTIC), 2, n)
    expected = Fraction(3 * (2 * n * n + 2 * n + 1), 4), -Fraction(34 * n**3 + 51 * n**2 + 59 * n + 21, 8)
    assert found == (n + HALF, *expected)


def test_mass_and_frequency_enter_by_dimensional_analysis() -> None:
    """H = p^2/2m + m w^2 q^2/2 + g q^4: E_n = w A_n (g / (m^2 w^3))^n."""
    m, w = Fraction(3), Fraction(5, 2)
    unit = energy_coefficients(problem(QUARTIC), 8, 1)
    found = energy_coefficients(problem({(0, 2): m * w**2 / 2, (1, 4): ONE}, m), 8, 1)
    assert [e / w * (m**2 * w**3) ** n for n, e in enumerate(found)] == list(unit)


def test_an_irrational_frequency_stays_exact() -> None:
    unit = energy_coefficients(problem(QUARTIC), 9)
    found = energy_coefficients(problem({(0, 2): ONE, (1, 4): ONE}), 9)  # w = sqrt 2
    w = square_root(Fraction(2))
    assert isinstance(w, Surd)
    power = w
    for n, e in enumerate(found):
        assert e == unit[n] * power
        power = power * (w * w * w).inverse()
    assert float(w) == math.sqrt(2)


def test_a_quadratic_perturbation_gives_the_binomial_series() -> None:
    """sqrt(1 + 2 g)/2."""
    found = energy_coefficients(problem({(0, 2): HALF, (1, 2): ONE}), 12)
    c, expected = HALF, []
    for n in range(13):
        expected.append(c)
        c = c * (HALF - n) / (n + 1) * 2
    assert list(found) == expected


def test_a_linear_perturbation_and_an_oscillator_off_the_origin() -> None:
    """q^2/2 - q + g q: the minimum lies at 1 - g, E = 1/2 - (1 - g)^2/2."""
    found = energy_coefficients(problem({(0, 2): HALF, (0, 1): -ONE, (1, 1): ONE}), 5)
    assert found == (0, 1, -HALF, 0, 0, 0)


def test_a_perturbation_of_several_terms_and_orders_is_the_derivative_of_the_level() -> None:
    terms: Terms = {(0, 2): HALF, (1, 1): ONE, (1, 4): ONE, (2, 3): Fraction(1, 3), (2, 6): Fraction(1, 7)}
    coefficients = [float(e) for e in energy_coefficients(problem(terms), 3, 2)]
    g = 1e-3
    exact, _ = solved(terms, g, 2)
    left = (exact - np.polyval(coefficients[::-1], g)) / g**4
    following = float(energy_coefficients(problem(terms), 4, 2)[4])
    assert left == pytest.approx(following, rel=0.2)  # the next term, to the order after it


def test_what_is_no_perturbed_oscillator_is_refused() -> None:
    with pytest.raises(SpectrumError, match="no oscillator to start from"):
        problem({(1, 4): ONE})
    with pytest.raises(SpectrumError, match="still holds q\\^4"):
        problem({(0, 2): HALF, (0, 4): ONE, (1, 6): ONE})
    with pytest.raises(SpectrumError, match="to order 400 at most"):
        energy_coefficients(problem(QUARTIC), 401)
    with pytest.raises(SpectrumError, match="levels 0 to 100"):
        energy_coefficients(problem(QUARTIC), 4, 101)


# --- growth -----------------------------------------------------------------------------------------------------
def _decimals(terms: Terms, order: int, level: int = 0, stride: int = 1) -> list[Decimal]:
    return [decimal(e, 700) for e in energy_coefficients(problem(terms), order, level)[::stride]]


def test_coefficients_approach_their_large_order_formula(outside: Outside) -> None:
    """Bender and Wu 1973: A_n ~ (-1)^(n+1) sqrt(6/pi^3) 3^n Gamma(n + 1/2)."""
    series = _decimals(QUARTIC, 30)
    for n, ratio, _ in outside("series-aho-BW-large")["value"]:
        leading = (-1) ** (n + 1) * math.sqrt(6 / math.pi**3) * 3.0**n * math.gamma(n + 0.5)
        assert float(series[n]) / leading == pytest.approx(float(ratio), abs=1e-9)
    series = _decimals(WELL, 40, stride=2)
    for n, ratio, _ in outside("series-dw-large")["value"]:
        leading = -(3.0 ** (n + 1)) * math.factorial(n) / math.pi
        assert float(series[n]) / leading == pytest.approx(float(ratio), abs=1e-9)


@pytest.mark.parametrize(
    ("terms", "order", "level", "stride", "expected"),
    [
        (QUARTIC, 100, 0, 1, (-1 / 3, 0.5, -math.sqrt(6 / math.pi**3))),
        (QUARTIC, 40, 0, 1, (-1 / 3, 0.5, -math.sqrt(6 / math.pi**3))),
        (QUARTIC, 100, 3, 1, (-1 / 3, 3.5, -(12**3) / 6 * math.sqrt(6 / math.pi**3) * -1)),
        (WELL, 120, 0, 2, (1 / 3, 1.0, -3 / math.pi)),
    ],
)
def test_growth_is_found_within_its_errors(
    terms: Terms, order: int, level: int, stride: int, expected: tuple[float, float, float]
) -> None:
    """Level K of the quartic: A_n ~ (-1)^(n+1+K) 12^K/K! sqrt(6/pi^3) 3^n Gamma(n + K + 1/2), Bender and Wu 1973."""
    found = large_orders(_decimals(terms, order, level, stride), 1)
    assert found is not None
    singularity, offset, constant = expected
    assert abs(found.singularity - singularity) <= 2 * found.singularity_error
    assert abs(found.offset - offset) <= 2 * found.offset_error
    assert abs(abs(found.constant) - abs(constant)) <= 2 * found.constant_error
    assert found.singularity_error < 1e-4


def test_few_coefficients_have_no_growth() -> None:
    assert large_orders(_decimals(QUARTIC, 20), 1) is None
    assert large_orders(_decimals({(0, 2): HALF, (1, 2): ONE}, 40), 0) is None


# --- sums -------------------------------------------------------------------------------------------------------
CASES: list[tuple[Terms, int, int]] = [
    (QUARTIC, 30, 0), (QUARTIC, 60, 0), (QUARTIC, 100, 0), (QUARTIC, 50, 3), (SEXTIC, 60, 0), (OCTIC, 60, 0),
    ({(0, 2): HALF, (1, 3): ONE, (1, 4): Fraction(3)}, 50, 0),
]  # fmt: skip


@pytest.mark.parametrize(("terms", "order", "level"), CASES)
def test_every_sum_lies_within_its_error_of_the_level(terms: Terms, order: int, level: int) -> None:
    coefficients = energy_coefficients(problem(terms), order, level)
    for g in ("0.02", "0.1", "0.5", "2"):
        exact, error = solved(terms, float(g), level)
        found = summation(problem(terms), coefficients, Decimal(g))
        assert found.determined
        assert {PARTIAL, PADE, BOREL} <= set(found.sums)
        for method, total in found.sums.items():
            assert abs(total.value - exact) <= total.error + error, (method, g)


def test_borel_sums_give_twelve_digits_where_the_terms_diverge_at_once(outside: Outside) -> None:
    """lam = 0.2 in the convention of Bender and Wu, whose second term is three times the first correction."""
    published = [float(e) for e in outside("qm-benderwu-lam0.2")["value"]]
    for level in range(3):
        found = summation(problem(QUARTIC), energy_coefficients(problem(QUARTIC), 100, level), Decimal("0.2"))
        assert found.sums[BOREL].value == pytest.approx(published[level], rel=1e-12)
        assert found.sums[MAPPED].value == pytest.approx(published[level], rel=1e-5 if level else 1e-12)
        assert found.sums[PARTIAL].error > 0.05
        assert set(found.missing) == set()


def test_pade_approximants_of_a_stieltjes_series_lie_on_both_sides() -> None:
    """Simon, Ann. Phys. 58 (1970) 76: the energy of the quartic oscillator has such a series."""
    fraction = continued_fraction(_decimals(QUARTIC, 40))
    assert fraction is not None
    exact, _ = solved(QUARTIC, 1.0, 0)
    values = np.array(pade_values(fraction, Decimal(1)))
    assert np.all(np.diff(np.sign(values - exact)) != 0)
    assert np.all(np.abs(values - exact)[2:] < np.abs(values - exact)[:-2])


def test_approximants_agree_with_those_of_a_reference_library() -> None:
    from scipy.interpolate import pade

    series = _decimals(QUARTIC, 8)
    fraction = continued_fraction(series)
    assert fraction is not None
    above, below = pade([float(a) for a in series], 4)
    assert pade_values(fraction, Decimal("0.3"))[8] == pytest.approx(above(0.3) / below(0.3), rel=1e-8)


@pytest.mark.parametrize("lam", ["0.1", "1", "10"])
def test_the_integral_in_zero_dimensions_is_its_borel_sum(lam: str, outside: Outside) -> None:
    published = [Fraction(c) for c in outside("zerodim-phi4-series")["value"]]
    series = [Fraction(math.prod(range(1, 4 * n, 2)) * (-1) ** n, 24**n * math.factorial(n)) for n in range(60)]
    assert series[: len(published)] == published
    decimals = [decimal(c, 500) for c in series]
    fraction = continued_fraction(borel(decimals, 1))
    assert fraction is not None
    found = borel_pade_sum(fraction, float(lam), 1, beside=False)
    assert found is not None
    exact = float(outside(f"zerodim-phi4-lam{lam}")["value"]["Z"]) / math.sqrt(2 * math.pi)
    assert abs(found.value - exact) <= found.error
    assert found.error < 1e-6 * float(lam)
    cut = truncated(decimals, Decimal(lam))
    assert abs(cut.value - exact) <= cut.error


def test_a_double_well_is_not_determined_by_its_series() -> None:
    found = summation(problem(WELL), energy_coefficients(problem(WELL), 80), Decimal("0.15"))
    assert not found.determined
    assert found.stride == 2
    assert found.sums[BOREL].ambiguity > 1e-6  # of the size of two instantons, exp(-1/3g)
    ground, first = solved(WELL, 0.15, 0)[0], solved(WELL, 0.15, 1)[0]
    assert ground < found.sums[BOREL].value < first  # the series knows neither level of the doublet
    assert abs(found.sums[BOREL].value - ground) > 1e3 * found.sums[BOREL].error


def test_a_series_that_ends_is_summed_exactly() -> None:
    terms: Terms = {(0, 2): HALF, (1, 1): ONE}
    found = summation(problem(terms), energy_coefficients(problem(terms), 20), Decimal(3))
    assert found.sums[PARTIAL].value == -4
    assert found.sums[PARTIAL].error < 1e-13
    assert set(found.missing) == {PADE, BOREL, MAPPED}


def test_a_series_with_a_radius_is_summed_beyond_it() -> None:
    terms: Terms = {(0, 2): HALF, (1, 2): ONE}
    found: Any = summation(problem(terms), energy_coefficients(problem(terms), 40), Decimal(4))
    assert found.sums[PADE].value == pytest.approx(1.5, rel=1e-12)
    assert "radius" in found.missing[BOREL]
