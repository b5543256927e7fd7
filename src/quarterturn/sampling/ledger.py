"""What a chain leaves behind: block means of its draws, in bounded memory.

Each entry is the mean of `block` consecutive draws of each chain. When there are more than `limit` entries,
neighbours are averaged in pairs and the block doubles, so that memory does not grow with the length of a run. Sums
and squares of the single draws are kept beside them, for the variance that an autocorrelation time needs.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


class Ledger:
    """Block means of `quantities` numbers for each of `chains` chains."""

    def __init__(self, chains: int, quantities: int, *, block: int = 1, limit: int = 1024) -> None:
        self.block = block
        self.limit = limit
        self._bins: list[Floats] = []  # each (chains, quantities)
        self._odd: list[Floats] = []  # entries of the finer block that wait for a partner
        self._base = block
        self._shape = (chains, quantities)
        self.draws = 0  # per chain
        self._sum = np.zeros(quantities)
        self._squares = np.zeros(quantities)
        self._shift: Floats | None = None  # a first guess of the mean, against cancellation

    def add(self, entries: Floats) -> None:
        """Append entries (n, chains, quantities), each the mean of the smallest block of draws."""
        if self._shift is None:
            self._shift = entries.mean(axis=(0, 1))
        centred = entries - self._shift
        self._sum += centred.sum(axis=(0, 1))
        self._squares += (centred**2).sum(axis=(0, 1))
        self.draws += len(entries) * self._base
        self._odd.extend(entries)
        need = self.block // self._base
        while len(self._odd) >= need:
            self._bins.append(np.mean(self._odd[:need], axis=0))
            del self._odd[:need]
        while len(self._bins) > self.limit:
            self._halve()

    def _halve(self) -> None:
        pairs = len(self._bins) // 2
        if len(self._bins) % 2:  # the last entry waits, as finer entries of equal value
            last = self._bins.pop()
            self._odd = [last] * (self.block // self._base) + self._odd
        self._bins = [(self._bins[2 * i] + self._bins[2 * i + 1]) / 2 for i in range(pairs)]
        self.block *= 2

    @property
    def bins(self) -> int:
        return len(self._bins)

    def values(self) -> Floats:
        """Block means, (chains, bins, quantities)."""
        if not self._bins:
            return np.zeros((self._shape[0], 0, self._shape[1]))
        return np.stack(self._bins, axis=1)

    def variance(self) -> Floats:
        """Variance of single entries of the smallest block, pooled over chains, (quantities,)."""
        count = max(1, self.draws // self._base * self._shape[0])
        mean = self._sum / count
        return np.maximum(self._squares / count - mean**2, 0.0)
