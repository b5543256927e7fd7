"""Vacuum and thermal averages, correlators, matrix elements, and observables with kinks."""

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.transfer import transfer

from .problems import anharmonic, double_well, even, line, oscillator, pendulum

TABULATED = [
    *((f"thermal-lam1-b{beta}", anharmonic(1)) for beta in ("0.5", "1", "2", "5")),
    *((f"thermal-dw11-b{beta}", double_well(1, 1)) for beta in ("1", "4")),
    ("thermal-quartic-b0.25", even(lambda x: x**4)),
]


def q(x):
    return x


@pytest.mark.parametrize(("name", "problem"), TABULATED)
def test_thermal_averages_agree_with_independent_values(name, problem, outside):  # given to 12 digits
    entry = outside(name)
    thermal = levels(problem, 2).at(float(entry["parameters"]["beta"]))
    found = {
        "Z": thermal.partition(), "E": thermal.energy(), "C": thermal.heat_capacity(),
        "q2": thermal.expectation(lambda x: x**2), "q4": thermal.expectation(lambda x: x**4),
    }  # fmt: skip
    assert found == pytest.approx({k: float(v) for k, v in entry["value"].items()}, rel=2e-11)


@pytest.mark.parametrize("beta", [1, 10])
def test_thermal_oscillator(beta, outside):
    value = {k: float(v) for k, v in outside(f"ho-thermal-w1-b{beta}")["value"].items()}
    spectrum = levels(oscillator(), 3)
    found = {
        "Z": spectrum.partition(beta), "E": spectrum.energy(beta), "C": spectrum.heat_capacity(beta),
        "q2": spectrum.expectation(lambda x: x**2, beta),
        "Ghalf": spectrum.correlator(q, q, np.array([beta / 2]), beta)[0],
    }  # fmt: skip
    assert found == pytest.approx(value, rel=1e-11)
    assert spectrum.free_energy(beta) == pytest.approx(-np.log(value["Z"]) / beta, rel=1e-12)


@pytest.mark.parametrize("beta", [0.05, 0.3, 3.0])
def test_hot_oscillator_gets_the_levels_it_needs(beta):
    thermal = levels(oscillator(), 1).at(beta)
    assert thermal.energy() == pytest.approx(0.5 / np.tanh(beta / 2), rel=1e-12)
    assert thermal.partition() == pytest.approx(0.5 / np.sinh(beta / 2), rel=1e-12)


def test_temperatures_beyond_reach_are_refused():
    spectrum = levels(oscillator(), 2)
    with pytest.raises(SpectrumError, match=r"beta = 0\.001 is too high a temperature"):
        spectrum.at(1e-3)
    with pytest.raises(SpectrumError, match="beta must be positive"):
        spectrum.energy(-1.0)
    with pytest.raises(SpectrumError, match="beyond beta"):
        spectrum.correlator(q, q, np.array([2.5]), 2.0)
    with pytest.raises(SpectrumError, match="continuum begins at V = 10"):
        levels(line(lambda x: 10 * (1 - np.exp(-x)) ** 2), 2).at(5.0)


def test_thermal_derivatives_of_the_free_energy():
    spectrum, h = levels(double_well(1, 1), 4), 1e-3
    scaled = [beta * spectrum.free_energy(beta) for beta in (2 - h, 2, 2 + h)]
    assert spectrum.energy(2.0) == pytest.approx((scaled[2] - scaled[0]) / (2 * h), rel=1e-6)
    assert spectrum.heat_capacity(2.0) == pytest.approx(-4 * (scaled[2] - 2 * scaled[1] + scaled[0]) / h**2, rel=1e-5)


# --- matrix elements --------------------------------------------------------------------------------------------
def test_matrix_elements_of_the_oscillator():
    spectrum = levels(oscillator(2.0, 0.7), 8)
    for n in range(1, 8):
        assert abs(spectrum.matrix_element(q, n - 1, n)) == pytest.approx(np.sqrt(n / (2 * 0.7 * 2.0)), rel=1e-12)
    assert spectrum.matrix_element(q, 0, 2) == pytest.approx(0, abs=1e-14)
    with pytest.raises(SpectrumError, match="not among the"):
        spectrum.matrix_element(q, 0, 10_000)


