"""The transfer matrix against closed forms, published-precision values, and the action's own integrals."""

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.transfer import transfer

from .problems import anharmonic, double_well, even, line, oscillator


def q(x):
    return x


OSCILLATORS = ["ho-lattice-a0.1-w1-N100-m1", "ho-lattice-a0.5-w1-N20-m1", "ho-lattice-a1-w1-N51-m1"]


@pytest.mark.parametrize("name", [*OSCILLATORS, "ho-lattice-a0.25-w2-N16-m0.5"])
def test_lattice_oscillator_has_its_closed_form(name, outside):  # Creutz and Freedman 1981
    entry = outside(name)
    a, omega, sites, mass = (float(entry["parameters"][k]) for k in ("a", "omega", "N", "m"))
    value = {k: float(v) for k, v in entry["value"].items()}
    solution = transfer(oscillator(omega, mass), a, int(sites))
    found = {
        "x2": solution.expectation(lambda x: x**2),
        "x4": solution.expectation(lambda x: x**4),
        "E_virial": solution.energy(),
        "gap": solution.gap([q]),
        "lnZ": solution.log_partition,
        "R": np.exp(-a * solution.gap([q])),
    }
    found["C1"], found["C4"] = solution.correlator(q, q, np.array([1, 4]))
    assert found == pytest.approx({k: value[k] for k in found}, rel=1e-12)
    naive = mass / (2 * a**2) * (2 * found["x2"] - 2 * found["C1"])
    assert naive == pytest.approx(value["kin_naive"], rel=1e-10)


TABULATED = {
    "tm-aho-lam1-a0.1-N100": anharmonic(1),
    "tm-aho-lam1-a0.5-N16": anharmonic(1),
    "tm-dw-1-1-a0.2-N40": double_well(1, 1),
    "tm-dw-1-2-a0.25-N80": double_well(1, 2),
    "tm-quartic-a0.05-N60": even(lambda x: x**4),
}


