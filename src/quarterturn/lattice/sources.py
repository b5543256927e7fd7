"""External sources on the points of a lattice.

The origin of each coordinate is the site N // 2, so that t runs from -beta/2 to beta/2 and a source that is centred
at 0 is felt whole on a periodic lattice.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Symbol
from quarterturn.actions.model import Source
from quarterturn.errors import ActionError

Floats = NDArray[np.float64]


def source_values(
    sources: Sequence[Source],
    couplings: Mapping[str, float],
    coordinates: tuple[str, ...],
    extents: tuple[int, ...],
    spacings: tuple[float, ...],
) -> Floats:
    """Each source at each site, (sources, *extents). Raises ActionError where one is no finite real number."""
    axes = [(np.arange(n) - n // 2) * a for n, a in zip(extents, spacings, strict=True)]
    grids = np.meshgrid(*axes, indexing="ij")
    lookup: dict[Atom, object] = {Symbol("coupling", name): np.float64(v) for name, v in couplings.items()}
    lookup |= {Symbol("coordinate", c): grid for c, grid in zip(coordinates, grids, strict=True)}
    found = np.zeros((len(sources), *extents))
    for row, source in zip(found, sources, strict=True):
        with np.errstate(all="ignore"):
            values = np.broadcast_to(np.asarray(source.body.evaluate(lookup, np)), extents)
        if np.iscomplexobj(values) or not np.isfinite(values).all():
            raise ActionError(f"the source {source.name} is not a finite real number at every point of the lattice")
        row[...] = values
    return found
