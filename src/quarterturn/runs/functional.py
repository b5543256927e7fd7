"""log Z[J] relative to J = 0, by thermodynamic integration over the strength of the source.

With the source scaled to s J, d log Z/ds = -<dS/ds>, which is sampled at the nodes of a Gauss-Kronrod rule and
integrated from 0 to 1 (Kirkwood, J. Chem. Phys. 3 (1935) 300, eq. (17)). The three Gauss nodes inside the seven of the
rule give the error of the quadrature (Kronrod, Nodes and Weights of Quadrature Formulas, 1965; constants as in
QUADPACK). For a source linear in the action the second derivative in s at 0 is the two-point function, and so on.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from quarterturn.actions.expression import Expression, Symbol
from quarterturn.actions.model import Action, Bracket, Measurement
from quarterturn.errors import EstimateError
from quarterturn.estimates.estimate import GOOD, UNRESOLVED, Estimate, withheld
from quarterturn.estimates.gamma import estimate
from quarterturn.estimates.series import Samples
from quarterturn.sampling.driver import Chain, Request

HALF_NODES = (0.960491268708020283423507092629080, 0.774596669241483377035853079956480,
              0.434243749346802558002071502844628)  # fmt: skip
HALF_WEIGHTS = (0.104656226026467265193823857192073, 0.268488089868333440728569280266710,
                0.401397414775962222905051818618432)  # fmt: skip
MIDDLE_WEIGHT = 0.450916538658474142345110087045571
NODES = (1 - np.array([*HALF_NODES, 0.0, *(-x for x in HALF_NODES[::-1])])) / 2  # on [0, 1], ascending
WEIGHTS = np.array([*HALF_WEIGHTS, MIDDLE_WEIGHT, *HALF_WEIGHTS[::-1]]) / 2
GAUSS = {1: 5 / 18, 3: 8 / 18, 5: 5 / 18}  # weights of the embedded three-point rule, by node
WORK = Bracket("work of the source", (((0, Expression.of(Symbol("observable", "work")))),), "path")  # type: ignore[arg-type]
FEWEST_DRAWS = 256
SHARE = 4  # the draws of a node are those of the main run over this


@dataclass(frozen=True)
class Ladder:
    """What was sampled at each node: d log Z/ds with its error."""

    estimates: tuple[Estimate, ...]
    draws: int

    @property
    def value(self) -> float:
        return float(sum(w * e.value for w, e in zip(WEIGHTS, self.estimates, strict=True)))

    @property
    def error(self) -> float:
        return float(np.sqrt(sum((w * (e.error or 0.0)) ** 2 for w, e in zip(WEIGHTS, self.estimates, strict=True))))

    @property
    def quadrature_error(self) -> float:
        """Distance from the embedded rule, and the statistical error of that distance, which it can't resolve."""
        low = sum(w * self.estimates[i].value for i, w in GAUSS.items())
        return float(abs(self.value - low))

    @property
    def quadrature_noise(self) -> float:
        """One sigma of the distance between the two rules, from the scatter of the nodes alone."""
        weights = WEIGHTS - np.array([GAUSS.get(i, 0.0) for i in range(len(WEIGHTS))])
        return float(np.sqrt(sum((w * (e.error or 0.0)) ** 2 for w, e in zip(weights, self.estimates, strict=True))))


def functionals(action: Action) -> tuple[Measurement, ...]:
    """The measurements that ask for log Z[J]."""
    return tuple(m for m in action.measurements if m.kind == "functional")


def node_draws(draws: int) -> int:
    """Draws per chain at each node, from those of the main run; a rerun of the record gets the same."""
    return max(FEWEST_DRAWS, draws // SHARE)


def climb(drawn: Callable[[Request], Chain], request: Request) -> Ladder | None:
    """Sample `WORK` at every node of the ladder. None where it was interrupted.

    Raises EstimateError where the samples of a node do not support a mean.
    """
    found = []
    for i, s in enumerate(NODES):
        chain = drawn(Request(request.seed + 7919 * (i + 1), request.draws, None, float(s)))
        if chain.stop == "interrupted" or chain.cut_in_warm_up:
            return None
        numbers = Samples(chain.numbers.values(), chain.numbers.block, chain.numbers.variance(), (WORK.label,))
        e = estimate(numbers, int(chain.program.observables.is_complex))
        scale = 1 / float(s)
        found.append(
            Estimate(e.value * scale, None if e.error is None else e.error * scale, tau=e.tau, state=e.state,
                     remark=e.remark)
        )  # fmt: skip
    return Ladder(tuple(found), request.draws or 0)


def log_z(ladder: Ladder | None, reason: str = "") -> Estimate:
    """The number with its error; unresolved where the nodes are, or where the rule has not converged."""
    if ladder is None:
        return withheld(reason or "interrupted before the ladder of source strengths was complete")
    for s, e in zip(NODES, ladder.estimates, strict=True):
        if e.state != GOOD:
            words = f"unresolved at the source strength {s:.2f}: {e.remark}"
            return Estimate(ladder.value, ladder.error, state=UNRESOLVED, remark=words)
    off, noise = ladder.quadrature_error, ladder.quadrature_noise
    if off > 4 * noise + 1e-12 and off > 4 * ladder.error:
        words = f"the integral over the strength of the source has not converged: its rules differ by {off:.2g}"
        return Estimate(ladder.value, ladder.error, state=UNRESOLVED, remark=words)
    return Estimate(ladder.value, ladder.error)


def measured(drawn: Callable[[Request], Chain], request: Request) -> Estimate:
    """log Z[J], with all sources scaled together; `drawn` samples `WORK` at the strength of a request."""
    try:
        return log_z(climb(drawn, request))
    except EstimateError as reason:
        return log_z(None, reason.message)
