"""Gaps of correlators whose energies are known: exact Gaussian paths on a ring, one operator and several.

Coverage is a property of a model average with a prior, not of a Gaussian estimator: it is stated for each correlator.
"""

import numpy as np
import pytest

from quarterturn.errors import EstimateError
from quarterturn.estimates.correlators import gap
from quarterturn.estimates.series import Samples
from quarterturn.estimates.windows import averaged_fits

FALSE_ALARM = 1e-3  # of each coverage test


def ring(simulated, rng, weights, chains=64, draws=64, block=4, rho=0.3, sites=32, a=0.25):
    """Samples of the correlator of sum_k c_k q_k, q_k a path of frequency w_k; times; lowest gap; period."""
    shape = (chains, draws, sites)
    q = sum(c * simulated.gaussian_path(rng, rho, shape, a, w) for w, c in weights.items())
    samples = simulated.binned(simulated.correlator(q, q), block)
    return samples, a * np.arange(sites // 2 + 1), simulated.lattice_gap(a, min(weights)), sites * a


def pulls_of(simulated, seed, count, weights, **settings):
    rng = np.random.default_rng(seed)
    found = []
    for _ in range(count):
        samples, t, exact, period = ring(simulated, rng, weights, **settings)
        result = gap(samples, np.arange(len(t)), t, period, exact=exact)
        assert result.estimate.state == "good", result.estimate.remark
        found.append(result.estimate.pull)
    return np.array(found)


CONTAMINATED = [
    pytest.param(300, {1.0: 1.0, 2.5: 0.7}, {"sites": 24}, id="two states"),
    pytest.param(150, {1.0: 1.0, 2.0: 0.5, 4.0: 0.5}, {"sites": 40}, id="three states"),
    pytest.param(
        150, {1.0: 1.0, 2.5: 0.5}, {"chains": 4, "draws": 2000, "block": 1, "rho": 0.967, "sites": 24}, id="tau = 30"
    ),
]


@pytest.mark.parametrize(("count", "weights", "settings"), CONTAMINATED)
def test_the_error_of_a_gap_covers_where_excited_states_matter(simulated, count, weights, settings):
    """One sigma holds 68 % inside the binomial limits (false alarm 1e-3), two sigma no fewer than theirs of 95 %."""
    pulls = np.abs(pulls_of(simulated, 70, count, weights, **settings))
    low, high = simulated.binomial_limits(count, 0.6827, FALSE_ALARM)
    assert low <= np.mean(pulls < 1) <= high
    assert np.mean(pulls < 2) >= simulated.binomial_limits(count, 0.9545, FALSE_ALARM)[0]


def test_the_error_of_a_gap_without_excited_states_is_cautious_but_not_idle(simulated):
    """That nothing else is there is not known: one sigma holds more than 68 %, and the error stays within four times
    that of the one fit a person who knew would make (all times, one state)."""
    rng = np.random.default_rng(71)
    pulls, ratios = [], []
    for _ in range(100):
        samples, t, exact, period = ring(simulated, rng, {1.0: 1.0})
        result = gap(samples, np.arange(len(t)), t, period, exact=exact)
        pulls.append(result.estimate.pull)
        ratios.append(result.estimate.error / next(f.error for f in result.fits if f.states == 1))
    assert np.mean(np.abs(pulls) < 1) >= simulated.binomial_limits(100, 0.6827, FALSE_ALARM)[0]
    assert abs(np.mean(pulls)) < 0.4  # unbiased: four standard errors of a hundred
    assert np.median(ratios) < 4


def two_operators(simulated, rng):
    """q_1 + 0.7 q_2 and q_1 - 0.7 q_2, whose lowest state neither creates alone: columns (2, 2, T)."""
    one, two = (simulated.gaussian_path(rng, 0.3, (64, 64, 32), 0.25, w) for w in (1.0, 2.5))
    operators = one + 0.7 * two, one - 0.7 * two
    curves = [simulated.correlator(f, g) for f in operators for g in operators]
    samples = simulated.binned(np.concatenate(curves, axis=2), 4)
    return samples, np.arange(4 * 17).reshape(2, 2, 17), 0.25 * np.arange(17)


def test_two_operators_isolate_the_lowest_state(simulated):
    """Coverage as above, and an error well below that of one of the operators alone."""
    rng = np.random.default_rng(72)
    exact, pulls, ratios = simulated.lattice_gap(0.25, 1.0), [], []
    for _ in range(60):
        samples, indices, t = two_operators(simulated, rng)
        together = gap(samples, indices, t, 8.0, exact=exact).estimate
        alone = gap(samples, indices[0, 0], t, 8.0).estimate
        pulls.append(together.pull)
        ratios.append(together.error / alone.error)
    assert np.mean(np.abs(pulls) < 1) >= simulated.binomial_limits(60, 0.6827, FALSE_ALARM)[0]
    assert abs(np.mean(pulls)) < 0.5
    assert np.median(ratios) < 0.8


def test_a_vacuum_expectation_value_is_subtracted_with_its_error(simulated):
    """q + 2 has the connected correlator of q: the same gap, while its plain correlator does not decay."""
    rng = np.random.default_rng(73)
    q = simulated.gaussian_path(rng, 0.3, (64, 64, 32), 0.25, 1.0)
    f = q + 2
    columns = [simulated.correlator(q, q), simulated.correlator(f, f), f.mean(axis=2, keepdims=True)]
    samples, t = simulated.binned(np.concatenate(columns, axis=2), 4), 0.25 * np.arange(17)
    plain = gap(samples, np.arange(17), t, 8.0)
    shifted = gap(samples, np.arange(17, 34), t, 8.0, subtract=34)
    assert shifted.estimate.value == pytest.approx(plain.estimate.value, abs=0.5 * plain.estimate.error)
    assert shifted.estimate.error == pytest.approx(plain.estimate.error, rel=0.5)
    assert gap(samples, np.arange(17, 34), t, 8.0).estimate.value < 0.5 * plain.estimate.value


def test_every_fit_is_kept_with_the_published_weight(simulated):  # Jay and Neil 2021
    samples, t, _, period = ring(simulated, np.random.default_rng(74), {1.0: 1.0, 2.5: 0.3})
    result = gap(samples, np.arange(len(t)), t, period)
    assert sum(f.weight for f in result.fits) == pytest.approx(1)
    assert {f.states for f in result.fits} == {1, 2, 3}
    assert all(f.weight == 0 for f in result.fits if f.remark)
    one, other = sorted((f for f in result.fits if f.states == 1 and not f.remark), key=lambda f: -f.weight)[:2]
    cut = one.points - other.points
    assert one.weight / other.weight == pytest.approx(np.exp(-(one.chi2 - other.chi2 - 2 * cut) / 2), rel=1e-6)
    average = sum(f.weight * f.energies[0] for f in result.fits)
    assert result.estimate.value == pytest.approx(average)
    assert result.estimate.error == pytest.approx(np.hypot(result.statistical, result.systematic))


def test_sharp_data_of_three_states_give_the_energy_back():
    t, period = np.arange(1.0, 17.0), 40.0
    energies, amplitudes = (0.3, 0.6, 1.1), (1.0, 0.3, 0.2)
    value = sum(a * (np.exp(-e * t) + np.exp(-e * (period - t))) for e, a in zip(energies, amplitudes, strict=True))
    average = averaged_fits(t, value, np.diag((1e-7 * value) ** 2), 10**6, period)
    assert average.energy == pytest.approx(0.3, abs=1e-5)
    best = max(average.fits, key=lambda f: f.weight)
    assert best.states == 3 and best.energies == pytest.approx(energies, rel=1e-2)


def test_a_correlator_that_is_noise_is_withheld_with_the_reason():
    rng = np.random.default_rng(75)
    values = rng.standard_normal((8, 100, 10))
    values[..., :3] += np.array([5.0, 2.0, 1.0])
    result = gap(Samples(values, 1, values.var(axis=(0, 1))), np.arange(10), np.arange(10.0))
    assert result.estimate.state == "withheld" and str(result.estimate) == "withheld"
    assert "too little signal" in result.estimate.remark
    assert result.fits == ()


def test_a_correlator_that_is_no_sum_of_exponentials_says_so(simulated):
    rng = np.random.default_rng(76)
    t = np.arange(12.0)
    shape = np.exp(-0.3 * t) * (1 + 0.1 * (-1) ** t)
    draws = shape * (1 + 0.05 * rng.standard_normal((16, 128, 12)))
    result = gap(simulated.binned(draws, 1), np.arange(12), t)
    assert "poor fit" in result.estimate.remark


def test_a_gap_below_its_error_says_so(simulated):
    """A flat correlator with noise of its own at each time."""
    rng = np.random.default_rng(77)
    samples = simulated.binned(1 + 0.5 * rng.standard_normal((16, 128, 12)), 1)
    assert "compatible with zero" in gap(samples, np.arange(12), np.arange(12.0), 40.0).estimate.remark


def test_a_gap_much_smaller_than_the_extent_of_time_is_found(simulated):
    """Frequency 0.02 on a ring of extent 8, within 4 sigma: the cosh is nearly flat, but its shape is sharp."""
    samples, t, exact, period = ring(simulated, np.random.default_rng(77), {0.02: 1.0})
    assert abs(gap(samples, np.arange(len(t)), t, period, exact=exact).estimate.pull) < 4


@pytest.mark.parametrize(
    ("indices", "t", "subtract", "words"),
    [
        (np.arange(5), np.arange(4.0), None, "have shape"),
        (np.zeros((2, 3, 4), dtype=int), np.arange(4.0), None, "have shape"),
        (np.arange(4), np.array([0.0, 2.0, 1.0, 3.0]), None, "have to ascend"),
        (np.arange(4), np.arange(4.0), np.array([0, 1]), "expectation values"),
    ],
)
def test_what_does_not_fit_together_is_refused(simulated, indices, t, subtract, words):
    samples = simulated.binned(np.random.default_rng(78).standard_normal((8, 100, 5)), 1)
    with pytest.raises(EstimateError, match=words):
        gap(samples, indices, t, subtract=subtract)


def test_operators_that_are_the_same_are_withheld_with_the_reason(simulated):
    samples, t, _, period = ring(simulated, np.random.default_rng(79), {1.0: 1.0})
    same = np.broadcast_to(np.arange(len(t)), (2, 2, len(t)))
    result = gap(samples, same, t, period)
    assert result.estimate.state == "withheld" and "can't be told apart" in result.estimate.remark


def test_a_fine_mesh_is_thinned_and_still_covers(simulated):
    """Eighty times, of which sixteen are fitted: coverage as above, to the cautious side."""
    pulls = np.abs(pulls_of(simulated, 80, 40, {1.0: 1.0, 3.0: 0.3}, sites=160, a=0.1))
    assert np.mean(pulls < 1) >= simulated.binomial_limits(40, 0.6827, FALSE_ALARM)[0]
    assert np.mean(pulls < 2) >= simulated.binomial_limits(40, 0.9545, FALSE_ALARM)[0]
