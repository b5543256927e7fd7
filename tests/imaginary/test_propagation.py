"""Split-operator propagation: orders of convergence, kernels in closed form, ground states, one and two paths."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.boxes import fitted_grid, held
from quarterturn.imaginary.fixed_ends import from_levels, propagated
from quarterturn.imaginary.ground import ground_state
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.propagation import CHIN_4A, STRANG, Grid, Propagator, Scheme, System, evolve

from .problems import anharmonic, double_well, oscillator

Outside = Callable[[str], dict[str, Any]]
ONE, TWO = np.eye(1), np.eye(2)


def one(potential: Any, slope: Any, mass: float = 1.0) -> System:
    return System(mass * ONE, potential, [slope], [None], np.zeros(1))


OSCILLATOR = one(lambda q: q**2 / 2, lambda q: q)
QUARTIC = one(lambda q: q**2 / 2 + q**4, lambda q: q + 4 * q**3)
WELL = one(lambda q: (q**2 - 1) ** 2, lambda q: 4 * q * (q**2 - 1))
PENDULUM = System(ONE, lambda q: -2 * np.cos(q), [lambda q: 2 * np.sin(q)], [2 * np.pi], np.array([0.3]))
X2Y2 = System(
    TWO,
    lambda x, y: (x**2 + y**2 + x**2 * y**2) / 2,
    [lambda x, y: x + x * y**2, lambda x, y: y + x**2 * y],
    [None, None],
    np.zeros(2),
)


def tilted(q: Any) -> Any:
    return 2.04 * q - 2.56 * q**2 + 0.42 * q**3 + 0.383 * q**4


def tilted_slope(q: Any) -> Any:
    return 2.04 - 5.12 * q + 1.26 * q**2 + 1.532 * q**3


def mehler(b: float, a: float, beta: float) -> float:
    """Mehler 1866: the kernel of H = p^2/2 + q^2/2 in imaginary time."""
    sinh, cosh = np.sinh(beta), np.cosh(beta)
    return float(np.exp(-((a * a + b * b) * cosh - 2 * a * b) / (2 * sinh)) / np.sqrt(2 * np.pi * sinh))


# --- orders -----------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("scheme", [STRANG, CHIN_4A])
@pytest.mark.parametrize("system", [OSCILLATOR, QUARTIC, WELL, PENDULUM, X2Y2])
def test_each_scheme_has_its_order(scheme: Scheme, system: System) -> None:
    """Against a reference of many steps, not against itself; Suzuki 1995 and Chin 1997 for the fourth order."""
    grid = fitted_grid(system)
    wave = np.exp(-sum((q - 0.3) ** 2 for q in grid.positions)).astype(complex)
    reference = Propagator(system, grid, CHIN_4A, 1 / 400).advance(wave, 400)
    errors = [
        float(np.linalg.norm(Propagator(system, grid, scheme, 1 / n).advance(wave, n) - reference)) for n in (20, 40)
    ]
    assert np.log2(errors[0] / errors[1]) == pytest.approx(scheme.order, abs=0.1)


def test_all_shares_of_time_are_positive() -> None:
    for scheme in (STRANG, CHIN_4A):
        assert all(v > 0 for v, _, _ in scheme.stages)
        assert all(t > 0 for _, _, t in scheme.stages[:-1])
        assert sum(v for v, _, _ in scheme.stages) == pytest.approx(1)
        assert sum(t for _, _, t in scheme.stages) == pytest.approx(1)


@pytest.mark.parametrize("scheme", [STRANG, CHIN_4A])
def test_the_ladder_measures_its_order_and_its_error(scheme: Scheme) -> None:
    grid = fitted_grid(QUARTIC)
    wave = np.exp(-((grid.axes[0] - 1) ** 2)).astype(complex)
    found = evolve(QUARTIC, grid, wave, 1.0, scheme=scheme, most_steps=512)
    assert found.order == pytest.approx(scheme.order, abs=0.05)
    exact = evolve(QUARTIC, grid, wave, 1.0, tolerance=1e-13)
    miss = np.linalg.norm(found.wave - exact.wave) / np.linalg.norm(exact.wave)
    assert 0.2 * found.error < miss + 1e-12
    assert miss <= 2 * found.error + 1e-12


def test_strang_is_the_path_integral_between_fixed_ends() -> None:
    """Three steps: the integral over two intermediate points, by quadrature."""
    grid = fitted_grid(QUARTIC)
    eps, a, b = 0.2, 0.4, -0.3
    wave = Propagator(QUARTIC, grid, STRANG, eps).advance(grid.delta([a]), 3)
    x = np.linspace(-7, 7, 1401)
    v = QUARTIC.potential
    link = np.exp(-((x[:, None] - x[None, :]) ** 2) / (2 * eps)) / np.sqrt(2 * np.pi * eps)
    first = np.exp(-((x - a) ** 2) / (2 * eps) - eps * v(a) / 2) / np.sqrt(2 * np.pi * eps)
    last = np.exp(-((b - x) ** 2) / (2 * eps) - eps * v(b) / 2) / np.sqrt(2 * np.pi * eps)
    middle = np.exp(-eps * v(x)) * (x[1] - x[0])
    expected = last @ (middle * (link @ (middle * first)))
    assert grid.at(wave, [b]).real == pytest.approx(expected, rel=1e-10)


# --- kernels ----------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("name", ["mehler-w1-t0.5", "mehler-w1-t4"])
def test_the_kernel_of_the_oscillator_is_mehlers(name: str, outside: Outside) -> None:
    entry = outside(name)
    beta, b, a = (float(entry["parameters"][key]) for key in ("t", "x", "y"))
    exact = float(entry["value"]["KE"])
    assert mehler(b, a, beta) == pytest.approx(exact, rel=1e-13)
    summed = from_levels(levels(oscillator(), 4), [b], [a], beta)
    stepped = propagated(OSCILLATOR, [b], [a], beta)
    for found in (summed, stepped):
        assert abs(found.value - exact) <= found.error
        assert found.error < 1e-11
    assert stepped.order == pytest.approx(4, abs=0.05)
    second = propagated(OSCILLATOR, [b], [a], beta, STRANG)
    assert second.order == pytest.approx(2, abs=0.05)
    assert abs(second.value - exact) <= 2 * second.error


@pytest.mark.parametrize(
    ("problem", "system", "b", "a", "beta"),
    [
        (anharmonic(1.0), QUARTIC, 0.5, -0.8, 0.3),
        (anharmonic(1.0), QUARTIC, 2.0, -2.0, 1.0),  # 2e-7, deep under the barrier of the path
        (double_well(1.0, 1.0), WELL, 1.0, -1.0, 6.0),
        (
            OnePath(0.15, tilted),
            one(tilted, tilted_slope, 0.15),
            -4.08,
            -2.4,
            0.38,
        ),  # many levels beyond those asked for
        (OnePath(1.0, lambda q: -2 * np.cos(q), 2 * np.pi, 0.3, even=True), PENDULUM, 1.0, -1.0, 1.5),
    ],
)
def test_levels_and_propagation_give_one_kernel(
    problem: OnePath, system: System, b: float, a: float, beta: float
) -> None:
    summed, stepped = from_levels(levels(problem, 6), [b], [a], beta), propagated(system, [b], [a], beta)
    assert abs(summed.value - stepped.value) <= summed.error + stepped.error
    assert summed.error + stepped.error < 1e-8 * abs(summed.value)
    assert isinstance(summed.value, complex) == (problem.flux != 0)


def test_a_kernel_of_two_oscillators_is_the_product_of_two() -> None:
    """In normal coordinates; with a mass tensor and a coupling."""
    mass, k = np.array([[2.0, 0.5], [0.5, 1.0]]), np.array([[1.0, 0.3], [0.3, 0.8]])
    system = System(
        mass,
        lambda x, y: (k[0, 0] * x**2 + 2 * k[0, 1] * x * y + k[1, 1] * y**2) / 2,
        [lambda x, y: k[0, 0] * x + k[0, 1] * y, lambda x, y: k[0, 1] * x + k[1, 1] * y],
        [None, None],
        np.zeros(2),
    )
    root = np.linalg.cholesky(mass)  # u = root^T q has unit mass
    inverse = np.linalg.inv(root)
    squares, modes = np.linalg.eigh(inverse @ k @ inverse.T)
    a, b, beta = np.array([0.3, -0.5]), np.array([-0.2, 0.4]), 1.2
    expected = np.sqrt(np.linalg.det(mass))
    for w, x, y in zip(np.sqrt(squares), modes.T @ root.T @ b, modes.T @ root.T @ a, strict=True):
        expected *= np.sqrt(w) * mehler(np.sqrt(w) * x, np.sqrt(w) * y, w * beta)
    found = propagated(system, list(b), list(a), beta)
    assert abs(found.value - expected) <= found.error
    assert found.order == pytest.approx(4, abs=0.1)
    assert ground_state(system).energy == pytest.approx(np.sum(np.sqrt(squares)) / 2, abs=1e-11)


def test_a_kernel_outside_the_levels_and_a_beta_too_short_are_refused() -> None:
    with pytest.raises(SpectrumError, match="outside the region that the levels fill"):
        from_levels(levels(oscillator(), 4), [90.0], [0.0], 1.0)
    with pytest.raises(SpectrumError, match="points, more than"):
        propagated(OSCILLATOR, [0.0], [0.0], 1e-6)


# --- ground states ----------------------------------------------------------------------------------------------
@pytest.mark.parametrize("scheme", [STRANG, CHIN_4A])
@pytest.mark.parametrize(
    ("system", "name", "key"),
    [(QUARTIC, "qm-aho-levels-lam1", 0), (X2Y2, "two-dof-x2y2", 0)],
)
def test_ground_states_by_evolution(scheme: Scheme, system: System, name: str, key: int, outside: Outside) -> None:
    exact = float(outside(name)["value"][key])
    found = ground_state(system, scheme)
    assert abs(found.energy - exact) <= found.error + 1e-10 * exact  # the outside value has eleven digits
    assert found.error < 1e-11
    assert found.order == pytest.approx(scheme.order, abs=0.1)
    assert np.sum(np.abs(found.wave) ** 2) * found.grid.cell == pytest.approx(1)


def test_two_coupled_oscillators(outside: Outside) -> None:
    entry = outside("coupled-ho2-1-1.5-0.4")["value"]
    system = System(
        TWO,
        lambda x, y: x**2 / 2 + 2.25 * y**2 / 2 + 0.4 * x * y,
        [lambda x, y: x + 0.4 * y, lambda x, y: 2.25 * y + 0.4 * x],
        [None, None],
        np.zeros(2),
    )
    found = ground_state(system)
    assert found.energy == pytest.approx(float(entry["E0"]), abs=1e-11)
    x, y = found.grid.positions
    density = np.abs(found.wave) ** 2 * found.grid.cell
    for value, key in ((x * x, "x2"), (y * y, "y2"), (x * y, "xy")):
        # a state is as good as the fourth power of the last step, its energy as the eighth
        assert np.sum(density * value) == pytest.approx(float(entry[key]), abs=found.eps[-1] ** 4)


def test_units_do_not_matter() -> None:
    system = one(lambda q: 1e-6 * q**2 / 2, lambda q: 1e-6 * q, 1e3)
    assert ground_state(system).energy == pytest.approx(np.sqrt(1e-9) / 2, rel=1e-11)


def test_a_state_that_is_too_close_shows_in_the_error() -> None:
    """Two wells 1e-5 apart in depth, with a splitting far below: evolution cannot tell them apart in time."""
    system = one(lambda q: 20 * (q**2 - 1) ** 2 + 1e-5 * q, lambda q: 80 * q * (q**2 - 1) + 1e-5)
    exact = levels(OnePath(1.0, lambda q: 20 * (q**2 - 1) ** 2 + 1e-5 * q), 2).energies
    try:
        found = ground_state(system)
    except SpectrumError as refused:
        assert "another state lies too close" in refused.message
    else:
        assert abs(found.energy - exact[0]) <= found.error


def test_what_does_not_confine_is_refused() -> None:
    with pytest.raises(SpectrumError, match="does not confine"):
        ground_state(one(lambda q: 0 * q, lambda q: 0 * q))
    with pytest.raises(SpectrumError, match="does not confine"):
        ground_state(System(TWO, lambda x, y: x**2, [lambda x, y: 2 * x, lambda x, y: 0 * y], [None] * 2, np.zeros(2)))


def test_a_grid_tells_what_it_does_not_hold() -> None:
    grid = Grid((-4.0,), (8.0,), (64,))
    x = grid.axes[0]
    assert max(held(np.exp(-4 * x**2), grid, (None,))) < 1e-8
    assert held(np.exp(-(x**2) / 10), grid, (None,))[0] > 0.1
    assert held(np.exp(-300 * x**2), grid, (None,))[1] > 0.1
