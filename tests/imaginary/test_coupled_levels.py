"""Levels of two and three coupled degrees of freedom against published values, closed forms, and other bases."""

from collections.abc import Callable

import numpy as np
import pytest

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.coupled import CoupledPaths, Field
from quarterturn.imaginary.coupled_levels import coupled_levels
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.spectrum import Spectrum

TURN = 2 * np.pi
EPS = np.finfo(float).eps


def lines(size: int, potential: Field, mass: np.ndarray | None = None, drift: tuple | None = None) -> CoupledPaths:
    nothing = (None,) * size
    return CoupledPaths(np.eye(size) if mass is None else mass, potential, nothing, (0.0,) * size, drift or nothing)


def polynomial(c: dict[str, float]) -> Field:
    powers = {tuple(int(n) for n in key.strip("()").split(",")): value for key, value in c.items()}
    return lambda q: sum(value * q[0] ** i * q[1] ** j for (i, j), value in powers.items())


def assert_agrees(spectrum: Spectrum, expected: np.ndarray, known: float = 4 * EPS) -> None:
    """To 1e-8 at least, and the estimated error is no more than ten times too small."""
    off = np.abs(spectrum.energies - expected)
    size = np.maximum(1.0, np.abs(expected))
    assert np.all(off <= 1e-8 * size)
    assert np.all(off <= 10 * spectrum.errors + known * size)


def ladder(frequencies: np.ndarray, count: int) -> np.ndarray:
    total = np.zeros(1)
    for omega in frequencies:
        total = np.add.outer(total, omega * (np.arange(count) + 0.5)).ravel()
    return np.sort(total)[:count]


def normal_frequencies(mass: np.ndarray, stiffness: np.ndarray) -> np.ndarray:
    return np.sqrt(np.linalg.eigvals(np.linalg.solve(mass, stiffness)).real)


# --- harmonic ---------------------------------------------------------------------------------------------------
def test_two_coupled_oscillators_have_their_normal_modes(outside):
    entry = outside("coupled-ho2-1-1.5-0.4")
    w1, w2, k = (float(entry["parameters"][name]) for name in ("w1", "w2", "k"))
    spectrum = coupled_levels(lines(2, lambda q: (w1 * q[0]) ** 2 / 2 + (w2 * q[1]) ** 2 / 2 + k * q[0] * q[1]), 20)
    assert_agrees(spectrum, ladder(np.array([float(f) for f in entry["value"]["freq"]]), 20))
    for f, name in ((lambda q: q[0] ** 2, "x2"), (lambda q: q[1] ** 2, "y2"), (lambda q: q[0] * q[1], "xy")):
        assert spectrum.expectation(f) == pytest.approx(float(entry["value"][name]), rel=1e-11)


@pytest.mark.parametrize("size", [2, 3])
def test_any_mass_matrix_and_stiffness(size):
    """Frequencies are the roots of det(stiffness - omega^2 mass) = 0; fixed seed, nothing to fail by chance."""
    rng = np.random.default_rng(3)
    for _ in range(3):
        mass, stiffness = (a @ a.T + 0.2 * np.eye(size) for a in rng.normal(size=(2, size, size)))
        spectrum = coupled_levels(
            lines(size, lambda q, s=stiffness: np.einsum("i...,ij,j...->...", q, s, q) / 2, mass), 12
        )
        assert_agrees(spectrum, ladder(normal_frequencies(mass, stiffness), 12))


@pytest.mark.parametrize("scale", [1e-3, 1e3])
def test_scales_do_not_matter(scale):
    spectrum = coupled_levels(lines(2, lambda q: (q[0] ** 2 + 2 * q[1] ** 2 + q[0] * q[1]) / scale**4 / 2), 8)
    frequencies = normal_frequencies(np.eye(2), np.array([[1, 0.5], [0.5, 2]]))
    assert spectrum.energies * scale**2 == pytest.approx(ladder(frequencies, 8), rel=1e-10)


# --- anharmonic -------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("name", ["two-dof-x2y2", "two-dof-henon-quartic"])
def test_two_anharmonic_paths_with_all_members_of_degenerate_pairs(name, outside):
    entry = outside(name)
    assert_agrees(coupled_levels(lines(2, polynomial(entry["parameters"])), 6), np.array(entry["value"]), known=2e-11)


def test_three_coupled_quartic_paths(outside):
    entry = outside("three-dof-ring-lam0.5-k0.5")

    def potential(q):
        ahead = np.roll(q, -1, axis=0)
        return (q**2 / 2 + 0.5 * q**4 + 0.25 * (ahead - q) ** 2).sum(axis=0)

    assert_agrees(coupled_levels(lines(3, potential), 5), np.array(entry["value"]), known=1e-10)