@pytest.mark.parametrize(
    "problem", [anharmonic(1), double_well(1, 2), line(lambda x: x**2 / 2 + 0.2 * x**3 + 0.1 * x**4)]
)
def test_thomas_reiche_kuhn_sum_rule(problem):
    """sum_n (E_n - E_0) |<n|q|0>|^2 = 1/2m."""
    spectrum = levels(problem, 20)
    elements = np.array([spectrum.matrix_element(q, 0, n) for n in range(20)])
    assert np.sum((spectrum.energies - spectrum.energies[0]) * elements**2) == pytest.approx(0.5, rel=1e-11)


def test_wave_functions_are_normalised_nodal_and_positive_on_the_last_lobe():
    spectrum = levels(double_well(1, 2), 6)
    assert spectrum.weights @ np.abs(spectrum.states) ** 2 == pytest.approx(1, abs=1e-13)
    for n in range(6):
        large = spectrum.states[np.abs(spectrum.states[:, n]) > 1e-6, n]
        assert np.count_nonzero(np.diff(np.sign(large))) == n
        assert large[-1] > 0
    exact = levels(oscillator(), 3).wave(0, np.array([0.0, 0.5, 1.7]))
    assert exact == pytest.approx(np.pi**-0.25 * np.exp(-(np.array([0.0, 0.5, 1.7]) ** 2) / 2), rel=1e-11)


# --- correlators ------------------------------------------------------------------------------------------------
def test_vacuum_correlator_of_the_oscillator_to_either_side():
    t = np.array([-3.0, 0.0, 0.4, 7.0])
    found = levels(oscillator(1.5), 2).correlator(q, q, t)
    assert found == pytest.approx(np.exp(-1.5 * np.abs(t)) / 3, rel=1e-11)


def test_thermal_correlator_of_the_oscillator():
    beta, t = 3.0, np.array([0.0, 0.4, 1.5, 2.9, 3.0, -0.4])
    expected = np.cosh(beta / 2 - np.abs(t)) / (2 * np.sinh(beta / 2))
    assert levels(oscillator(), 2).correlator(q, q, t, beta) == pytest.approx(expected, rel=1e-11)


def test_correlators_are_complete_at_equal_times():
    spectrum = levels(double_well(1, 1), 3)
    for f in (lambda x: x**2, np.exp, np.abs):
        at_once = spectrum.correlator(f, f, np.array([0.0]))[0]
        assert at_once == pytest.approx(spectrum.expectation(lambda x, f=f: f(x) ** 2), rel=1e-12)

        def slope(x, f=f, h=1e-5):
            return ((f(x + h) - f(x - h)) / (2 * h)) ** 2

        soon = spectrum.correlator(f, f, np.array([0.01]))[0]  # C(t) = C(0) - t <f'^2>/2m + O(t^2)
        assert soon == pytest.approx(at_once - 0.005 * spectrum.expectation(slope), rel=2e-3)


def test_correlators_of_kinks_get_the_basis_they_need():
    """Sheppard's formula for the signs of a Gaussian process: 2/pi arcsin(exp(-t))."""
    t = np.array([0.0, 0.02, 0.1, 1.0])
    exact = 2 / np.pi * np.arcsin(np.exp(-t))
    assert levels(oscillator(), 1).correlator(np.sign, np.sign, t) == pytest.approx(exact, rel=1e-9)
    beta = 3.0
    thermal = 2 / np.pi * np.arcsin(np.cosh(beta / 2 - t) / np.cosh(beta / 2))
    assert levels(oscillator(), 1).correlator(np.sign, np.sign, t, beta) == pytest.approx(thermal, rel=1e-9)
    with pytest.raises(SpectrumError, match="a kink or a step is not resolved at t = 1e-07"):
        levels(oscillator(), 1).correlator(np.sign, np.sign, np.array([1e-7]))
    with pytest.raises(SpectrumError, match=r"a kink or a step is not resolved at t = 0\.0001"):
        transfer(oscillator(), 1e-4, 20_000).correlator(np.sign, np.sign, np.array([1]))


