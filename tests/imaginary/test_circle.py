"""The circle: pendulum (Mathieu functions), Bloch momentum, theta term, flux through a ring, winding numbers."""

import numpy as np
import pytest
from scipy.special import mathieu_a, mathieu_b

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.transfer import transfer

from .problems import TURN, oscillator, pendulum, rotor


@pytest.mark.parametrize("k", [0.5, 1, 5])
def test_pendulum_agrees_with_multiprecision_values(k, outside):
    expected = np.array([float(e) for e in outside(f"pendulum-K{k}")["value"]])
    spectrum = levels(pendulum(k), 6)
    off = np.abs(spectrum.energies - expected)
    assert np.all(off < 1e-12)
    assert np.all(off <= 10 * spectrum.errors)


@pytest.mark.parametrize("k", [0.1, 1.0, 7.3])
def test_pendulum_agrees_with_mathieu_characteristic_values(k):
    """E = a_2n/8 and b_2n/8 at q = 4K (DLMF 28.2): scipy.special, good to some 1e-10."""
    even, odd = ([f(2 * n, 4 * k) / 8 for n in range(start, 6)] for f, start in ((mathieu_a, 0), (mathieu_b, 1)))
    assert levels(pendulum(k), 8).energies == pytest.approx(np.sort(even + odd)[:8], abs=1e-9)


def test_bloch_momentum_is_a_flux_of_the_other_sign(outside):
    expected = outside("pendulum-bloch-K1-q0.25")["value"]  # given to 13 digits
    assert levels(pendulum(1, flux=-0.25), 4).energies == pytest.approx(expected, abs=2e-12)
    assert levels(pendulum(1, flux=0.25), 4).energies == pytest.approx(expected, abs=2e-12)  # time reversal


@pytest.mark.parametrize("inertia", [1, 0.25])
@pytest.mark.parametrize(("word", "theta"), [("0", 0.0), ("pi_2", np.pi / 2), ("pi", np.pi)])
def test_rotor_with_a_theta_term(inertia, word, theta, outside):
    expected = np.array([float(e) for e in outside(f"rotor-I{inertia}-theta{word}")["value"]])
    spectrum = levels(rotor(inertia, theta / TURN), 5)
    assert np.all(np.abs(spectrum.energies - expected) <= 10 * spectrum.errors)
    assert spectrum.errors.max() < 1e-12


@pytest.mark.parametrize("turns", [1, -3, 40])
def test_whole_turns_of_theta_change_nothing(turns):
    here, there = levels(pendulum(1, flux=0.3), 6), levels(pendulum(1, flux=0.3 + turns), 6)
    assert there.energies == pytest.approx(here.energies, abs=1e-12)


def test_aharonov_bohm_ring(outside):
    expected = outside("ab-ring-phi0.3")["value"]
    assert levels(rotor(1, 0.3), 4).energies == pytest.approx([float(e) for e in expected["E"]], abs=1e-13)
    h = 1e-4
    low, high = (levels(rotor(1, 0.3 + s * h), 1).energies[0] for s in (-1, 1))
    assert -(high - low) / (2 * h) == pytest.approx(-float(expected["I0"]), abs=1e-9)  # d E_0/d f = f
    thermal = levels(rotor(1, 0.3), 4).at(1.0)
    assert thermal.partition() == pytest.approx(float(expected["Z1"]), rel=1e-13)
    assert thermal.energy() == pytest.approx(float(expected["E1"]), rel=1e-13)


@pytest.mark.parametrize("sites", [1, 2, 7, 100])
def test_free_rotor_is_exact_at_any_spacing(sites, outside):
    expected = outside("ab-ring-phi0.3")["value"]
    solution = transfer(rotor(1, 0.3), 1 / sites, sites)
    assert solution.log_partition == pytest.approx(np.log(float(expected["Z1"])), abs=1e-13)
    assert solution.energy() == pytest.approx(float(expected["E1"]), rel=1e-12)


@pytest.mark.parametrize("inertia", [1, 0.25])
@pytest.mark.parametrize("beta", [2, 20])
@pytest.mark.parametrize("sites", [1, 10, 160])
def test_topological_susceptibility_of_the_rotor(inertia, beta, sites, outside):
    expected = float(outside(f"rotor-chit-I{inertia}-b{beta}")["value"]["chi"])
    moment = transfer(rotor(inertia), beta / sites, sites).winding_second_moment()
    assert moment / beta == pytest.approx(expected, abs=1e-13)