def test_paths_that_do_not_couple_add_their_levels():
    """Without a symmetry, and with a tunnelling splitting of 1e-5."""
    one = levels(OnePath(1.0, lambda q: (q**2 - 4) ** 2 / 4), 8).energies
    two = levels(OnePath(2.0, lambda q: q**2 / 2 + 0.2 * q**3 + 0.1 * q**4), 8).energies
    problem = lines(
        2, lambda q: (q[0] ** 2 - 4) ** 2 / 4 + q[1] ** 2 / 2 + 0.2 * q[1] ** 3 + 0.1 * q[1] ** 4, np.diag([1.0, 2.0])
    )
    assert_agrees(coupled_levels(problem, 8), np.sort(np.add.outer(one, two).ravel())[:8])


def test_a_rotated_quartic_has_the_levels_of_its_own_axes():
    """H is the sum of two quartic oscillators at 30 degrees to the paths."""
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    one = levels(OnePath(1.0, lambda q: q**2 / 2 + q**4, even=True), 10).energies
    two = levels(OnePath(1.0, lambda q: q**2 + q**4, even=True), 10).energies

    def potential(q):
        x, y = c * q[0] + s * q[1], c * q[1] - s * q[0]
        return x**2 / 2 + x**4 + y**2 + y**4

    assert_agrees(coupled_levels(lines(2, potential), 10), np.sort(np.add.outer(one, two).ravel())[:10])


# --- magnetic ---------------------------------------------------------------------------------------------------
GAUGES: dict[str, tuple[Callable, Callable]] = {
    "symmetric": (lambda q: -q[1] / 2, lambda q: q[0] / 2),
    "between": (lambda q: -0.55 * q[1], lambda q: 0.45 * q[0]),
}


@pytest.mark.parametrize("gauge", GAUGES)
@pytest.mark.parametrize("field", [0.5, 3.0])
def test_charge_in_a_field_and_a_harmonic_well(field, gauge):
    """(2n + |l| + 1) sqrt(omega^2 + B^2/4) - l B/2: Fock, Z. Phys. 47 (1928) 446; Darwin, Proc. Camb. 27 (1930) 86."""
    spectrum = coupled_levels(
        lines(2, lambda q: (q**2).sum(axis=0) / 2, drift=tuple(lambda q, a=a: field * a(q) for a in GAUGES[gauge])), 10
    )
    omega = np.hypot(1, field / 2)
    expected = [(2 * n + abs(m) + 1) * omega - m * field / 2 for n in range(15) for m in range(-25, 40)]
    assert_agrees(spectrum, np.sort(expected)[:10])


# --- angles -----------------------------------------------------------------------------------------------------
def rotors(flux: float, mass: np.ndarray, potential: Field) -> CoupledPaths:
    return CoupledPaths(mass, potential, (TURN, TURN), (flux, 0.0), (None, None))


def in_plane_waves(flux: float, mass: np.ndarray, strength: float, size: int = 15) -> np.ndarray:
    """H = (p - A) K^-1 (p - A)/2 - strength cos(theta - phi) in integer momenta."""
    k = np.arange(-size, size + 1)
    first, second = (a.ravel() for a in np.meshgrid(k - flux, k + 0.0, indexing="ij"))
    inverse = np.linalg.inv(mass)
    matrix = np.diag((inverse[0, 0] * first**2 + 2 * inverse[0, 1] * first * second + inverse[1, 1] * second**2) / 2)
    hop = np.kron(np.diag(np.ones(2 * size), 1), np.diag(np.ones(2 * size), -1))
    return np.linalg.eigvalsh(matrix - strength / 2 * (hop + hop.T))


def test_two_angles_with_a_mixed_mass_and_a_flux():
    mass = np.array([[1.0, 0.2], [0.2, 0.8]])
    spectrum = coupled_levels(rotors(0.3, mass, lambda q: -0.8 * np.cos(q[0] - q[1])), 8)
    assert_agrees(spectrum, in_plane_waves(0.3, mass, 0.8)[:8], known=1e-13)


