"""The building blocks of the benchmarks give right answers; nothing here is timed."""

import json
from pathlib import Path

import numpy as np
import pytest

from .baselines import PathProblem, compiled_chains, numpy_hamiltonian
from .efficiency import autocorrelation_time, effective_samples

QUARTIC = PathProblem("quartic", 16, 0.5, 0.5, 1.0)  # V = x^2/2 + x^4
SIGMAS = 4.5  # false alarm rate 7e-6 each


def exact_square() -> float:
    """<x^2> of `tm-aho-lam1-a0.5-N16`."""
    path = Path(__file__).parent.parent / "outside" / "checks.json"
    (entry,) = [e for e in json.loads(path.read_text(encoding="utf-8")) if e["id"] == "tm-aho-lam1-a0.5-N16"]
    return float(entry["value"]["x2"])


def agree(series: np.ndarray) -> None:
    """series (chains, draws)."""
    error = series.std() / np.sqrt(effective_samples(series))
    assert abs(series.mean() - exact_square()) < SIGMAS * error


def test_compiled_baselines_agree_with_the_transfer_matrix() -> None:
    chains = compiled_chains()
    if chains is None:
        pytest.skip("no C compiler here; the benchmarks then run without these baselines")
    q = np.zeros(QUARTIC.sites)
    series, rate = chains.metropolis(QUARTIC, q, 0.8, 40_000, 1)
    assert 0.2 < rate < 0.9
    agree(series[None, 1000:, 1])
    series, rate = chains.hamiltonian(QUARTIC, q, 0.3, 5, 20_000, 2)
    assert 0.7 < rate < 1
    agree(series[None, 100:, 1])


def test_numpy_baseline_agrees_with_the_transfer_matrix() -> None:
    q = np.zeros((32, QUARTIC.sites))
    series, rate = numpy_hamiltonian(QUARTIC, q, 0.3, 5, 600, np.random.default_rng(3))
    assert 0.7 < rate < 1
    agree(series[50:, :, 1].T)


def test_autocorrelation_time_of_an_autoregressive_series() -> None:
    """tau = (1 + r) / (2 (1 - r)); 5 % is four of its standard errors for the series with r = 0.8."""
    rng = np.random.default_rng(4)
    for r in (0.0, 0.5, 0.8):
        noise = rng.standard_normal((20, 20_000))
        series = noise.copy()
        for t in range(1, series.shape[1]):
            series[:, t] = r * series[:, t - 1] + np.sqrt(1 - r * r) * noise[:, t]
        assert autocorrelation_time(series) == pytest.approx((1 + r) / (2 * (1 - r)), rel=0.05)


def test_loading_the_c_baselines_leaves_subnormal_numbers_alone() -> None:
    """A library linked with -ffast-math would set the processor to flush them to zero for the whole process."""
    compiled_chains()
    assert float(np.float64(5e-324) * np.float64(1.0)) == 5e-324