def winding_sums(k: float, spacing: float, inertia: float, flux: float) -> tuple[complex, complex, complex]:
    """Z, sum Q^2 Z_Q and sum cos(q_0) Z_Q of two sites from the lifted links themselves."""
    points = 160
    q = np.arange(points) * TURN / points
    apart = q[:, None] - q[None, :]
    weight = np.exp(spacing * k * (np.cos(q[:, None]) + np.cos(q[None, :]))) * (TURN / points) ** 2

    def link(shift: int) -> np.ndarray:
        step = apart + TURN * shift
        return np.sqrt(inertia / (TURN * spacing)) * np.exp(-inertia * step**2 / (2 * spacing))

    total = np.zeros(3, dtype=complex)
    for there in range(-8, 9):
        for back in range(-8, 9):
            winding = there + back
            both = np.sum(weight * link(there) * link(back).T * np.exp(1j * flux * TURN * winding))
            cosine = np.sum(
                np.cos(q)[:, None] * weight * link(there) * link(back).T * np.exp(1j * flux * TURN * winding)
            )
            total += np.array([both, winding**2 * both, cosine])
    return tuple(total)


@pytest.mark.parametrize("flux", [0.0, 0.2])
def test_two_sites_agree_with_the_sum_over_windings_of_each_link(flux):
    partition, squares, cosine = winding_sums(0.8, 3.0, 0.4, flux)
    solution = transfer(pendulum(0.8, flux, 0.4), 3.0, 2)
    assert solution.log_partition == pytest.approx(np.log(partition.real), abs=1e-12)
    assert solution.winding_second_moment() == pytest.approx((squares / partition).real, rel=1e-11)
    assert solution.expectation(np.cos) == pytest.approx((cosine / partition).real, rel=1e-11)
    without = winding_sums(0.8, 3.0, 0.4, 0.0)[0]
    assert solution.average_phase() == pytest.approx((partition / without).real, rel=1e-12)


def test_second_derivative_in_theta_is_the_winding_moment():
    h = 0.02
    logs = [transfer(pendulum(1, k * h / TURN), 0.25, 24).log_partition for k in (-2, -1, 0, 1, 2)]
    curvature = (-logs[0] + 16 * logs[1] - 30 * logs[2] + 16 * logs[3] - logs[4]) / (12 * h**2)
    assert transfer(pendulum(1), 0.25, 24).winding_second_moment() == pytest.approx(-curvature, rel=1e-6)


def test_average_phase_falls_with_the_free_energy_difference():
    """Z(theta)/Z(0) -> exp(-beta (E_0(theta) - E_0(0))) at low temperature."""
    solution = transfer(pendulum(1, flux=0.5), 0.1, 400)
    low = transfer(pendulum(1), 0.1, 400)
    ratio = np.exp(-40 * (solution.energies[0] - low.energies[0]))
    assert solution.average_phase() == pytest.approx(
        ratio * (1 + np.exp(-40 * np.diff(solution.energies[:2])[0])), rel=1e-9
    )


def test_flux_makes_correlators_complex_and_keeps_averages_real():
    solution = transfer(pendulum(1, flux=0.3), 0.25, 24)
    n = np.arange(24)
    curve = solution.correlator(np.cos, np.sin, n)
    assert np.max(np.abs(curve.imag)) > 1e-4
    assert curve[1:] == pytest.approx(curve[:0:-1].conj(), abs=1e-14)  # C(N - n) = C(n)*
    assert isinstance(solution.expectation(np.cos), float)
    same = levels(pendulum(1, flux=0.3), 6).correlator(np.cos, np.sin, np.array([-0.5, 0.5]))
    assert same[0] == pytest.approx(same[1].conjugate(), abs=1e-15)


def test_potential_without_symmetry_and_with_flux():
    """Real and complex form of the same Hamiltonian: a turn of the angle."""

    def potential(q, turn=0.0):
        return -np.cos(q - turn) + 0.2 * np.sin(2 * (q - turn))

    here = levels(OnePath(1, potential, TURN, 0.3), 6)
    there = levels(OnePath(1, lambda q: potential(q, 1.0), TURN, 0.3), 6)
    assert here.energies == pytest.approx(there.energies, abs=1e-12)
    assert np.iscomplexobj(here.states)
    assert np.sum(np.abs(here.states) ** 2 * here.weights[:, None], axis=0) == pytest.approx(1, abs=1e-13)


def test_no_winding_on_the_line():
    with pytest.raises(SpectrumError, match="no winding number"):
        transfer(oscillator(), 0.1, 10).winding_second_moment()
    assert transfer(oscillator(), 0.1, 10).average_phase() == 1.0