@pytest.mark.parametrize("mixed", [0.0, 0.3])
def test_an_angle_and_a_line_agree_with_plane_waves_times_oscillator_states(mixed):
    mass = np.array([[1.0, mixed], [mixed, 1.0]])
    problem = CoupledPaths(
        mass, lambda q: q[1] ** 2 / 2 + 0.7 * q[1] * np.cos(q[0]), (TURN, None), (0.0, 0.0), (None, None)
    )
    n, k, inverse = 40, np.arange(-14, 15), np.linalg.inv(mass)
    root = np.sqrt((np.arange(n - 1) + 1) / 2)
    x, p = np.diag(root, 1) + np.diag(root, -1), 1j * (np.diag(root, -1) - np.diag(root, 1))
    one, turn = np.eye(n), np.eye(len(k))
    squares = np.diag(np.arange(n) + 0.5)  # p^2/2 + x^2/2
    p2 = (
        2 * squares
        - np.diag(np.arange(n) + 0.5)
        - (np.diag(root[:-1] * root[1:], 2) + np.diag(root[:-1] * root[1:], -2))
    )
    hop = (np.diag(np.ones(len(k) - 1), 1) + np.diag(np.ones(len(k) - 1), -1)) / 2
    matrix = (
        np.kron(np.diag(k**2) * inverse[0, 0] / 2, one) + np.kron(turn, squares)
        + np.kron(turn, p2) * (inverse[1, 1] - 1) / 2
        + inverse[0, 1] * np.kron(np.diag(k), p) + 0.7 * np.kron(hop, x)
    )  # fmt: skip
    assert_agrees(coupled_levels(problem, 8), np.linalg.eigvalsh(matrix)[:8], known=1e-12)


# --- what follows -----------------------------------------------------------------------------------------------
def test_correlators_and_thermal_sums_of_coupled_oscillators():
    """Each normal mode has <Q(t) Q(0)> = cosh(omega (beta/2 - t)) / (2 omega sinh(beta omega/2))."""
    stiffness = np.array([[1, 0.4], [0.4, 2.25]])
    spectrum = coupled_levels(lines(2, lambda q: np.einsum("i...,ij,j...->...", q, stiffness, q) / 2), 6)
    squares, modes = np.linalg.eigh(stiffness)
    omega, t, beta = np.sqrt(squares), np.array([0.0, 0.5, 2.0]), 3.0
    vacuum = modes[0] * modes[1] @ (np.exp(-omega[:, None] * t) / (2 * omega[:, None]))
    assert spectrum.correlator(lambda q: q[0], lambda q: q[1], t) == pytest.approx(vacuum, rel=1e-10)
    warm = (
        modes[0]
        * modes[1]
        @ (np.cosh(omega[:, None] * (beta / 2 - t)) / (2 * omega * np.sinh(beta * omega / 2))[:, None])
    )
    thermal = spectrum.at(beta)
    assert thermal.correlator(lambda q: q[0], lambda q: q[1], t) == pytest.approx(warm, rel=1e-9)
    assert thermal.partition() == pytest.approx(np.prod(1 / (2 * np.sinh(beta * omega / 2))), rel=1e-9)
    assert thermal.energy() == pytest.approx(np.sum(omega / 2 / np.tanh(beta * omega / 2)), rel=1e-9)


def test_an_average_over_a_kink_is_refused_and_one_over_a_bump_is_right():
    """The density of two oscillators is exp(-r^2)/pi, so that <exp(-r^2)> = 1/2."""
    spectrum = coupled_levels(lines(2, lambda q: (q**2).sum(axis=0) / 2), 3)
    assert spectrum.expectation(lambda q: np.exp(-(q**2).sum(axis=0))) == pytest.approx(0.5, rel=1e-11)
    with pytest.raises(SpectrumError, match="kink"):
        spectrum.expectation(lambda q: np.abs(q[0]))


# --- refusals ---------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("potential", "words"),
    [
        (lambda q: q[0] ** 2 - q[1] ** 4, "falls without limit"),
        (lambda q: -np.exp(-(q**2).sum(axis=0)), "does not confine"),
        (lambda q: -1 / (q**2).sum(axis=0), "minus infinity at the origin"),
        (lambda q: q[0] ** 2 / 2 + 0 * q[1], "does not confine"),
    ],
)
def test_what_has_no_levels_says_so(potential, words):
    with pytest.raises(SpectrumError, match=words):
        coupled_levels(lines(2, potential), 4)


def test_a_level_count_beyond_the_basis_says_so():
    with pytest.raises(SpectrumError, match="more than 2000 products"):
        coupled_levels(lines(2, lambda q: (q**2).sum(axis=0) / 2), 1500)


def test_a_step_is_reported_with_the_error_that_it_leaves():
    """A box of depth 30 in both paths; the levels of one path, solved with its kinks integrated, add up."""
    one = levels(OnePath(1.0, lambda q: 30.0 * np.tanh(6 * (np.abs(q) - 1)), even=True), 2).energies
    spectrum = coupled_levels(lines(2, lambda q: (30.0 * np.tanh(6 * (np.abs(q) - 1)) + q**2 * 0).sum(axis=0)), 1)
    assert abs(spectrum.energies[0] - 2 * one[0]) <= 10 * spectrum.errors[0]
