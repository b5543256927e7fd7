"""The transfer matrix of two paths against closed forms, one path at a time, and the action's own integrals."""

import itertools

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.coupled import CoupledPaths
from quarterturn.imaginary.coupled_transfer import coupled_transfer
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.transfer import transfer

TURN = 2 * np.pi
STIFFNESS = np.array([[1.0, 0.4], [0.4, 2.25]])
MASSES = [np.eye(2), np.array([[1.3, -0.3], [-0.3, 0.6]])]


def x(q):
    return q[0]


def y(q):
    return q[1]


def pair(potential, mass=MASSES[0], periods=(None, None), fluxes=(0.0, 0.0), drift=(None, None)) -> CoupledPaths:
    return CoupledPaths(mass, potential, periods, fluxes, drift)


def oscillators(mass) -> CoupledPaths:
    return pair(lambda q: np.einsum("i...,ij,j...->...", q, STIFFNESS, q) / 2, mass)


@pytest.mark.parametrize("mass", MASSES)
@pytest.mark.parametrize(("a", "sites"), [(0.1, 100), (0.5, 20), (1.0, 51), (0.5, 6)])
def test_lattice_of_coupled_oscillators_has_its_closed_form(mass, a, sites):
    """Each normal mode is a lattice oscillator with sinh(a w_a/2) = a w/2 (Creutz and Freedman 1981).

    Its correlator is cosh(w_a (beta/2 - t)) / (2 w_eff sinh(w_a beta/2)), w_eff = sinh(a w_a)/a, and
    Z = 1/(2 sinh(w_a beta/2)).
    """
    root = np.linalg.inv(np.linalg.cholesky(mass))
    squares, modes = np.linalg.eigh(root @ STIFFNESS @ root.T)
    shapes = root.T @ modes  # q = shapes Q
    lattice = 2 / a * np.arcsinh(np.sqrt(squares) * a / 2)
    beta, n = a * sites, np.array([0, 1, sites // 2])
    each = (
        np.cosh(lattice[:, None] * (beta / 2 - a * n))
        / (2 * np.sinh(lattice * beta / 2) * np.sinh(a * lattice) / a)[:, None]
    )
    solution = coupled_transfer(oscillators(mass), a, sites)
    assert solution.log_partition == pytest.approx(-np.sum(np.log(2 * np.sinh(lattice * beta / 2))), abs=1e-9)
    assert solution.energies[0] == pytest.approx(lattice.sum() / 2, rel=1e-10)
    assert solution.gap([x]) == pytest.approx(lattice.min(), rel=1e-9)
    for f, g in ((0, 0), (0, 1), (1, 1)):
        found = solution.correlator((x, y)[f], (x, y)[g], n)
        expected = (shapes[f] * shapes[g]) @ each
        assert found == pytest.approx(expected, rel=2e-9, abs=1e-11)


def test_estimated_errors_are_honest_on_a_coarse_lattice():
    lattice = 2 * np.arcsinh(np.sqrt(np.linalg.eigvalsh(STIFFNESS)) / 2)
    solution = coupled_transfer(oscillators(MASSES[0]), 1.0, 51)
    expected = np.sort(
        [(i + 0.5) * lattice[0] + (j + 0.5) * lattice[1] for i, j in itertools.product(range(12), repeat=2)]
    )
    count = 8
    assert np.all(np.abs(solution.energies[:count] - expected[:count]) <= 10 * solution.error[:count])
    log_partition = -np.sum(np.log(2 * np.sinh(lattice * 51 / 2)))
    assert abs(solution.log_partition - log_partition) <= 10 * solution.log_partition_error


def test_energy_is_the_slope_of_the_partition_function_and_virial():
    problem = pair(lambda q: q[0] ** 2 / 2 + q[1] ** 2 + q[0] ** 2 * q[1] ** 2 / 2, MASSES[1])
    a, sites, h = 0.3, 20, 1e-3
    high, low = (coupled_transfer(problem, a + s, sites).log_partition for s in (h, -h))
    solution = coupled_transfer(problem, a, sites)
    assert solution.energy() == pytest.approx(-(high - low) / (2 * h * sites), rel=1e-5)
    virial = solution.expectation(lambda q: q[0] ** 2 + 2 * q[1] ** 2 + 1.5 * q[0] ** 2 * q[1] ** 2)
    assert solution.energy() == pytest.approx(virial, rel=1e-9)


@pytest.mark.parametrize("powers", [((1, 1), (0, 1), (1, 0)), ((2, 0), (0, 2), (0, 0)), ((1, 0), (0, 1), (0, 0))])
def test_three_sites_agree_with_the_integral_of_the_action(powers):
    """Tr(T^3 …) straight from the action, on a grid of 31 x 31 points per site."""

    def potential(q):
        return q[0] ** 2 / 2 + q[1] ** 2 + 0.3 * q[0] ** 3 + 0.4 * q[0] ** 4 + 0.2 * q[1] ** 4 + 0.5 * q[0] * q[1]

    a, mass = 0.7, MASSES[1]
    ticks, step = np.linspace(-4.2, 4.2, 31, retstep=True)
    q = np.stack(np.meshgrid(ticks, ticks, indexing="ij")).reshape(2, -1)
    apart = q[:, :, None] - q[:, None, :]
    link = np.exp(-np.einsum("imn,ij,jmn->mn", apart, mass, apart) / (2 * a) - a * potential(q)[None, :])
    link *= step**2 * np.sqrt(np.linalg.det(mass)) / (2 * np.pi * a)
    inserted = [link * (q[0] ** i * q[1] ** j)[None, :] for i, j in powers]
    partition = np.trace(link @ link @ link)
    expected = np.trace(inserted[0] @ inserted[1] @ inserted[2]) / partition
    solution = coupled_transfer(pair(potential, mass), a, 3)
    groups = [(n, (lambda r, i=i, j=j: r[0] ** i * r[1] ** j)) for n, (i, j) in enumerate(powers)]
    assert solution.log_partition == pytest.approx(np.log(partition), abs=1e-8)
    assert solution.product(groups) == pytest.approx(expected, rel=1e-7)


def test_uncoupled_line_and_angle_are_the_product_of_their_lattices():
    """With a flux through the circle; each path solved by itself."""
    a, sites = 0.4, 20
    problem = pair(
        lambda q: -0.8 * np.cos(q[0]) + q[1] ** 4, np.diag([0.5, 1.0]), periods=(TURN, None), fluxes=(0.2, 0.0)
    )
    angle = transfer(OnePath(0.5, lambda q: -0.8 * np.cos(q), TURN, 0.2), a, sites)
    line = transfer(OnePath(1.0, lambda q: q**4, even=True), a, sites)
    both = coupled_transfer(problem, a, sites)
    assert both.log_partition == pytest.approx(angle.log_partition + line.log_partition, abs=1e-9)
    assert both.average_phase() == pytest.approx(angle.average_phase(), rel=1e-9)
    assert both.winding_second_moment(0) == pytest.approx(angle.winding_second_moment(), rel=1e-7)
    assert both.energy() == pytest.approx(angle.energy() + line.energy(), rel=1e-9)
    with pytest.raises(SpectrumError, match="no winding number"):
        both.winding_second_moment(1)


def test_two_free_angles_with_a_mixed_mass_have_no_lattice_artefact():
    """Z is a sum over integer momenta, exp(-beta k K^-1 k/2)."""
    mass = np.array([[1.0, 0.4], [0.4, 0.7]])
    solution = coupled_transfer(pair(lambda q: 0 * q[0], mass, periods=(TURN, TURN)), 0.5, 8)
    k = np.stack(np.meshgrid(np.arange(-30, 31), np.arange(-30, 31), indexing="ij"))
    energies = np.einsum("i...,ij,j...->...", k, np.linalg.inv(mass), k) / 2
    assert solution.log_partition == pytest.approx(np.log(np.sum(np.exp(-4.0 * energies))), abs=1e-11)


@pytest.mark.parametrize(
    ("problem", "words"),
    [
        (
            CoupledPaths(np.eye(3), lambda q: (q**2).sum(axis=0), (None,) * 3, (0.0,) * 3, (None,) * 3),
            "for one and two",
        ),
        (pair(lambda q: (q**2).sum(axis=0), drift=(y, None)), "magnetic"),
        (pair(lambda q: q[1] ** 2, MASSES[1], periods=(TURN, None)), "mixes a line with an angle"),
        (pair(lambda q: -1 / (1 + (q**2).sum(axis=0))), "does not confine"),
    ],
)
def test_what_is_not_solved_says_so(problem, words):
    with pytest.raises(SpectrumError, match=words):
        coupled_transfer(problem, 0.2, 40)


def test_too_high_a_temperature_says_so():
    with pytest.raises(SpectrumError, match="temperature is too high"):
        coupled_transfer(oscillators(MASSES[0]), 0.05, 6)
