"""The Gamma method against definitions, against series of known autocorrelation, and for coverage."""

import numpy as np
import pytest

from quarterturn.errors import EstimateError
from quarterturn.estimates.estimate import GOOD, UNRESOLVED
from quarterturn.estimates.gamma import autocovariance, derived, estimate, gamma_method, numerical_gradient
from quarterturn.estimates.series import Samples

FALSE_ALARM = 1e-3  # of each coverage test, over reseedings


def test_definitions_on_a_deterministic_series(outside):  # gamma-det-A: Wolff 2004 (31), (35), (49)
    case = outside("gamma-det-A")
    i = np.arange(40)
    kicks = ((7919 * i + 104729) % 1000) / 1000 - 0.5
    y = [kicks[0]]
    for kick in kicks[1:]:
        y.append(0.8 * y[-1] + kick)
    series = np.array(y)[None, :]
    samples = Samples(series[..., None], 1, np.array([series.var()]))
    expected, window = case["value"], case["parameters"]["W"]
    gamma = autocovariance(series, 3)
    result = gamma_method(samples, np.ones(1), window=window)
    raw = autocovariance(series, window)
    assert samples.means[0] == pytest.approx(expected["mean"], rel=1e-10)
    assert gamma == pytest.approx(expected["G"], rel=1e-10)
    assert raw[0] + 2 * raw[1:].sum() == pytest.approx(expected["C"], rel=1e-10)
    assert result.error**2 * 40 == pytest.approx(expected["Cc"], rel=1e-10)
    assert result.error == pytest.approx(expected["err"], rel=1e-10)
    assert result.tau == pytest.approx(expected["tau"], rel=1e-10)


@pytest.mark.parametrize("name", ["ar1-rho0.5-N1000", "ar1-rho0.9-N10000", "ar1-rho0.99-N100000"])
def test_autocorrelation_times_of_ar1_and_coverage_of_its_mean(outside, simulated, name):
    """tau of x and of x^2 within three of their errors on average; 68 % intervals cover 0.60 to 0.76 in 200 replicas.

    Both are the acceptance of the outside values. The second fails in 1.5 % of reseedings.
    """
    case = outside(name)
    rho, draws = float(case["parameters"]["rho"]), case["parameters"]["N"]
    rng = np.random.default_rng(20)
    covered, taus, squares = 0, [], []
    for _ in range(200):
        x = simulated.autoregressive(rng, rho, (1, draws, 1))
        e = estimate(simulated.binned(x, 1), 0)
        covered += abs(e.value) < e.error
        taus.append((e.tau - float(case["value"]["tau"])) / e.tau_error)
        square = estimate(simulated.binned(x**2, 1), 0)
        squares.append((square.tau - float(case["value"]["tau_x2"])) / square.tau_error)
    assert 0.60 < covered / 200 < 0.76
    for pulls in (taus, squares):
        assert np.mean(np.abs(pulls) < 3) > 0.97
        assert abs(np.mean(pulls)) < 0.5  # truncation shifts tau by a fraction of its error, no more


def test_the_exact_variance_of_the_mean_is_reproduced(outside, simulated):
    """<error^2> is Var(mean) of N samples: the formula of the outside value, to 4 sigma of the average."""
    case = outside("ar1-rho0.9-N10000")
    rng = np.random.default_rng(21)
    squares = []
    for _ in range(300):
        x = simulated.autoregressive(rng, 0.9, (10, 1000, 1))
        squares.append(estimate(simulated.binned(x, 1), 0).error ** 2)
    # ten chains of a thousand draws: the asymptotic variance over the end corrections of each chain
    rho, n = 0.9, 1000
    exact = sum((1 - abs(t) / n) * rho ** abs(t) for t in range(-n + 1, n)) / n / 10
    whole = sum((1 - abs(t) / 10000) * rho ** abs(t) for t in range(-9999, 10000)) / 10000
    assert whole == pytest.approx(float(case["value"]["var_mean"]), rel=1e-10)
    assert np.mean(squares) == pytest.approx(exact, abs=4 * np.std(squares) / np.sqrt(300) + 0.01 * exact)


