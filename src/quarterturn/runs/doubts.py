"""Reasons to disbelieve a run that its own error bars can't see, in words: sectors, energy violation, artefacts.

Each function returns sentences; a `Stuck` verdict also marks the numbers as unresolved.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.model import EuclideanAction, Measurement
from quarterturn.errors import SpectrumError
from quarterturn.estimates.estimate import GOOD, Estimate
from quarterturn.imaginary.binding import local_function, of_paths, one_path, problem_of
from quarterturn.imaginary.coupled_transfer import CoupledTransfer
from quarterturn.imaginary.solve import AnyTransfer, spectrum_of
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.transfer import Transfer
from quarterturn.runs.exact import ENERGY
from quarterturn.sampling.driver import Chain

Floats = NDArray[np.float64]
FEWEST_VISITS = 10
RELEVANT_WEIGHT = 1e-4  # share of the path in a basin, below which it may well not be visited
ENERGY_VIOLATION = 4.5  # standard errors of <exp(-dH)> - 1
LOW_ACCEPTANCE = 0.2
DISAGREEMENT = 5.0  # pull beyond which sampler and exact solution contradict each other
CONTAMINATION = 0.01  # exp(-beta gap) from which a vacuum quantity is said to be thermal


@dataclass(frozen=True)
class Basins:
    """Wells of a one-path potential on the line, parted by the tops of the barriers."""

    edges: Floats  # values of q at the tops, ascending
    weights: tuple[float, ...]  # exact share of the path in each basin

    @property
    def relevant(self) -> tuple[int, ...]:
        return tuple(i for i, w in enumerate(self.weights) if w > RELEVANT_WEIGHT)


def find_basins(
    euclidean: EuclideanAction, couplings: Mapping[str, float], transfer: AnyTransfer | None
) -> Basins | None:
    """Basins of one path on the line, or None where the action has another shape or no exact solution."""
    problem = one_path(euclidean, couplings)
    if problem is None or problem.period is not None or not isinstance(transfer, Transfer):
        return None
    grid = np.linspace(float(transfer.grid[0]), float(transfer.grid[-1]), 4001)
    v = problem.potential(grid)
    tops = np.flatnonzero((v[1:-1] > v[:-2]) & (v[1:-1] >= v[2:])) + 1
    edges = grid[tops]
    weights = []
    for low, high in zip([-np.inf, *edges], [*edges, np.inf], strict=True):
        weights.append(float(transfer.expectation(_indicator(low, high))))
    return Basins(edges, tuple(weights))


def _indicator(low: float, high: float) -> Callable[[Floats], Floats]:
    """1 in [low, high), 0 outside."""
    return lambda q: ((q >= low) & (q < high)).astype(np.float64)


def stuck_sectors(
    chain: Chain, euclidean: EuclideanAction, basins: Basins | None, transfer: AnyTransfer | None
) -> tuple[str, ...]:
    """Sectors that matter and were visited fewer than ten times."""
    counts = chain.sectors
    if counts is None:
        return ()
    words = []
    if basins is not None and len(basins.relevant) > 1:
        rare = [i for i in basins.relevant if counts.visits[0].get(i, 0) < FEWEST_VISITS]
        if rare:
            least = min(counts.visits[0].get(i, 0) for i in rare)
            words.append(
                f"the chains are stuck: of {len(basins.relevant)} wells that matter, {len(rare)} were entered "
                f"fewer than {FEWEST_VISITS} times (the least {least} times), so their weights are not sampled"
            )
    elif basins is None:
        names = [a.name for a in euclidean.variables]
        for c, visits in enumerate(counts.visits):
            if len(counts.edges[c]) and min(visits.get(0, 0), visits.get(1, 0)) < FEWEST_VISITS:
                words.append(
                    f"the sign of the mean of {names[c]} changed fewer than {FEWEST_VISITS} times: "
                    "its sectors are not sampled"
                )
    if of_paths(euclidean) and any(p is not None for p in euclidean.periods):
        changes = sum(counts.windings.values())
        expected = _winding_moment(euclidean, transfer)
        if changes < FEWEST_VISITS and (expected is None or expected > 1e-3):
            words.append(
                f"the winding number is frozen: it changed {changes} times in all chains, "
                "so its sectors are not sampled"
            )
    return tuple(words)


def _winding_moment(euclidean: EuclideanAction, transfer: AnyTransfer | None) -> float | None:
    """The largest <Q^2> of the angles, or None where it is not known."""
    if transfer is None:
        return None
    try:
        if isinstance(transfer, CoupledTransfer):
            angles = [i for i, p in enumerate(euclidean.periods) if p is not None]
            return max(float(transfer.winding_second_moment(i)) for i in angles)
        return float(transfer.winding_second_moment())
    except SpectrumError:
        return None


def energy_violation(chain: Chain) -> tuple[str, ...]:
    """The integrator against its own identity <exp(-dH)> = 1 (Creutz, Phys. Rev. D 38 (1988) 1228)."""
    mean, error = chain.exp_change
    words = []
    if chain.nonfinite:
        share = chain.nonfinite / (chain.draws * chain.program.chains)
        words.append(
            f"{share:.1%} of the trajectories met an action or a force that is not a finite number and were rejected, "
            "as at a wall; the energy violation can't be tested then"
        )
    elif error > 0 and abs(mean - 1) > ENERGY_VIOLATION * error:
        words.append(
            f"the energy violation test fails: <exp(-dH)> = {mean:.4f}, "
            f"{abs(mean - 1) / error:.1f} standard errors from 1"
        )
    rate = next(iter((chain.acceptance or {}).values()), 1.0)
    if rate < LOW_ACCEPTANCE:
        words.append(f"only {rate:.0%} of the trajectories are accepted: the force may be singular or not a number")
    return tuple(words)


def contradictions(labels: Sequence[str], estimates: Sequence[Estimate]) -> tuple[str, ...]:
    """Numbers that the exact solution at the same spacing contradicts."""
    words = []
    for label, e in zip(labels, estimates, strict=True):
        if e.pull is not None and abs(e.pull) > DISAGREEMENT:
            words.append(f"{label} lies {abs(e.pull):.1f} standard errors from the exact value at the same spacing")
    return tuple(words)


def lowest_gap(transfer: AnyTransfer | None, measured: Sequence[Estimate]) -> float | None:
    """The lowest excitation: from the transfer matrix, else the smallest gap that was measured, else None."""
    if transfer is not None and len(transfer.energies) > 1:
        return max(float(transfer.energies[1] - transfer.energies[0]), 0.0)
    return min((e.value for e in measured if e.state == GOOD and e.value > 0), default=None)


def contamination(beta: float, gap: float | None) -> tuple[str, ...]:
    """Thermal admixture to vacuum quantities."""
    if gap is None:
        return ()
    weight = math.exp(-beta * gap)
    if weight < CONTAMINATION:
        return ()
    return (
        f"beta = {beta:g} is short against the lowest gap {gap:.3g}: exp(-beta gap) = {weight:.2g}, "
        "so averages are thermal, not those of the vacuum",
    )


def artefacts(
    measurements: Sequence[Measurement],
    estimates: Mapping[str, Estimate],
    euclidean: EuclideanAction,
    couplings: Mapping[str, float],
    beta: float,
) -> tuple[str, ...]:
    """Numbers whose distance from the continuum is larger than their statistical error."""
    try:
        spectrum = spectrum_of(problem_of(euclidean, couplings), 6)
    except SpectrumError:
        return ()
    larger = []
    for m in measurements:
        e = estimates.get(m.label)
        if e is None or e.exact is None or not e.error or e.state != "good":
            continue
        continuum = _continuum(m, spectrum, euclidean, couplings, beta)
        if continuum is not None and abs(e.exact - continuum) > e.error:
            larger.append(f"{m.label} ({e.exact - continuum:+.2g})")
    if not larger:
        return ()
    return (
        "the lattice artefact exceeds the statistical error, lattice minus continuum at this spacing: "
        + ", ".join(larger),
    )


def _continuum(
    m: Measurement, spectrum: Spectrum, euclidean: EuclideanAction, couplings: Mapping[str, float], beta: float
) -> float | None:
    """The same number without a lattice, for site averages, the energy and simple gaps."""
    try:
        if m.kind != "number" or len(m.brackets) != 1 or len(m.brackets[0].groups) != 1 or len(m.formula.terms) != 1:
            return None
        bracket = m.brackets[0]
        expression = bracket.groups[0][1]
        if bracket.over == "sites":
            return float(spectrum.expectation(local_function(expression, euclidean, couplings), beta))
        if expression.symbols == {ENERGY}:
            return float(spectrum.energy(beta))
    except SpectrumError:
        return None
    return None
