"""Effective samples of a series: the same estimator for every contender."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
WINDOW = 6.0  # the sum of autocorrelations ends at so many times tau: Madras and Sokal, J. Stat. Phys. 50 (1988) 109


def autocorrelation_time(series: Floats) -> float:
    """tau = 1/2 + sum of the autocorrelations of (chains, draws), with a self-consistent window."""
    draws = series.shape[1]
    centred = series - series.mean()
    size = 1 << (2 * draws - 1).bit_length()
    power = np.abs(np.fft.rfft(centred, n=size, axis=1)) ** 2
    covariance = np.fft.irfft(power, n=size, axis=1)[:, :draws].mean(axis=0) / np.arange(draws, 0, -1)
    tau = 0.5 + np.concatenate([[0.0], np.cumsum(covariance[1:] / covariance[0])])
    reached = np.flatnonzero(np.arange(draws) >= WINDOW * tau)
    return max(0.5, float(tau[reached[0] if len(reached) else -1]))


def effective_samples(series: Floats) -> float:
    """Number of independent draws that a series (chains, draws) is worth."""
    return series.size / (2 * autocorrelation_time(series))