def test_two_time_scales_and_a_window_that_cuts_one_off(outside, simulated):  # ar-mix
    case = outside("ar-mix-0.9-0.2")
    p = {k: float(v) for k, v in case["parameters"].items()}
    rng = np.random.default_rng(22)
    x = np.sqrt(p["w1"]) * simulated.autoregressive(rng, p["r1"], (8, 50000, 1))
    x += np.sqrt(p["w2"]) * simulated.autoregressive(rng, p["r2"], (8, 50000, 1))
    samples = simulated.binned(x, 1)
    whole, cut = gamma_method(samples, np.ones(1)), gamma_method(samples, np.ones(1), window=10)
    assert abs(whole.tau - float(case["value"]["tau"])) < 3 * whole.tau_error
    assert abs(cut.tau - float(case["value"]["tauW"])) < 3 * cut.tau_error


@pytest.mark.parametrize("rho", [0.0, 0.5, 0.9])
@pytest.mark.parametrize(("chains", "draws", "block"), [(4, 500, 1), (64, 128, 8)])
def test_error_bars_of_a_mean_and_a_ratio_cover(simulated, rho, chains, draws, block):
    rng = np.random.default_rng(int(1000 * rho) + chains)
    count = 1000
    inside = np.zeros(2)
    for _ in range(count):
        x = simulated.autoregressive(rng, rho, (chains, draws, 2)) + np.array([1.0, 3.0])
        samples = simulated.binned(x, block)
        mean, ratio = estimate(samples, 0), derived(samples, lambda m: m[0] / m[1])
        assert mean.state == GOOD
        inside += abs(mean.value - 1) < mean.error, abs(ratio.value - 1 / 3) < ratio.error
    low, high = simulated.binomial_limits(count, 0.6827, FALSE_ALARM)
    assert low <= inside[0] / count <= high
    assert low <= inside[1] / count <= high


def test_few_slow_chains_cover(simulated):
    """4 chains of 2000 draws with tau = 30."""
    rng = np.random.default_rng(23)
    rho, count = np.exp(-1 / 30), 1000
    inside = 0
    for _ in range(count):
        e = estimate(simulated.binned(simulated.autoregressive(rng, rho, (4, 2000, 1)), 1), 0)
        inside += abs(e.value) < e.error
    low, high = simulated.binomial_limits(count, 0.6827, FALSE_ALARM)
    assert low <= inside / count <= high


def test_many_chains_too_short_for_a_window_give_their_scatter(simulated):
    """64 chains of 16 bins, tau of two bins: no window closes in half a chain, the means of chains decide."""
    rng = np.random.default_rng(24)
    count = good = inside = 0
    while count < 1000:
        count += 1
        e = estimate(simulated.binned(simulated.autoregressive(rng, 0.9, (64, 64, 1)), 4), 0)
        if e.state != GOOD:
            continue
        good += 1
        inside += abs(e.value) < e.error
    low, high = simulated.binomial_limits(good, 0.6827, FALSE_ALARM)
    assert good > 900
    assert low <= inside / good <= high


def test_chains_shorter_than_their_memory_are_unresolved(simulated):
    """tau = 100: of 4 chains of 200 draws, nearly none may claim an error (measured: 3 in 1000)."""
    rng = np.random.default_rng(25)
    found = [estimate(simulated.binned(simulated.autoregressive(rng, 0.99, (4, 200, 1)), 1), 0) for _ in range(100)]
    lost = [e for e in found if e.state == UNRESOLVED]
    assert len(lost) >= 97
    assert all("unresolved" in str(e) and e.remark and e.error > 0 for e in lost)
    assert any("not resolved by chains of 200 draws" in e.remark for e in lost)


def test_two_chains_of_eight_bins_are_unresolved_and_fewer_refused(simulated):
    rng = np.random.default_rng(26)
    few = estimate(simulated.binned(rng.standard_normal((2, 8, 1)), 1), 0)
    assert few.state == UNRESOLVED and few.remark
    with pytest.raises(EstimateError, match="2 x 7 bins are too few"):
        estimate(simulated.binned(rng.standard_normal((2, 7, 1)), 1), 0)


def test_bins_and_single_draws_tell_the_same(simulated):
    rng = np.random.default_rng(27)
    x = simulated.autoregressive(rng, 0.8, (32, 4096, 1))
    single, coarse = estimate(simulated.binned(x, 1), 0), estimate(simulated.binned(x, 16), 0)
    assert single.tau == pytest.approx(4.5, abs=3 * single.tau_error)
    assert coarse.tau == pytest.approx(4.5, abs=3 * coarse.tau_error)
    assert coarse.error == pytest.approx(single.error, abs=3 * coarse.error_error)
    assert coarse.n_eff == pytest.approx(32 * 4096 / 9, rel=0.1)


