"""How a potential behaves far out and close to the origin, decided on numbers: minima over doubling shells.

A potential confines if its minimum over the sphere of radius r grows with r. Rays alone do not show that: along the
parabola y = x^2 the polynomial (y - x^2)^2 - x^2 falls, though it grows along every straight line. So the minimum over
directions (and over angles, where there are some) is followed outwards. Common practice in global optimisation: many
random starts, then a search that widens its steps after a success and halves them after a failure.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from quarterturn.actions.expression import Atom, Expression, PathAtom, Symbol

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Points = NDArray[np.float64]

SEED = 20240229
OUTERMOST = 20  # doublings of the radius, so 1e6
KEPT_PACE = 0.9  # a change that keeps this share of itself from one stride to the next does not die out
ROUGHNESS = {48: 0.05, 12: 0.5}  # of the swing inside a shell: how well so many samples find a minimum
SEARCHES, OFFSPRING, ROUNDS = 8, 24, 45
ROUNDING = 1e-14  # of the terms that cancel
MOST_SEARCHED = 6  # lines up to which valleys are followed


@dataclass(frozen=True)
class Landscape:
    """V at given couplings: paths on the line first, angles with their numerical periods after them."""

    potential: Expression
    lines: tuple[PathAtom, ...]
    circles: tuple[tuple[PathAtom, float], ...]
    couplings: Mapping[str, float]

    def heights(self, x: Points, angles: Points | None = None) -> Points:
        """V at points x, shape (n, lines), and angles, shape (n, circles); nan where V is no real number."""
        import numpy as np

        values: dict[Atom, object] = {Symbol("coupling", n): np.float64(v) for n, v in self.couplings.items()}
        values |= {line: x[:, i] for i, line in enumerate(self.lines)}
        if angles is not None:
            values |= {circle: angles[:, i] for i, (circle, _) in enumerate(self.circles)}
        with np.errstate(all="ignore"):
            try:
                found = np.asarray(self.potential.evaluate(values, np))
            except OverflowError:
                found = np.asarray(np.nan)
        if np.iscomplexobj(found):
            found = np.where(found.imag == 0, found.real, np.nan)
        return np.broadcast_to(found.astype(float), (len(x),)).copy()

    def rounding(self, x: Points) -> Points:
        """The error that V has at points x where its terms cancel."""
        import numpy as np

        angles = np.zeros((len(x), len(self.circles)))
        single = (Expression((term,)) for term in self.potential.terms)
        sizes = [np.abs(replace(self, potential=term).heights(x, angles)) for term in single]
        return np.asarray(ROUNDING * np.nan_to_num(sum(sizes), posinf=0.0))

    def lowest(self, x: Points) -> Points:
        """The minimum over the angles at each point."""
        import numpy as np

        if not self.circles:
            return self.heights(x)
        grid = self._grid()
        many = self.heights(np.repeat(x, len(grid), axis=0), np.tile(grid, (len(x), 1))).reshape(len(x), len(grid))
        return np.where(np.isnan(many).all(axis=1), np.nan, np.nanmin(np.where(np.isnan(many), np.inf, many), axis=1))

    def _grid(self) -> Points:
        """Angles: quarters of each circle with the others at zero, and random ones."""
        import numpy as np

        periods = np.array([period for _, period in self.circles])
        turns = [np.zeros(len(periods))]
        turns += [np.eye(len(periods))[i] * k / 4 for i in range(len(periods)) for k in (1, 2, 3)]
        random = np.random.default_rng(SEED).uniform(size=(12, len(periods)))
        return np.concatenate([np.array(turns), random]) * periods


def directions(count: int) -> Points:
    """Unit vectors, shape (n, count): axes, diagonals of two axes where they are few, and random ones."""
    import numpy as np

    axes = np.eye(count)
    chosen = [axes, -axes]
    if 1 < count <= MOST_SEARCHED:
        pairs = [axes[i] + s * axes[j] for i in range(count) for j in range(i) for s in (1, -1)]
        chosen += [np.array(pairs), -np.array(pairs)]
    if count > 1:
        chosen.append(np.random.default_rng(SEED).normal(size=(24 + 8 * min(count, MOST_SEARCHED), count)))
    together = np.concatenate(chosen)
    return np.asarray(together / np.linalg.norm(together, axis=1, keepdims=True))


def trend(minima: Points, tolerance: float = 0.0) -> str:
    """falls | levels | rises | unknown, from the minima over shells of doubling radius.

    A change that dies out, as that of -1/r does, levels off; one that keeps its pace, as that of -log r, does not.
    """
    import numpy as np

    valid = minima[: np.flatnonzero(np.isnan(minima))[0]] if np.isnan(minima).any() else minima
    stride = (len(valid) - 1) // 2
    if stride < 1:
        return "unknown"
    stride = min(stride, 4)
    if np.isinf(valid[-1]):
        return "falls" if valid[-1] < 0 else "rises"
    last, before = valid[-1] - valid[-1 - stride], valid[-1 - stride] - valid[-1 - 2 * stride]
    tolerance = max(tolerance, 1e-9 * float(np.abs(valid[-1 - 2 * stride :]).max()))
    if abs(last) <= tolerance:
        return "levels"
    dies_out = last * before > 0 and abs(last) < KEPT_PACE * abs(before)
    if dies_out:
        return "levels"
    return "falls" if last < 0 else "rises"


def along_rays(land: Landscape, inwards: bool) -> list[tuple[Points, str]]:
    """The trend along each direction, outwards to 1e6 or inwards to 1e-6."""
    import numpy as np

    rays = directions(len(land.lines))
    samples = 48 if len(land.lines) == 1 else 12
    jitter = np.sort(np.random.default_rng(SEED).uniform(size=samples))
    exponents = np.arange(OUTERMOST)[:, None] + jitter
    radii = 2.0 ** (-exponents if inwards else exponents)
    found = []
    for ray in rays:
        heights = land.lowest(radii.reshape(-1, 1) * ray).reshape(radii.shape)
        dark = np.isnan(heights).all(axis=1)
        minima = np.where(dark, np.nan, np.min(np.where(np.isnan(heights), np.inf, heights), axis=1))
        found.append((ray, trend(minima, ROUGHNESS[samples] * _swing(heights[~dark]))))
    return found


def _swing(heights: Points) -> float:
    """How far V oscillates inside the last shell; 0 where it is monotonic there."""
    import numpy as np

    last = heights[-1][np.isfinite(heights[-1])] if len(heights) else np.array([])
    steps = np.diff(last)
    turns = np.count_nonzero(steps[1:] * steps[:-1] < 0)
    return float(np.ptp(last)) if turns > len(last) / 4 else 0.0


def lowest_on_sphere(height: Callable[[Points], Points], starts: Points, radius: float) -> tuple[Points, Points]:
    """Local minima over the sphere from the best of the starts: unit vectors (m, n) and heights (m,)."""
    import numpy as np

    generator = np.random.default_rng(SEED)

    def seen(u: Points) -> Points:
        return np.nan_to_num(height(radius * u), nan=np.inf, posinf=np.inf, neginf=-np.inf)

    values = seen(starts)
    order = np.argsort(values)[:SEARCHES]
    u, best, step = starts[order], values[order], np.full(len(order), 0.3)
    for _ in range(ROUNDS):
        noise = generator.normal(size=(len(u), OFFSPRING, u.shape[1])) * step[:, None, None]
        tried = u[:, None, :] + noise
        tried /= np.linalg.norm(tried, axis=2, keepdims=True)
        heights = seen(tried.reshape(-1, u.shape[1])).reshape(len(u), OFFSPRING)
        chosen = heights.argmin(axis=1)
        rows = np.arange(len(u))
        better = heights[rows, chosen] < best
        u = np.where(better[:, None], tried[rows, chosen], u)
        best = np.where(better, heights[rows, chosen], best)
        step = np.where(better, np.minimum(step * 1.5, 1.0), step * 0.6)
    return u, best


def along_valleys(
    height: Callable[[Points], Points], rounding: Callable[[Points], Points], count: int, radii: Points
) -> tuple[str, Points]:
    """The trend of the minimum over spheres of the given radii, and the last direction; `rounding` is V's own error."""
    import numpy as np

    starts = directions(count)
    minima = []
    u = starts[:1]
    for radius in radii:
        found, heights = lowest_on_sphere(height, np.concatenate([starts, u]), float(radius))
        order = np.argsort(heights)
        u = found[order[:3]]
        minima.append(heights[order[0]])
    return trend(np.array(minima), float(rounding(radii[-1] * u[:1])[0])), u[0]
