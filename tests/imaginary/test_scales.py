"""Nothing depends on units, on where the potential lies, or on luck: scaling laws, shifts, the virial theorem."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.transfer import transfer

from .problems import anharmonic, double_well, even, line

N = np.arange(6)
deterministic = settings(derandomize=True, deadline=None, max_examples=25)


@pytest.mark.parametrize("omega", [1e-6, 1e-2, 1e3, 1e6])
@pytest.mark.parametrize("mass", [1e-6, 1.0, 1e6])
def test_oscillator_over_twelve_orders_of_mass_and_frequency(omega, mass):
    spectrum = levels(even(lambda q: mass * omega**2 * q**2 / 2, mass), 6)
    assert spectrum.energies == pytest.approx(omega * (N + 0.5), rel=1e-13)
    assert spectrum.expectation(lambda q: q**2) == pytest.approx(1 / (2 * mass * omega), rel=1e-12)


@pytest.mark.parametrize(("centre", "omega"), [(100.0, 1.0), (-1e4, 1.0), (1e6, 1.0), (100.0, 1e4), (-3.7, 1e-3)])
def test_wells_far_from_the_origin(centre, omega):
    spectrum = levels(line(lambda q: omega**2 * (q - centre) ** 2 / 2), 6)
    assert np.all(np.abs(spectrum.energies - omega * (N + 0.5)) <= 10 * spectrum.errors)
    assert spectrum.errors.max() < 1e-9 * omega * max(1.0, abs(centre) * np.sqrt(omega) / 1e3)
    assert spectrum.expectation(lambda q: q) == pytest.approx(centre, rel=1e-12)


def test_constant_in_the_potential_is_a_constant_in_the_energy_and_its_rounding_is_admitted():
    spectrum = levels(even(lambda q: q**2 / 2 + 1e9), 3)
    assert np.all(np.abs(spectrum.energies - 1e9 - N[:3] - 0.5) <= 10 * spectrum.errors)
    assert 1e-8 < spectrum.errors.max() < 1e-5


@deterministic
@given(st.floats(-50, 50), st.floats(-2, 2), st.floats(0.05, 5))
def test_shifting_the_path_changes_no_level(shift, cubic, quartic):
    def well(q):
        return q**2 / 2 + cubic * q**3 / 3 + (quartic + cubic**2) * q**4

    here, there = levels(line(well), 5), levels(line(lambda q: well(q - shift)), 5)
    assert np.all(np.abs(here.energies - there.energies) <= 3 * (here.errors + there.errors))


@deterministic
@given(st.floats(-3, 3), st.floats(-3, 3))
def test_quartic_levels_scale_as_the_cube_root(log_mass, log_lam):  # Symanzik scaling
    mass, lam = 10**log_mass, 10**log_lam
    unit, scaled = levels(even(lambda q: q**4), 6), levels(even(lambda q: lam * q**4, mass), 6)
    assert scaled.energies == pytest.approx(unit.energies * (lam / mass**2) ** (1 / 3), rel=3e-13)


@deterministic
@given(st.floats(0.2, 3), st.floats(-3, 3), st.floats(0.1, 2))
def test_virial_theorem_in_each_level(mass, square, quartic):
    spectrum = levels(even(lambda q: square * q**2 + quartic * q**4, mass), 4)
    for n in range(4):
        doubled = spectrum.matrix_element(lambda q: 2 * (square * q**2 + quartic * q**4), n, n)
        slope = spectrum.matrix_element(lambda q: 2 * square * q**2 + 4 * quartic * q**4, n, n)
        assert spectrum.energies[n] == pytest.approx((doubled + slope) / 2, abs=1e-10 * (1 + abs(doubled)))


@deterministic
@given(st.floats(0.02, 1.0), st.integers(2, 60), st.floats(0.3, 3), st.floats(-2, 2))
def test_lattice_virial_theorem_at_any_spacing(spacing, sites, mass, square):
    """-d ln Z / d beta at fixed N equals <V + q V'/2> on the lattice itself: rescale every q with the spacing."""
    solution = transfer(even(lambda q: square * q**2 + q**4, mass), spacing, sites)
    virial = solution.expectation(lambda q: 2 * square * q**2 + 3 * q**4)
    assert solution.energy() == pytest.approx(virial, rel=1e-10, abs=1e-10)


@deterministic
@given(st.floats(-2, 2), st.integers(1, 50))
def test_lattice_units_drop_out(log_scale, sites):
    """q -> s q, m -> m/s^2, and a -> r a, m -> m r, V -> V/r leave the weight alone, but for the measure."""
    s, r = 10**log_scale, 3.0
    one = transfer(anharmonic(1.0), 0.3, sites)
    other = transfer(even(lambda q: ((q / s) ** 2 / 2 + (q / s) ** 4) / r, r / s**2), 0.3 * r, sites)
    assert other.log_partition == pytest.approx(one.log_partition, abs=1e-11)
    assert other.expectation(lambda q: q**2) == pytest.approx(s**2 * one.expectation(lambda q: q**2), rel=1e-11)


def test_same_question_same_bits():
    first, second = levels(double_well(1, 2), 6), levels(double_well(1, 2), 6)
    assert np.array_equal(first.energies, second.energies)
    assert np.array_equal(first.states, second.states)
    assert np.array_equal(transfer(double_well(1, 2), 0.2, 20).energies, transfer(double_well(1, 2), 0.2, 20).energies)
