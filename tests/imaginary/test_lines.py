"""Real time, spectral lines, response and products of many operators, from levels."""

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.lines import lines
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.products import euclidean_product
from quarterturn.imaginary.propagation import System
from quarterturn.imaginary.rotation import arc
from quarterturn.imaginary.thermodynamics import thermodynamics

from .problems import anharmonic, double_well, line, oscillator

Outside = Callable[[str], dict[str, Any]]


def q(x: Any) -> Any:
    return x


def square(x: Any) -> Any:
    return x**2


# --- real time --------------------------------------------------------------------------------------------------
def test_wightman_feynman_and_euclidean_functions_of_the_oscillator(outside: Outside) -> None:
    entry = outside("wightman-w1.3-t0.7")
    w, t, expected = float(entry["parameters"]["omega"]), float(entry["parameters"]["t"]), entry["value"]

    def number(key: str) -> complex:
        return complex(expected[key].replace(" ", ""))

    found = lines(levels(oscillator(w), 4), q, q)
    both = np.array([t, -t])
    assert found.as_written(both) == pytest.approx([number("W(t)"), number("W(-t)")], abs=1e-12)
    assert found.time_ordered(both)[1] == pytest.approx(number("G_F(-t)"), abs=1e-12)
    commutator = found.as_written(both)[0] - found.as_written(both)[1]
    assert commutator == pytest.approx(number("comm"), abs=1e-12)
    assert found.euclidean(np.array([t]))[0] == pytest.approx(float(expected["S2"]), abs=1e-12)


@pytest.mark.parametrize("beta", [0.7, 2.0, 9.0])
def test_the_thermal_oscillator_in_closed_form(beta: float) -> None:
    """<q(t) q> = (coth(beta w/2) cos w t - i sin w t) / 2w."""
    w, t = 1.3, np.linspace(-5, 5, 21)
    found = lines(levels(oscillator(w), 4), q, q, beta)
    exact = (np.cos(w * t) / np.tanh(beta * w / 2) - 1j * np.sin(w * t)) / (2 * w)
    assert np.max(np.abs(found.as_written(t) - exact)) < 1e-11
    assert np.max(np.abs(found.time_ordered(t) - (exact.real - 1j * np.sin(w * np.abs(t)) / (2 * w)))) < 1e-11


@pytest.mark.parametrize("problem", [anharmonic(1.0), double_well(1.0, 1.0), line(lambda x: x**4 - x)])
def test_lines_give_the_euclidean_correlator(problem: OnePath) -> None:
    spectrum = levels(problem, 6)
    tau = np.array([0.0, 0.2, 0.9])
    for beta in (None, 2.0):
        found = lines(spectrum, square, q, beta)
        assert found.euclidean(tau) == pytest.approx(spectrum.correlator(square, q, tau, beta), abs=1e-11)
        assert found.uncertain < 1e-10


@pytest.mark.parametrize(("f", "g"), [(q, q), (square, square), (square, q)])
def test_the_quarter_turn_joins_euclidean_and_real_time(f: Any, g: Any) -> None:
    """Sum over levels against split-operator propagation through complex time, on the arc from 0 to 90 degrees."""
    problem = line(lambda x: x**2 / 2 + x**4 + x / 3)
    system = System(np.eye(1), problem.potential, [lambda x: x + 4 * x**3 + 1 / 3], [None], np.zeros(1))
    spectrum = levels(problem, 6)
    found = lines(spectrum, f, g)
    points = arc(spectrum, found, system, f, g, 1.7)
    assert [round(float(np.degrees(p.angle))) for p in points] == [0, 30, 60, 90]
    assert points[0].from_lines == pytest.approx(spectrum.correlator(f, g, np.array([1.7]))[0], abs=1e-11)
    assert points[-1].from_lines == pytest.approx(found.time_ordered(np.array([1.7]))[0], abs=1e-13)
    for p in points:
        assert p.difference <= 3 * p.error + found.error(p.t)
        assert p.error < 1e-9


def test_an_angle_with_flux_turns_too() -> None:
    """A ring with a flux: complex wave functions, and correlators that are not even in time."""
    problem = OnePath(1.0, lambda x: -2 * np.cos(x), 2 * np.pi, 0.3, even=True)
    system = System(np.eye(1), problem.potential, [lambda x: 2 * np.sin(x)], [2 * np.pi], np.array([0.3]))
    spectrum = levels(problem, 4)
    found = lines(spectrum, np.sin, np.cos)
    for p in arc(spectrum, found, system, np.sin, np.cos, 1.1):
        assert p.difference <= 3 * p.error + found.error(p.t)
    backwards = found.time_ordered(np.array([-0.8]))[0]
    assert backwards == pytest.approx(lines(spectrum, np.cos, np.sin).time_ordered(np.array([0.8]))[0], abs=1e-12)


