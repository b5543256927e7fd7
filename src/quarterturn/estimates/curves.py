"""Curves from samples: values on a time axis with correlated errors."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import EstimateError
from quarterturn.estimates.estimate import GOOD, UNRESOLVED, CurveEstimate
from quarterturn.estimates.gamma import GammaResult, gamma_method
from quarterturn.estimates.jackknife import block_means
from quarterturn.estimates.series import Array, Samples

BLOCK_IN_TAU = 2.0  # correlations between times settle sooner than variances
BLOCKS_FOR_A_POINT = 4  # shorter blocks are taken where longer ones would leave fewer than this


@dataclass(frozen=True, eq=False)
class LinearCurve:
    """Functions of the means on a time axis, with their derivatives: all that errors need.

    value has shape (T,), gradients (T, quantities).
    """

    samples: Samples
    t: Array
    value: Array
    gradients: Array

    @cached_property
    def results(self) -> tuple[GammaResult, ...]:
        """The Gamma method's result for each time."""
        return tuple(gamma_method(self.samples, gradient) for gradient in self.gradients)

    @property
    def error(self) -> Array:
        """One-sigma errors, shape (T,)."""
        return np.array([result.error for result in self.results])

    def covariance(self, picked: NDArray[np.int_]) -> tuple[Array, int]:
        """Covariance of the picked times, and the number of blocks behind its correlations.

        The correlations are those of means over blocks of twice the largest tau (whole chains at most, and shorter
        where they would be fewer than four a point); they are scaled to the Gamma method's errors, which know the
        autocorrelation of each time.
        """
        used = np.flatnonzero(self.gradients[picked].any(axis=0))
        series = self.samples.values[..., used] @ self.gradients[np.ix_(picked, used)].T
        correlation, blocks = block_correlation(series, self._bins_in_block(len(picked)))
        error = self.error[picked]
        return correlation * np.outer(error, error), blocks

    def estimate(self, exact: Array | None = None, label: str = "") -> CurveEstimate:
        """The curve as it is reported."""
        unresolved = [result for result in self.results if not result.resolved]
        return CurveEstimate(
            t=self.t,
            value=self.value,
            error=self.error,
            covariance=self.covariance(np.arange(len(self.t)))[0],
            exact=None if exact is None else np.asarray(exact, dtype=np.float64),
            label=label,
            state=UNRESOLVED if unresolved else GOOD,
            remark=f"{unresolved[0].remark} at {len(unresolved)} of {len(self.t)} times" if unresolved else "",
        )

    def _bins_in_block(self, points: int) -> int:
        samples = self.samples
        slowest = max((r.tau for r in self.results if np.isfinite(r.tau)), default=0.5)
        wanted = int(np.ceil(BLOCK_IN_TAU * slowest / samples.block))
        affordable = samples.chains * samples.bins // (BLOCKS_FOR_A_POINT * points)
        return max(1, min(wanted, affordable, samples.bins))


def curve(
    samples: Samples, indices: NDArray[np.int_], t: Array, *, exact: Array | None = None, label: str = ""
) -> CurveEstimate:
    """Means of the quantities `indices`, one for each time, with their covariance.

    The errors are the Gamma method's. The covariance is theirs too on the diagonal; off it, the correlations between
    times are those of means over blocks, of twice the largest autocorrelation time if there are enough of them.

    Parameters
    ----------
    indices
        Columns of the samples, shape (T,).
    t
        Times in units of the notation, shape (T,).
    exact
        An independent curve on the same times.

    Raises
    ------
    EstimateError
        As `gamma_method`; shapes disagree.
    """
    indices, t = np.asarray(indices), np.asarray(t, dtype=np.float64)
    if indices.ndim != 1 or indices.shape != t.shape:
        raise EstimateError(f"a curve needs a quantity for each time, not {indices.shape} for {t.shape}")
    gradients = np.zeros((len(t), samples.values.shape[2]))
    gradients[np.arange(len(t)), indices] = 1.0
    return LinearCurve(samples, t, samples.means[indices], gradients).estimate(exact, label)


def block_correlation(series: Array, bins_in_block: int) -> tuple[Array, int]:
    """Correlation matrix of block means of `series` (chains, bins, T), and the number of blocks.

    A constant time is correlated with none.
    """
    blocks = block_means(series, bins_in_block)
    away = blocks - blocks.mean(axis=0)
    deviation = np.sqrt((away**2).sum(axis=0))
    scaled = np.divide(away, deviation, out=np.zeros_like(away), where=deviation > 0)
    correlation = scaled.T @ scaled
    np.fill_diagonal(correlation, 1.0)
    return correlation, len(blocks)