def test_the_error_of_the_error_is_its_scatter(simulated):
    """To 20 %, as far as the leading-order formula holds (outside value gamma-wolff-formulas, note)."""
    rng = np.random.default_rng(28)
    found = [estimate(simulated.binned(simulated.autoregressive(rng, 0.5, (4, 500, 1)), 1), 0) for _ in range(500)]
    scatter = np.std([e.error for e in found])
    assert np.mean([e.error_error for e in found]) == pytest.approx(scatter, rel=0.2)


def test_chains_that_disagree_have_a_small_probability(simulated):
    rng = np.random.default_rng(29)
    x = simulated.autoregressive(rng, 0.5, (4, 1000, 1))
    agreeing = estimate(simulated.binned(x, 1), 0).replica_q
    x[0] += 0.5
    assert agreeing > 1e-3
    assert estimate(simulated.binned(x, 1), 0).replica_q < 1e-3


def test_the_probability_of_replicas_has_at_most_the_stated_false_alarm_rate(simulated):
    """P(Q < 0.05) is at most 0.05; one-sided binomial limit at 1e-3."""
    rng = np.random.default_rng(30)
    low = sum(
        estimate(simulated.binned(simulated.autoregressive(rng, 0.5, (4, 500, 1)), 1), 0).replica_q < 0.05
        for _ in range(1000)
    )
    assert low / 1000 <= simulated.binomial_limits(1000, 0.05, 2e-3)[1]


@pytest.mark.parametrize("constant", [0.0, 0.1, -1e9])
def test_a_constant_has_no_error_and_says_so(constant):
    values = np.full((4, 50, 1), constant)
    e = estimate(Samples(values, 1, values.var(axis=(0, 1))), 0)
    assert e.error == 0 and e.remark == "no variance seen" and e.tau is None


def test_a_value_that_is_not_finite_names_its_quantity():
    values = np.random.default_rng(31).standard_normal((4, 50, 2))
    values[2, 7, 1] = np.nan
    samples = Samples(values, 1, np.ones(2), names=("<q>", "<q^2>"))
    assert estimate(samples, 0).state == GOOD
    with pytest.raises(EstimateError, match=r"<q\^2> is not finite in 1 of 200 bins, first in chain 2, bin 7"):
        estimate(samples, 1)


def test_the_numerical_gradient_is_the_analytic_one(simulated):
    rng = np.random.default_rng(32)
    samples = simulated.binned(rng.standard_normal((8, 500, 3)) + np.array([1.0, 2.0, 3.0]), 1)
    m = samples.means
    found = numerical_gradient(samples, lambda v: v[0] * v[1] ** 2 / v[2])
    exact = [m[1] ** 2 / m[2], 2 * m[0] * m[1] / m[2], -m[0] * m[1] ** 2 / m[2] ** 2]
    assert found == pytest.approx(exact, rel=1e-3)


def test_a_derived_quantity_uses_the_correlations(simulated):
    """q - q is exactly nothing, though both fluctuate."""
    rng = np.random.default_rng(33)
    x = rng.standard_normal((8, 500, 1))
    samples = simulated.binned(np.concatenate([x, x], axis=2), 1)
    assert derived(samples, lambda m: m[0] - m[1], np.array([1.0, -1.0])).error == pytest.approx(0, abs=1e-12)


def test_a_strongly_nonlinear_function_says_so_and_gets_the_variance_of_second_order(simulated):
    """<x>^2 about zero: error^2 = 4 m^2 s^2 + 2 s^4 with s the error of the mean m."""
    rng = np.random.default_rng(34)
    x = rng.standard_normal((16, 256, 1))
    x -= x.mean()
    samples = simulated.binned(x, 1)
    s = estimate(samples, 0).error
    e = derived(samples, lambda m: m[0] ** 2)
    assert "nonlinear" in e.remark
    assert e.error == pytest.approx(np.sqrt(2) * s**2, rel=0.3)  # the block jackknife knows s^2 to some 10 %


def test_a_function_without_a_finite_value_is_refused(simulated):
    samples = simulated.binned(np.random.default_rng(35).standard_normal((4, 50, 1)) + 5, 1)
    with pytest.raises(EstimateError, match="no finite value"):
        derived(samples, lambda m: np.nan * m[0])