def test_correlator_above_bound_states_is_refused_where_the_continuum_is_not_resolved():
    """The vacuum of this well is sech(q)/sqrt 2; <q(t) q(0)> of it feels only the continuum, from t = 0 on."""
    spectrum = levels(even(lambda x: -1 / np.cosh(x) ** 2), 1)
    assert spectrum.correlator(q, q, np.array([0.0]))[0] == pytest.approx(np.pi**2 / 12, rel=1e-9)
    narrow = levels(line(lambda x: 10 * (1 - np.exp(-x)) ** 2), 1)
    with pytest.raises(SpectrumError, match="the continuum above V = 10 contributes"):
        narrow.correlator(q, q, np.array([1.0]))
    assert narrow.correlator(q, q, np.array([50.0]))[0] == pytest.approx(narrow.expectation(q) ** 2, rel=1e-9)


# --- observables with kinks and steps ---------------------------------------------------------------------------
def test_kinked_observables_of_the_oscillator():
    """<|q|> = 1/sqrt(pi), <theta(q - c)> and <|q - c|> from the Gaussian."""
    from scipy.stats import norm

    spectrum, sigma = levels(oscillator(), 1), np.sqrt(0.5)
    assert spectrum.expectation(np.abs) == pytest.approx(1 / np.sqrt(np.pi), rel=1e-12)
    for c in (0.0, 0.3, -1.1):
        step = spectrum.expectation(lambda x, c=c: (x > c).astype(float))
        assert step == pytest.approx(norm.sf(c / sigma), rel=1e-11)
        kink = spectrum.expectation(lambda x, c=c: np.abs(x - c))
        exact = 2 * sigma * norm.pdf(c / sigma) + c * (2 * norm.cdf(c / sigma) - 1)
        assert kink == pytest.approx(exact, rel=1e-11)


def test_narrow_observables_are_not_missed_between_grid_points():
    spectrum = levels(oscillator(), 1)
    for centre in (0.0, 0.137):
        found = spectrum.expectation(
            lambda x, c=centre: np.exp(-((x - c) ** 2) / (2 * 0.01**2)) / np.sqrt(2e-4 * np.pi)
        )
        exact = np.exp(-(centre**2) / (1 + 2e-4)) / np.sqrt(np.pi * (1 + 2e-4))
        assert found == pytest.approx(exact, rel=1e-10)


def test_kinked_observables_on_the_lattice_and_at_a_temperature():
    solution = transfer(oscillator(), 0.3, 20)
    sigma2 = solution.expectation(lambda x: x**2)
    assert solution.expectation(np.abs) == pytest.approx(np.sqrt(2 * sigma2 / np.pi), rel=1e-12)
    first = solution.correlator(q, q, np.array([1]))[0] / sigma2
    signs = solution.correlator(np.sign, np.sign, np.array([0, 1]))
    assert signs == pytest.approx([1.0, 2 / np.pi * np.arcsin(first)], rel=1e-9)  # Sheppard's formula
    beta2 = 0.5 / np.tanh(0.5)
    assert levels(oscillator(), 1).expectation(np.abs, 1.0) == pytest.approx(np.sqrt(2 * beta2 / np.pi), rel=1e-12)


def test_kinked_observables_on_the_circle():
    assert transfer(pendulum(0), 0.1, 50).expectation(np.abs) == pytest.approx(np.pi / 2, rel=1e-12)


@pytest.mark.parametrize(
    ("f", "words"), [(np.log, "not finite at q = -"), (lambda x: 1 / x**2, "(too singular|not finite)")]
)
def test_observables_without_an_average_are_refused(f, words):
    with np.errstate(all="ignore"), pytest.raises(SpectrumError, match=words):
        levels(oscillator(), 1).expectation(f)
