"""Chains with known autocorrelation, and paths with a known gap, to try the statistics on."""

import importlib.util
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats
from scipy.signal import lfilter

from quarterturn.estimates.series import Samples

Array = NDArray[np.float64]


@pytest.fixture(scope="session")
def outside() -> Callable[[str], dict[str, Any]]:
    """An entry of the outside values by its name."""
    place = Path(__file__).parents[1] / "outside" / "values.py"
    spec = importlib.util.spec_from_file_location("outside_values", place)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.value


def autoregressive(rng: np.random.Generator, rho: float, shape: tuple[int, ...]) -> Array:
    """Stationary AR(1) along axis 1, unit variance: x_{t+1} = rho x_t + sqrt(1 - rho^2) eta_t."""
    noise = rng.standard_normal(shape)
    noise[:, 1:] *= np.sqrt(1 - rho**2)
    return lfilter([1.0], [1.0, -rho], noise, axis=1)


def binned(draws: Array, block: int) -> Samples:
    """Draws (chains, draws, quantities) as a chain would leave them."""
    chains, count, quantities = draws.shape
    bins = draws.reshape(chains, count // block, block, quantities).mean(axis=2)
    return Samples(bins, block, draws.var(axis=(0, 1)))


def gaussian_path(rng: np.random.Generator, rho: float, shape: tuple[int, int, int], a: float, w: float) -> Array:
    """Exact draws of S = a sum 1/2 ((q' - q)/a)^2 + 1/2 w^2 q^2 on a ring, (chains, draws, sites); AR(1) in the draws.

    Its gap is (2/a) asinh(w a/2): Creutz and Freedman, Ann. Phys. 132 (1981) 427.
    """
    sites = shape[-1]
    momentum = 2 * np.sin(np.pi * np.arange(sites // 2 + 1) / sites) / a
    width = 1 / np.sqrt(a * (momentum**2 + w**2))
    return np.fft.irfft(np.fft.rfft(autoregressive(rng, rho, shape)) * width, n=sites)


def lattice_gap(a: float, w: float) -> float:
    return 2 / a * np.arcsinh(w * a / 2)


def correlator(left: Array, right: Array) -> Array:
    """<f(t) g(0)> averaged over translations, symmetrised, for t = 0 … half of the ring; (chains, draws, T)."""
    sites = left.shape[-1]
    product = np.fft.rfft(left) * np.fft.rfft(right).conj()
    return np.fft.irfft(product.real, n=sites)[..., : sites // 2 + 1] / sites


def binomial_limits(count: int, share: float, false_alarm: float) -> tuple[float, float]:
    """Shares between which `count` trials fall but for `false_alarm`, half of it on either side."""
    low, high = stats.binom.ppf([false_alarm / 2, 1 - false_alarm / 2], count, share)
    return float(low / count), float(high / count)


@pytest.fixture(scope="session")
def simulated() -> Any:
    """The functions of this file, for tests to call."""

    class Simulated:
        autoregressive = staticmethod(autoregressive)
        binned = staticmethod(binned)
        gaussian_path = staticmethod(gaussian_path)
        lattice_gap = staticmethod(lattice_gap)
        correlator = staticmethod(correlator)
        binomial_limits = staticmethod(binomial_limits)

    return Simulated
