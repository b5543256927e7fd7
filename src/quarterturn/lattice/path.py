"""A Euclidean action of paths on a periodic lattice in imaginary time.

S = sum_i a [ 1/2 sum_cd K_cd (q_c,i+1 - q_c,i)(q_d,i+1 - q_d,i) / a^2 + V(q_i) ] - i sum_i A(q_mid) . (q_i+1 - q_i),
with q_mid the midpoint of the link (common practice for a magnetic term: Schulman, Techniques and Applications of
Path Integration, 1981, ch. 4). The leading artefact is of order a^2, the symmetric Trotter error.

Angles are lifted: theta_i = x_i + P W i / N with x periodic, P the period and W the winding number. Summing over all
lifts gives each link the heat kernel of the circle, so that a free rotor has no lattice artefact at all.
"""

from dataclasses import dataclass

from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import RequestError

SMALLEST = 3  # two sites would count each link twice


@dataclass(frozen=True, slots=True)
class LatticeAction:
    """The turned action with its geometry: `sites` points, `spacing` apart [time], periodic."""

    euclidean: EuclideanAction
    sites: int
    spacing: float

    @property
    def beta(self) -> float:
        """Extent in imaginary time, the inverse temperature [time]."""
        return self.sites * self.spacing

    @property
    def components(self) -> int:
        return len(self.euclidean.variables)

    @property
    def angles(self) -> tuple[int, ...]:
        """Indices of the variables that live on a circle."""
        return tuple(i for i, period in enumerate(self.euclidean.periods) if period is not None)

    @property
    def is_complex(self) -> bool:
        return any(a.terms for a in self.euclidean.drift)


def discretise(euclidean: EuclideanAction, sites: int, spacing: float) -> LatticeAction:
    """Put a turned action on a periodic lattice.

    Raises RequestError for fewer than three sites (links would be doubled) or a spacing that is not positive.
    """
    if sites < SMALLEST:
        raise RequestError(f"a periodic path needs at least {SMALLEST} sites, got {sites}: two sites double each link")
    if not spacing > 0 or spacing == float("inf"):
        raise RequestError(f"the spacing a must be positive and finite, got {spacing}")
    return LatticeAction(euclidean, sites, spacing)
