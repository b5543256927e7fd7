"""The points of rest of a problem: which minima are level, which barriers lead out of one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from quarterturn.errors import SaddleError
from quarterturn.saddles.problem import Problem
from quarterturn.saddles.rest import Rest, curved_minima, rest_points

EQUAL = 1e-9  # of all differences of height, within which two minima are degenerate


@dataclass(frozen=True, eq=False)
class Landscape:
    """The points of rest of a problem, and those among them that are minima; both lowest first."""

    problem: Problem
    points: Sequence[Rest]
    minima: Sequence[Rest]

    @property
    def scale(self) -> float:
        """The largest difference of heights."""
        heights = [r.height for r in self.points]
        return max(heights) - min(heights) or 1.0

    def level(self, one: Rest, other: Rest) -> bool:
        return abs(one.height - other.height) <= EQUAL * self.scale

    def level_with(self, vacuum: Rest) -> list[Rest]:
        """The minima of the same height, this one among them."""
        return [m for m in self.minima if self.level(m, vacuum)]

    def partners(self, vacuum: Rest) -> list[Rest]:
        """The other minima of the same height."""
        spread = max(float(np.linalg.norm(m.x - vacuum.x)) for m in self.minima)
        return [m for m in self.level_with(vacuum) if np.linalg.norm(m.x - vacuum.x) > 1e-7 * spread]

    def same_place(self, one: Rest, other: Rest) -> bool:
        """Whether the two differ by turns of a circle only."""
        q, other_q = self.problem.q(one.x), self.problem.q(other.x)
        for a, b, period in zip(q, other_q, self.problem.periods, strict=True):
            turns = 0.0 if period is None else round((a - b) / period) * period
            if abs(a - b - turns) > 1e-6 * (1 + abs(a)):
                return False
        return True

    def barriers(self, vacuum: Rest) -> list[Rest]:
        """Tops of barriers above `vacuum`, with one unstable direction; of one variable, the two next to it.

        Raises SaddleError where they form a continuous family.
        """
        tops = [r for r in self.points if r.negative == 1 and r.height > vacuum.height and not self.level(r, vacuum)]
        if self.problem.size == 1:
            tops = [top for top in tops if not self._between(top, vacuum)]
        if tops and all(top.flat for top in tops):
            if self.problem.size == 1:
                raise SaddleError("the barrier has no curvature at its top, so that no path begins to oscillate there")
            raise SaddleError(
                "the tops of the barrier form a continuous family (a symmetry that the way out breaks), and so do the "
                "bounces, which are not handled: state the radial problem as one path instead"
            )
        return sorted((top for top in tops if not top.flat), key=lambda top: top.height)

    def _between(self, top: Rest, vacuum: Rest) -> bool:
        """Whether another point of rest lies on the line between the two."""
        low, high = sorted((float(top.x[0]), float(vacuum.x[0])))
        return any(low < float(r.x[0]) < high for r in self.points)


def survey(problem: Problem) -> Landscape:
    """The points of rest. Raises SaddleError where there is no minimum, or none with a curvature."""
    points = rest_points(problem)
    return Landscape(problem, points, curved_minima(problem, points))