# --- lines ------------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("beta", [None, 0.8, 3.0])
def test_sum_rules(beta: float | None) -> None:
    """sum w = <q^2>; sum w E = 1/2m over all lines (Thomas, Reiche and Kuhn); detailed balance."""
    mass = 1.7
    spectrum = levels(OnePath(mass, lambda x: x**2 / 2 + x**4, even=True), 6)
    found = lines(spectrum, q, q, beta)
    assert np.sum(found.weights) == pytest.approx(spectrum.expectation(square, beta), rel=1e-11)
    assert np.sum(found.weights * found.frequencies) == pytest.approx(1 / (2 * mass), rel=1e-10)
    if beta is not None:
        up = {round(float(w), 8): float(weight) for w, weight in zip(found.frequencies, found.weights, strict=True)}
        for w, weight in up.items():
            if w > 0 and weight > 1e-6 and -w in up:
                assert up[-w] / weight == pytest.approx(np.exp(-beta * w), rel=1e-6)


def test_a_tunnelling_pair_keeps_its_line() -> None:
    spectrum = levels(double_well(2.0, 2.0), 4)
    split = spectrum.energies[1] - spectrum.energies[0]
    found = lines(spectrum, q, q)
    assert found.frequencies[0] == pytest.approx(split, rel=1e-6)
    assert found.weights[0] == pytest.approx(abs(spectrum.matrix_element(q, 0, 1)) ** 2, rel=1e-9)


def test_a_continuum_has_no_lines() -> None:
    with pytest.raises(SpectrumError, match="its lines are dense"):
        lines(replace(levels(oscillator(), 2), threshold=3.0), q, q)


# --- response ---------------------------------------------------------------------------------------------------
def test_the_oscillator_responds_as_newton_says() -> None:
    """chi(w) = 1/(m (w0^2 - w^2)) at every temperature; driven, the solution of the classical equation."""
    w, mass = 1.3, 2.0
    spectrum = levels(oscillator(w, mass), 4)
    t = np.linspace(0, 12, 241)
    source = np.sin(0.5 * t) * np.exp(-t / 5)
    motion = solve_ivp(
        lambda s, y: [y[1], -(w**2) * y[0] + np.interp(s, t, source) / mass], (0, 12), [0, 0], t_eval=t,
        rtol=1e-9, atol=1e-11, max_step=0.05,
    ).y[0]  # fmt: skip
    for beta in (None, 1.5):
        found = lines(spectrum, q, q, beta)
        z = np.array([0.4 + 0.01j, 2.0 + 0.01j])
        assert found.susceptibility(z) == pytest.approx(1 / (mass * (w**2 - z**2)), rel=1e-10)
        assert found.static == pytest.approx(1 / (mass * w**2), rel=1e-10)
        assert np.max(np.abs(found.driven(t, source) - motion)) < 1e-6
        assert found.response_in_time(np.array([-1.0, 0.6])) == pytest.approx([0, np.sin(w * 0.6) / (mass * w)])


@pytest.mark.parametrize("beta", [None, 1.0])
@pytest.mark.parametrize(("f", "g"), [(q, q), (square, square), (square, q)])
def test_static_response_is_the_derivative_of_an_average(beta: float | None, f: Any, g: Any) -> None:
    """Against two spectra of H - J g."""

    def average(j: float) -> float:
        return levels(line(lambda x: x**2 / 2 + x**4 + x / 3 - j * g(x)), 4).expectation(f, beta)

    found = lines(levels(line(lambda x: x**2 / 2 + x**4 + x / 3), 4), f, g, beta)
    assert found.static == pytest.approx((average(1e-4) - average(-1e-4)) / 2e-4, rel=1e-6)
    if beta is None:
        assert found.susceptibility(np.array([1e-9j]))[0] == pytest.approx(found.static, rel=1e-8)


def test_the_response_in_frequency_is_the_transform_of_that_in_time() -> None:
    found = lines(levels(anharmonic(1.0), 4), square, square, 1.0)
    z = 1.5 + 0.7j
    real, imaginary = (
        quad(
            lambda t, part=part: part(np.exp(1j * z * t)) * found.response_in_time(np.array([t]))[0], 0, 50, limit=400
        )[0]
        for part in (np.real, np.imag)
    )
    assert found.susceptibility(np.array([z]))[0] == pytest.approx(real + 1j * imaginary, rel=1e-7)


