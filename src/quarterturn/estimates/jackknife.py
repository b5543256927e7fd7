"""The jackknife over blocks: errors and biases that know nothing of windows, as a cross-check.

Chains are cut into blocks that are long against the autocorrelation time; leaving out one block after the other
gives the error and the bias of any function of the means (Efron, The Jackknife, the Bootstrap and Other Resampling
Plans, SIAM 1982).
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from quarterturn.errors import EstimateError
from quarterturn.estimates.series import Array, Samples

BLOCK_IN_TAU = 10.0  # blocks this long lose about 5 % of the variance
BLOCKS_AT_MOST = 256  # more would cost calls of the function and buy nothing


@dataclass(frozen=True)
class Jackknife:
    """Value at the means, one-sigma error, bias (to be subtracted from the value), and number of blocks."""

    value: float
    error: float
    bias: float
    blocks: int


def block_means(series: Array, bins_in_block: int) -> Array:
    """Means over consecutive bins, chain by chain: shape (chains, bins, …) to (blocks, …).

    Bins that do not fill a block at the end of a chain are left out.
    """
    chains, bins = series.shape[:2]
    if not 1 <= bins_in_block <= bins:
        raise EstimateError(f"a block of {bins_in_block} bins does not fit in chains of {bins} bins")
    count = bins // bins_in_block
    cut = series[:, : count * bins_in_block].reshape(chains * count, bins_in_block, *series.shape[2:])
    means: Array = cut.mean(axis=1)
    return means


def bins_for_blocks(samples: Samples, tau: float) -> int:
    """Bins in a block: ten tau or more, but at least two blocks in all and at most 256."""
    total = samples.chains * samples.bins
    needed = int(np.ceil(BLOCK_IN_TAU * tau / samples.block)) if np.isfinite(tau) else 1
    fewest = -(-total // BLOCKS_AT_MOST)
    longest = samples.bins if samples.chains > 1 else max(1, samples.bins // 2)
    return min(longest, max(1, needed, fewest))


def jackknife(
    samples: Samples, function: Callable[[Array], float], tau: float, *, bins_in_block: int | None = None
) -> Jackknife:
    """Delete-one-block jackknife of `function` of the means, shape (quantities,).

    Parameters
    ----------
    tau
        Integrated autocorrelation time [draws]; it sets the length of the blocks.
    bins_in_block
        Overrides the length.

    Raises
    ------
    EstimateError
        Fewer than two blocks, or the function is not finite without one of them.
    """
    length = bins_in_block or bins_for_blocks(samples, tau)
    blocks = block_means(samples.values, length)
    count = len(blocks)
    if count < 2:
        raise EstimateError("a jackknife needs at least two blocks")
    mean = blocks.mean(axis=0)
    without = (count * mean - blocks) / (count - 1)
    replicas = np.array([function(means) for means in without], dtype=np.float64)
    value = float(function(mean))
    if not np.isfinite(replicas.sum() + value):
        raise EstimateError("the expression has no finite value when one block of draws is left out")
    error = float(np.sqrt((count - 1) * replicas.var()))
    bias = float((count - 1) * (replicas.mean() - value))
    return Jackknife(value, error, bias, count)
