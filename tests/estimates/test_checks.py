"""The warnings: silent on faultless chains at the stated rate, and spoken where a fault was built in."""

import numpy as np
import pytest

from quarterturn.estimates.checks import cross_check, thermalisation, warnings
from quarterturn.estimates.estimate import Estimate, withheld
from quarterturn.estimates.gamma import derived, estimate, gamma_method


@pytest.mark.parametrize(("chains", "draws", "block", "rho"), [(4, 500, 1, 0.5), (64, 64, 4, 0.5), (4, 2000, 4, 0.9)])
def test_false_alarms_are_as_rare_as_stated(simulated, chains, draws, block, rho):
    """Each test at a level of 1 %: at most as often, one-sided binomial limit at 1e-3 (a failure in 3000 runs)."""
    rng = np.random.default_rng(60)
    count, level = 800, 0.01
    alarms = np.zeros(3)
    for _ in range(count):
        samples = simulated.binned(simulated.autoregressive(rng, rho, (chains, draws, 1)), block)
        one = np.ones(1)
        result = gamma_method(samples, one)
        trend, check = thermalisation(samples, one), cross_check(samples, one, result)
        alarms += (
            result.replica_q is not None and result.replica_q < level,
            trend is not None and trend.probability < level,
            check is not None and check.probability < level,
        )
    assert (alarms / count).max() <= simulated.binomial_limits(count, level, 2e-3)[1]


def test_faultless_chains_carry_no_warning(simulated):
    """Fails in at most 3 of 1000 reseedings."""
    rng = np.random.default_rng(61)
    samples = simulated.binned(simulated.autoregressive(rng, 0.5, (16, 512, 3)) + 2, 2)
    numbers = [estimate(samples, 0), estimate(samples, 1), derived(samples, lambda m: m[0] / m[2])]
    assert warnings(samples, numbers, ["a", "b", "a/c"]) == ()


def test_a_warm_up_that_was_too_short_is_named(simulated):
    rng = np.random.default_rng(62)
    x = simulated.autoregressive(rng, 0.5, (16, 512, 2))
    x[:, :, 1] += 2 * np.exp(-np.arange(512) / 60)
    samples = simulated.binned(x, 2)
    found = warnings(samples, [estimate(samples, 0), estimate(samples, 1)], ["<q>", "<q^2>"])
    (words,) = [w for w in found if "warm-up was too short" in w]
    assert "<q^2>" in words and "<q>" not in words


def test_a_drift_shows_in_a_derived_number_too(simulated):
    rng = np.random.default_rng(63)
    x = simulated.autoregressive(rng, 0.5, (16, 512, 2)) + 3
    x[:, :, 1] += 2 * np.exp(-np.arange(512) / 60)
    samples = simulated.binned(x, 2)
    found = warnings(samples, [derived(samples, lambda m: m[1] / m[0])], ["ratio"])
    assert any("warm-up was too short" in w and "ratio" in w for w in found)


def test_replicas_in_different_wells_disagree(simulated):
    rng = np.random.default_rng(64)
    x = 0.3 * simulated.autoregressive(rng, 0.2, (4, 500, 1)) + np.array([1, 1, -1, 1])[:, None, None]
    samples = simulated.binned(x, 1)
    found = warnings(samples, [estimate(samples, 0)], ["<q>"])
    assert found and all("<q>" in w for w in found)
    assert any("replicas disagree" in w or "not resolved" in w for w in found)


def test_a_slow_mode_under_the_noise_is_found_by_long_blocks(simulated):
    """A tenth of the variance has tau = 200: the window closes on the fast part, the jackknife does not."""
    rng = np.random.default_rng(65)
    x = simulated.autoregressive(rng, 0.0, (4, 64000, 1)) + 0.2 * simulated.autoregressive(rng, 0.995, (4, 64000, 1))
    samples = simulated.binned(x, 1)
    gradient = np.ones(1)
    short = gamma_method(samples, gradient, window=3)
    check = cross_check(samples, gradient, short)
    assert check.error > 1.5 * short.error and check.probability < 1e-4


def test_few_effective_samples_and_unresolved_errors_are_named(simulated):
    rng = np.random.default_rng(66)
    slow = simulated.binned(simulated.autoregressive(rng, 0.9, (8, 150, 1)), 1)
    (words,) = [w for w in warnings(slow, [estimate(slow, 0)], ["<q>"]) if "under 100" in w]
    assert "<q>" in words
    stuck = simulated.binned(simulated.autoregressive(rng, 0.999, (4, 100, 1)), 1)
    (words,) = warnings(stuck, [estimate(stuck, 0)], ["<q>"])
    assert words.startswith("the autocorrelation time is not resolved") and "<q>" in words


def test_numbers_that_are_not_from_these_samples_are_passed_over(simulated):
    samples = simulated.binned(np.random.default_rng(67).standard_normal((4, 100, 1)), 1)
    assert warnings(samples, [Estimate(1.0, 0.1), withheld("no signal")], ["a", "b"]) == ()
    with pytest.raises(ValueError, match="2 estimates, but 1 labels"):
        warnings(samples, [Estimate(1.0, 0.1), Estimate(1.0, 0.1)], ["a"])
