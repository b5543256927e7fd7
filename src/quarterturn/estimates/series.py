"""What a chain leaves behind: means over bins of consecutive draws, and the exact variance of single draws.

Everything that this room estimates is a function of the means of the recorded quantities. To first order such a
function fluctuates like the projection of the bins on its gradient (Wolff, Comput. Phys. Commun. 156 (2004) 143),
so that `Samples.project` is the one door through which the statistics see the data.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import EstimateError

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Samples:
    """Recorded quantities of several chains of equal length, after warm-up.

    Parameters
    ----------
    values
        Means over consecutive draws, shape (chains, bins, quantities).
    block
        Draws in a bin: 1, 2, 4, …
    variance
        Variance of single, unbinned draws about the mean of all chains, divided by the number of draws,
        shape (quantities,).
    names
        How complaints call the quantities; empty where they have no names.

    Raises
    ------
    EstimateError
        Shapes disagree, or there are no bins.
    """

    values: Array
    block: int
    variance: Array
    names: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        values = np.asarray(self.values, dtype=np.float64)
        variance = np.asarray(self.variance, dtype=np.float64)
        if values.ndim != 3 or 0 in values.shape:
            raise EstimateError(f"samples have shape (chains, bins, quantities), not {values.shape}")
        if variance.shape != values.shape[2:]:
            raise EstimateError(f"the variance of single draws has shape {variance.shape}, expected {values.shape[2:]}")
        if self.block < 1:
            raise EstimateError(f"a bin holds at least one draw, not {self.block}")
        if self.names and len(self.names) != values.shape[2]:
            raise EstimateError(f"{len(self.names)} names for {values.shape[2]} quantities")
        object.__setattr__(self, "values", values)
        object.__setattr__(self, "variance", variance)

    @property
    def chains(self) -> int:
        """Number of chains."""
        return int(self.values.shape[0])

    @property
    def bins(self) -> int:
        """Bins in a chain."""
        return int(self.values.shape[1])

    @property
    def draws(self) -> int:
        """Draws in all chains together."""
        return self.chains * self.bins * self.block

    @cached_property
    def means(self) -> Array:
        """Means over all draws, shape (quantities,)."""
        means: Array = self.values.mean(axis=(0, 1))
        return means

    @cached_property
    def bin_deviation(self) -> Array:
        """Standard deviations of the bins about the means of all chains, shape (quantities,)."""
        deviation: Array = self.values.std(axis=(0, 1))
        return deviation

    def name(self, index: int) -> str:
        """What a complaint calls quantity `index`."""
        return self.names[index] if self.names else f"quantity {index}"

    def project(self, gradient: Array) -> Array:
        """Bins of `sum_i gradient_i quantity_i`, shape (chains, bins)."""
        gradient = np.asarray(gradient, dtype=np.float64)
        if gradient.shape != self.variance.shape:
            raise EstimateError(f"a gradient has shape {self.variance.shape}, not {gradient.shape}")
        used = np.flatnonzero(gradient)
        if len(used) == 1:
            return np.asarray(self.values[..., used[0]] * gradient[used[0]])
        return np.asarray(self.values[..., used] @ gradient[used])

    def projected_variance(self, gradient: Array) -> float:
        """Variance of single draws of `sum_i gradient_i quantity_i`.

        Exact for one quantity and for bins of one draw. Otherwise the correlations between quantities are
        taken from the bins, the only place where they are kept, and the sizes from the single draws.
        """
        used = np.flatnonzero(gradient)
        if len(used) == 1:
            return float(gradient[used[0]] ** 2 * self.variance[used[0]])
        if self.block == 1:
            return float(self.project(gradient).var())
        scale = np.zeros_like(self.variance)
        binned = self.bin_deviation
        np.divide(np.sqrt(self.variance), binned, out=scale, where=binned > 0)
        return float(self.project(gradient * scale).var())
