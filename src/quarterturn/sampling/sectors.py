"""How often chains enter each sector: the basin of a path's mean, and the winding number.

What a sampler never leaves, no error bar of its own can see; these counts can.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


class SectorCount:
    """Entries into sectors, all chains together.

    A visit begins where a chain is in another sector than at its last draw; sectors in which chains began have an
    entry, zero until somebody comes back. `edges` are the values of each whitened variable that part the basins.
    """

    def __init__(self, edges: tuple[Floats, ...]) -> None:
        self.edges = edges
        self.visits: list[dict[int, int]] = [{} for _ in edges]
        self.windings: dict[tuple[int, ...], int] = {}
        self._last: tuple[NDArray[np.int64], NDArray[np.int64]] | None = None

    def add(self, means: Floats, winding: Floats) -> None:
        """Consecutive draws; means of the whitened paths and winding numbers, both (draws, chains, C)."""
        basins = np.stack([np.digitize(means[..., c], e) for c, e in enumerate(self.edges)], axis=-1)
        turns = winding.astype(np.int64)
        if self._last is None:
            self._last = (basins[0], turns[0])
            for c, visits in enumerate(self.visits):
                visits.update(dict.fromkeys(map(int, np.unique(basins[0, :, c])), 0))
            self.windings.update(dict.fromkeys((tuple(map(int, v)) for v in np.unique(turns[0], axis=0)), 0))
        before = np.concatenate([self._last[0][None], basins[:-1]])
        for c, visits in enumerate(self.visits):
            sectors, counts = np.unique(basins[..., c][basins[..., c] != before[..., c]], return_counts=True)
            for sector, count in zip(sectors, counts, strict=True):
                visits[int(sector)] = visits.get(int(sector), 0) + int(count)
        moved = np.any(turns != np.concatenate([self._last[1][None], turns[:-1]]), axis=-1)
        if moved.any():
            for values, count in zip(*np.unique(turns[moved], axis=0, return_counts=True), strict=True):
                name = tuple(map(int, values))
                self.windings[name] = self.windings.get(name, 0) + int(count)
        self._last = (basins[-1], turns[-1])