@pytest.mark.parametrize("name", TABULATED)
def test_anharmonic_lattices_agree_with_independent_values(name, outside):  # given to 13 digits
    entry = outside(name)
    a, sites, value = entry["parameters"]["a"], entry["parameters"]["N"], entry["value"]
    solution = transfer(TABULATED[name], a, sites)
    c1, c2, c5, half = solution.correlator(q, q, np.array([1, 2, 5, sites // 2]))
    found = {
        "x2": solution.expectation(lambda x: x**2), "x4": solution.expectation(lambda x: x**4),
        "C1": c1, "C2": c2, "C5": c5, "CN2": half,
        "lnZ": solution.log_partition, "E0_lat": solution.energies[0], "gap_lat": solution.gap([q]),
    }  # fmt: skip
    assert found == pytest.approx(value, rel=1e-12)
    off = abs(solution.energies[0] - value["E0_lat"])
    assert off <= 10 * solution.error[0] + 5e-13 * value["E0_lat"]


def path_integral(potential, a, mass, powers, points=90, reach=6.0):
    """ln Z and <prod q_i^{k_i}> over a few sites by a sum over a grid, straight from the action."""
    x = np.linspace(-reach, reach, points)
    sites = len(powers)
    axes = np.meshgrid(*[x] * sites, indexing="ij", sparse=True)
    action = sum(a * potential(axis) for axis in axes)
    for i in range(sites):
        action = action + mass / (2 * a) * (axes[(i + 1) % sites] - axes[i]) ** 2
    weight = np.exp(-action)
    inserted = weight * np.prod(np.broadcast_arrays(*[axis**k for axis, k in zip(axes, powers, strict=True)]), axis=0)
    measure = sites * np.log(np.sqrt(mass / (2 * np.pi * a)) * (x[1] - x[0]))
    return np.log(weight.sum()) + measure, inserted.sum() / weight.sum()


@pytest.mark.parametrize("powers", [(1, 1, 2), (2, 0, 2), (3, 1, 0), (1, 0, 0), (1, 2, 1)])
def test_three_sites_agree_with_the_integral_of_the_action(powers):
    def potential(x):
        return x**2 / 2 + 0.3 * x**3 + 0.4 * x**4

    a, mass = 0.7, 1.3
    log_partition, expected = path_integral(potential, a, mass, powers)
    solution = transfer(line(potential, mass), a, 3)
    groups = [(n, (lambda x, k=k: x**k)) for n, k in enumerate(powers)]
    assert solution.log_partition == pytest.approx(log_partition, abs=1e-11)
    assert solution.product(groups) == pytest.approx(expected, rel=1e-10)


def test_one_site_is_an_ordinary_integral(outside):
    """Z = int dq exp(-a V) sqrt(m/2 pi a) for N = 1."""
    x, h = np.linspace(-8, 8, 4001, retstep=True)
    weight = np.exp(-0.3 * (x**2 / 2 + x**4))
    solution = transfer(anharmonic(1), 0.3, 1)
    assert solution.log_partition == pytest.approx(np.log(weight.sum() * h / np.sqrt(2 * np.pi * 0.3)), abs=1e-12)
    assert solution.expectation(lambda y: y**2) == pytest.approx((x**2 * weight).sum() / weight.sum(), rel=1e-12)


@pytest.mark.parametrize(("a", "sites"), [(10.0, 1), (10.0, 3), (0.01, 10), (1e-4, 100_000), (0.5, 1_000_000)])
def test_extreme_lattices_of_the_oscillator(a, sites):
    root = np.sqrt(1 + a**2 / 4)
    log_r = np.log1p(a**2 / 2 - a * root) if a < 1 else -np.log(1 + a**2 / 2 + a * root)
    closed = (1 + np.exp(sites * log_r)) / -np.expm1(sites * log_r) / (2 * root)
    solution = transfer(oscillator(), a, sites)
    assert solution.expectation(lambda x: x**2) == pytest.approx(closed, rel=1e-10)
    assert solution.energy() == pytest.approx(closed, rel=1e-10)
    log_partition = sites * log_r / 2 - np.log(-np.expm1(sites * log_r))
    assert solution.log_partition == pytest.approx(log_partition, rel=1e-10, abs=10 * solution.log_partition_error)


def test_products_agree_with_correlators_and_do_not_care_about_order():
    solution = transfer(double_well(1, 1), 0.2, 40)
    curve = solution.correlator(q, lambda x: x**3, np.array([0, 3, 37, -3]))
    assert curve[1] == pytest.approx(curve[2], rel=1e-13)
    assert curve[1] == pytest.approx(curve[3], rel=1e-13)
    assert solution.product([(3, q), (0, lambda x: x**3)]) == pytest.approx(curve[1], rel=1e-13)
    assert solution.product([(43, q), (40, lambda x: x**3)]) == pytest.approx(curve[1], rel=1e-13)
    assert solution.product([(5, q), (5, lambda x: x**3)]) == pytest.approx(curve[0], rel=1e-13)
    four = [
        solution.product(list(zip(order, [q] * 4, strict=True)))
        for order in ((0, 2, 5, 9), (9, 0, 5, 2), (1, 3, 6, 10))
    ]
    assert four[1:] == pytest.approx(four[:1] * 2, rel=1e-12)
    assert solution.product([]) == 1.0


def test_gap_is_the_lowest_level_that_the_operators_create():
    solution = transfer(double_well(1, 2), 0.25, 80)
    energies = solution.energies
    assert solution.gap([q]) == energies[1] - energies[0]
    assert solution.gap([lambda x: x**2]) == energies[2] - energies[0]
    assert solution.gap([lambda x: x**2, lambda x: x**3]) == energies[1] - energies[0]
    assert solution.gap([lambda x: 1e6 + x]) == energies[1] - energies[0]
    with pytest.raises(SpectrumError, match="create no state"):
        solution.gap([lambda x: 0 * x + 2.0])


def test_gap_of_the_oscillator_skips_what_q_squared_cannot_reach():
    solution = transfer(oscillator(), 0.5, 20)
    assert solution.gap([lambda x: x**2]) == pytest.approx(2 * solution.gap([q]), rel=1e-12)
    shifted = transfer(line(lambda x: (x - 3) ** 2 / 2), 0.5, 20)  # the same without a promised parity
    assert shifted.gap([lambda x: (x - 3) ** 2]) == pytest.approx(2 * solution.gap([q]), rel=1e-12)


def test_lattice_levels_approach_the_continuum_quadratically():
    exact = levels(anharmonic(1), 4).energies
    coarse, fine = (transfer(anharmonic(1), a, round(8 / a)).energies[:4] - exact for a in (0.04, 0.02))
    assert coarse / fine == pytest.approx(4, rel=0.01)


def test_averages_approach_the_thermal_ones():
    thermal = levels(anharmonic(1), 4).at(2.0)
    off = [
        transfer(anharmonic(1), 2.0 / n, n).expectation(lambda x: x**2) - thermal.expectation(lambda x: x**2)
        for n in (40, 80)
    ]
    assert off[0] / off[1] == pytest.approx(4, rel=0.01)


def test_errors_of_the_levels_are_honest():
    """Against the closed form of the lattice oscillator, over levels down to where they are rounding."""
    solution = transfer(oscillator(), 0.3, 30)
    n = np.arange(len(solution.energies))
    exact = 2 / 0.3 * np.arcsinh(0.15) * (n + 0.5)
    assert len(n) > 25
    assert np.all(np.abs(solution.energies - exact) <= 10 * solution.error)


def test_kinked_potential_admits_its_error():
    rough, smooth = transfer(even(np.abs), 0.2, 50), transfer(even(lambda x: np.sqrt(x**2 + 1e-6)), 0.2, 50)
    assert rough.log_partition == pytest.approx(smooth.log_partition, abs=1e-3)
    assert 1e-9 < rough.log_partition_error < 1e-4