# --- many times -------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("beta", [None, 2.0])
def test_wicks_theorem_for_the_oscillator(beta: float | None) -> None:
    w = 1.3
    spectrum = levels(oscillator(w), 4)

    def two(t: float) -> float:
        if beta is None:
            return float(np.exp(-w * abs(t)) / (2 * w))
        return float(np.cosh(w * (beta / 2 - abs(t))) / (2 * w * np.sinh(beta * w / 2)))

    a, b, c, d = 0.0, 0.3, 0.5, 1.1
    expected = two(b - a) * two(d - c) + two(c - a) * two(d - b) + two(d - a) * two(c - b)
    found = euclidean_product(spectrum, [(c, q), (a, q), (d, q), (b, q)], beta)
    assert found == pytest.approx(expected, rel=1e-11)
    assert euclidean_product(spectrum, [(a, q), (b, q), (c, q)], beta) == pytest.approx(0, abs=1e-13)


@pytest.mark.parametrize("beta", [None, 2.0])
def test_coinciding_times_are_products(beta: float | None) -> None:
    spectrum = levels(line(lambda x: x**4 - x), 4)
    four = euclidean_product(spectrum, [(0.0, q), (0.0, q), (0.4, q), (0.4, q)], beta)
    assert four == pytest.approx(spectrum.correlator(square, square, np.array([0.4]), beta)[0], rel=1e-11)
    near = euclidean_product(spectrum, [(0.0, q), (1e-9, q), (0.4, q), (0.4 + 1e-9, q)], beta)
    assert near == pytest.approx(four, rel=1e-7)
    if beta is not None:  # shifted round the circle
        shifted = euclidean_product(spectrum, [(0.0, q), (0.3, square), (1.2, q)], beta)
        assert euclidean_product(spectrum, [(1.2, q), (1.5, square), (2.4 - 2.0, q)], beta) == pytest.approx(
            euclidean_product(spectrum, [(0.0, q), (0.8, q), (1.1, square)], beta), rel=1e-10
        )
        assert euclidean_product(spectrum, [(0.5, q), (0.8, square), (1.7, q)], beta) == pytest.approx(shifted)


# --- thermodynamics ---------------------------------------------------------------------------------------------
@pytest.mark.parametrize("beta", ["0.5", "1", "2", "5"])
def test_thermal_functions_agree_with_independently_computed_ones(beta: str, outside: Outside) -> None:
    expected = outside(f"thermal-lam1-b{beta}")["value"]
    found = thermodynamics(levels(anharmonic(1.0), 4), [float(beta)])
    for column, key in ((found.partition, "Z"), (found.energy, "E"), (found.heat_capacity, "C")):
        assert column[0] == pytest.approx(float(expected[key]), rel=1e-9)


def test_thermal_functions_hang_together() -> None:
    spectrum = levels(double_well(1.0, 1.0), 4)
    beta, h = 2.0, 1e-4
    found = thermodynamics(spectrum, [beta - h, beta, beta + h])
    temperature = 1 / found.beta
    slope = -(found.free_energy[2] - found.free_energy[0]) / (temperature[2] - temperature[0])
    assert found.entropy[1] == pytest.approx(slope, rel=1e-6)
    warming = (found.energy[2] - found.energy[0]) / (temperature[2] - temperature[0])
    assert found.heat_capacity[1] == pytest.approx(warming, rel=1e-6)
    assert found.partition == pytest.approx([spectrum.partition(b) for b in found.beta], rel=1e-13)


def test_cold_entropy_and_heat_capacity_keep_their_digits() -> None:
    """The oscillator at beta w = 60: S and C are 1e-24, and right."""
    found = thermodynamics(levels(oscillator(), 4), [60.0])
    x = np.exp(-60.0)
    assert found.entropy[0] == pytest.approx(60 * x + x, rel=1e-10)
    assert found.heat_capacity[0] == pytest.approx(3600 * x, rel=1e-10)


def test_no_temperature_is_refused() -> None:
    spectrum = levels(oscillator(), 2)
    for betas in ([0.0], [-1.0], [1.0, np.inf], []):
        with pytest.raises(SpectrumError, match="beta must be"):
            thermodynamics(spectrum, betas)
