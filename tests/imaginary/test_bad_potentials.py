"""What has no levels is refused, with the place and the reason."""

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.transfer import transfer

from .problems import TURN, anharmonic, line

UNBOUNDED = {
    "-q^4": (lambda q: -(q**4), "falls without limit towards q = minus infinity"),
    "q^3": (lambda q: q**3, "falls without limit towards q = minus infinity"),
    "q^2 - q^3": (lambda q: q**2 - q**3, "falls without limit towards q = infinity"),
    "q": (lambda q: q, "falls without limit towards q = minus infinity"),
    "-exp(q)": (lambda q: -np.exp(q), "falls without limit towards q = infinity"),
    "q^4 - 1e-3 q^6": (lambda q: q**4 - 1e-3 * q**6, "falls without limit"),
    "-1/|q|": (lambda q: -1 / np.abs(q), "minus infinity at q = 0"),
    "log|q|": (lambda q: np.log(np.abs(q)), "minus infinity at q = 0"),
    "0": (lambda q: 0 * q, "flat: nothing is bound"),
    "constant": (lambda q: 3.0, "flat: nothing is bound"),
    "sech^2": (lambda q: 1 / np.cosh(q) ** 2, "nothing is bound: the potential is lowest far away, V = 0"),
    "log q": (np.log, "not a number at q = -"),
    "sqrt q": (np.sqrt, "not a number at q = -"),
    "hole": (lambda q: np.where(np.abs(q - 1) < 0.1, np.nan, q**2), r"not a number at q = (0\.9|1)"),
    "nan": (lambda q: q * np.nan, "not a number anywhere"),
    "inf": (lambda q: np.full_like(q, np.inf), "infinite everywhere"),
}


@pytest.mark.parametrize("name", UNBOUNDED)
def test_levels_are_refused_with_the_reason(name):
    potential, words = UNBOUNDED[name]
    with pytest.raises(SpectrumError, match=words):
        levels(line(potential), 2)


@pytest.mark.parametrize("name", UNBOUNDED)
def test_transfer_matrices_are_refused_with_the_reason(name):
    potential, words = UNBOUNDED[name]
    with pytest.raises(SpectrumError, match=words):
        transfer(line(potential), 0.1, 20)


def test_bands_are_not_levels():
    with pytest.raises(SpectrumError, match="no level is bound"):
        levels(line(lambda q: -np.cos(q)), 1)


@pytest.mark.parametrize(
    "potential", [lambda q: 10 * (1 - np.exp(-q)) ** 2, lambda q: -1 / np.cosh(q) ** 2, lambda q: -np.cos(q)]
)
def test_trace_over_a_potential_that_does_not_confine_is_refused(potential):
    with pytest.raises(SpectrumError, match="does not confine"):
        transfer(line(potential), 0.1, 100)


def test_slow_growth_confines():
    assert len(levels(line(lambda q: np.log(1 + q**2)), 4).energies) == 4
    transfer(line(lambda q: np.sqrt(1 + q**2)), 0.2, 50)


def test_impossible_requests():
    with pytest.raises(SpectrumError, match="at least one level"):
        levels(anharmonic(1), 0)
    with pytest.raises(SpectrumError, match="positive spacing"):
        transfer(anharmonic(1), 0.0, 10)
    with pytest.raises(SpectrumError, match="at least one site"):
        transfer(anharmonic(1), 0.1, 0)
    with pytest.raises(SpectrumError, match="points"):
        levels(anharmonic(1), 100_000)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((-1.0, np.abs), "mass must be positive"),
        ((float("nan"), np.abs), "mass must be positive"),
        ((1.0, np.abs, -1.0), "period must be positive"),
        ((1.0, np.abs, TURN, float("inf")), "must be finite"),
    ],
)
def test_impossible_problems(arguments, words):
    with pytest.raises(SpectrumError, match=words):
        OnePath(*arguments)


def test_circle_names_the_place_where_the_potential_is_no_number():
    with pytest.raises(SpectrumError, match=r"not a number at q = -3\.14159"):
        levels(OnePath(1.0, np.sqrt, TURN), 2)
    with pytest.raises(SpectrumError, match="infinite somewhere on the circle"):
        transfer(OnePath(1.0, lambda q: 1 / q**2, TURN), 0.1, 10)


def test_numpy_is_left_as_it_was():
    before = np.geterr()
    levels(line(lambda q: 10 * (np.exp(-2 * q) - 2 * np.exp(-q))), 2)
    assert np.geterr() == before
