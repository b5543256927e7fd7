"""The jackknife: Efron's identities, and Student's coverage of few blocks."""

import numpy as np
import pytest

from quarterturn.estimates.jackknife import block_means, jackknife

FALSE_ALARM = 1e-3


def test_identities_of_the_delete_one_jackknife(outside, simulated):  # Efron 1982
    case = outside("jackknife-identities")
    assert case["value"]["var_jk(mean)"].startswith("s^2/n")
    x = np.random.default_rng(40).standard_normal((1, 30, 1)) + 2
    samples = simulated.binned(x, 1)
    variance = x.var(ddof=1) / 30
    mean = jackknife(samples, lambda m: m[0], 0.5, bins_in_block=1)
    square = jackknife(samples, lambda m: m[0] ** 2, 0.5, bins_in_block=1)
    assert mean.error**2 == pytest.approx(variance, rel=1e-10)
    assert mean.bias == pytest.approx(0, abs=1e-12)
    assert square.bias == pytest.approx(variance, rel=1e-8)
    assert square.value - square.bias == pytest.approx(x.mean() ** 2 - variance, rel=1e-10)


def test_the_error_of_the_mean_on_the_deterministic_series(outside, simulated):  # gamma-det-A, entry jk
    kicks = ((7919 * np.arange(40) + 104729) % 1000) / 1000 - 0.5
    y = [kicks[0]]
    for kick in kicks[1:]:
        y.append(0.8 * y[-1] + kick)
    samples = simulated.binned(np.array(y)[None, :, None], 1)
    found = jackknife(samples, lambda m: m[0], 0.5, bins_in_block=1)
    assert found.error == pytest.approx(outside("gamma-det-A")["value"]["jk"], rel=1e-10)


@pytest.mark.parametrize("name", ["coverage-t-n5", "coverage-t-n10", "coverage-t-n20"])
def test_few_blocks_cover_as_student_says(outside, simulated, name):
    case = outside(name)
    blocks, count = case["parameters"]["n"], 3000
    rng = np.random.default_rng(41)
    within = np.zeros(2)
    for _ in range(count):
        samples = simulated.binned(rng.standard_normal((1, blocks, 1)), 1)
        found = jackknife(samples, lambda m: m[0], 0.5, bins_in_block=1)
        within += abs(found.value) < found.error, abs(found.value) < 2 * found.error
    for share, expected in zip(within / count, (case["value"]["k1"], case["value"]["k2"]), strict=True):
        low, high = simulated.binomial_limits(count, float(expected), FALSE_ALARM)
        assert low <= share <= high


def test_blocks_stay_inside_chains():
    series = np.arange(14.0).reshape(2, 7)
    assert block_means(series, 3).tolist() == [1.0, 4.0, 8.0, 11.0]
