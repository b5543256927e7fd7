"""One Monte Carlo run while it runs: evaluates what there is, tells the watcher, and turns the chain into a Run."""

from __future__ import annotations

import math
import time as clock
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Symbol
from quarterturn.actions.measurements import measurement_label
from quarterturn.actions.model import Action, Measurement
from quarterturn.errors import RequestError
from quarterturn.estimates.checks import warnings as error_warnings
from quarterturn.estimates.estimate import GOOD, UNRESOLVED, CurveEstimate, Estimate
from quarterturn.estimates.series import Samples
from quarterturn.records.canonical import record_name
from quarterturn.runs import doubts
from quarterturn.runs.evaluation import Evaluator, is_odd
from quarterturn.runs.exact import ExactColumn
from quarterturn.runs.layout import Layout
from quarterturn.runs.progress import Progress, Watcher
from quarterturn.runs.recording import sample_record
from quarterturn.runs.run import Run
from quarterturn.runs.settings import Goal, Settings
from quarterturn.runs.unit_words import facts as unit_facts
from quarterturn.runs.unit_words import step
from quarterturn.sampling.driver import Chain
from quarterturn.sampling.tuning import Recipe

Floats = NDArray[np.float64]
FEWEST_DRAWS = 64  # per chain, before a precision can count as met
APART = 1e-6  # probability of the scatter of the chains below which there is no error to rely on
REASONS = {
    "satisfied": "target error reached",
    "draws": "number of draws reached",
    "time": "time is up",
    "interrupted": "interrupted",
}


def _doubted(e: Estimate) -> Estimate:
    """An estimate from chains that plainly disagree has no error to rely on."""
    if e.state == GOOD and e.replica_q is not None and e.replica_q < APART:
        return replace(e, state=UNRESOLVED, remark=f"the chains disagree (probability {e.replica_q:.0e})")
    return e


@dataclass
class Session:
    """One run while it runs: evaluates what there is, and turns the finished chain into a Run."""

    action: Action
    settings: Settings
    layout: Layout
    goal: Goal
    exact: ExactColumn
    progress: Watcher | None
    began: float
    busy: float = 0.0  # seconds spent evaluating, kept a small share of the run
    met: bool = False
    basins: doubts.Basins | None = None
    functionals: dict[str, Estimate] = field(default_factory=dict)
    gap: float | None = None  # the lowest excitation, as far as it is known

    # --- before ---------------------------------------------------------------------------------------------
    def check_labels(self) -> None:
        """Targets for named numbers must name numbers."""
        labels = [m.label for m in self.action.measurements if m.kind != "curve"]
        for label in self.goal.precision:
            if label and measurement_label(label) not in labels:
                raise RequestError(f"no number is measured under {label!r}; there is {', '.join(labels)}")

    def edges(self) -> tuple[Floats, ...]:
        """Values of the whitened variables that part sectors."""
        euclidean = self.action.euclidean
        self.basins = doubts.find_basins(euclidean, self.settings.couplings, self.exact.transfer)
        if self.basins is not None:
            scalars: dict[Atom, float] = {Symbol("coupling", n): v for n, v in self.settings.couplings.items()}
            mass = float(euclidean.mass[0][0].evaluate(scalars, np))
            return (self.basins.edges * np.sqrt(mass),)
        flipped = np.any(np.array(euclidean.symmetries).reshape(-1, len(euclidean.variables)) < 0, axis=0)
        angles = [p is not None for p in euclidean.periods]
        return tuple(np.zeros(1) if f and not a else np.zeros(0) for f, a in zip(flipped, angles, strict=True))

    def constants(self) -> dict[Atom, float]:
        values: dict[Atom, float] = {Symbol("coupling", n): v for n, v in self.settings.couplings.items()}
        beta = self.settings.beta
        for name, value in (("a", self.settings.spacing), ("beta", beta), ("vol", beta)):
            values[Symbol("geometry", name)] = value
        return values

    # --- during ---------------------------------------------------------------------------------------------
    def evaluator(self, chain: Chain) -> Evaluator:
        numbers = Samples(
            chain.numbers.values(), chain.numbers.block, chain.numbers.variance(), self.layout.number_names
        )
        curves = Samples(chain.curves.values(), chain.curves.block, chain.curves.variance(), self.layout.curve_names)
        return Evaluator(
            self.layout,
            numbers,
            curves,
            self.constants(),
            self.action.euclidean,
            self.settings.beta,
            self.settings.spacing,
            self.settings.spacings,
        )

    def satisfied(self, chain: Chain) -> bool:
        """Whether the target is met; also tells the watcher. Asked a few times a second, answers cheaply."""
        now = clock.monotonic()
        if chain.draws < FEWEST_DRAWS or self.busy > 0.25 * (now - self.began):
            return False
        evaluator = self.evaluator(chain)
        numbers = self.numbers(evaluator, gaps=True) if self.goal.precision else self.numbers(evaluator, gaps=False)
        shares = {label: self.share(label, e) for label, e in numbers.items()}
        left = [s for s in shares.values() if s is not None]
        self.met = bool(self.goal.precision) and all(s >= 1 for s in left)
        self.busy += clock.monotonic() - now
        rows = tuple((label, str(e), shares[label]) for label, e in numbers.items())
        worst = min(left, default=None)
        remaining = None if not worst or worst >= 1 else (now - self.began) * (1 / worst - 1)
        if self.goal.seconds is not None:
            rest = max(0.0, self.goal.seconds - (now - self.began))
            remaining = rest if remaining is None else min(remaining, rest)
        self.say("drawing", chain, rows, remaining)
        return self.met

    def share(self, label: str, e: Estimate) -> float | None:
        """Share of the needed draws that there are, (target / error)^2; None where no target applies."""
        precision = next(
            (p for name, p in self.goal.precision.items() if name == "" or measurement_label(name) == label), None
        )
        if precision is None or e.error is None or e.error == 0:
            return None
        if e.state != GOOD:
            return 0.0
        if precision.relative and self.vanishes(label):
            return None
        return (precision.allowed(e.value) / e.error) ** 2

    def vanishes(self, label: str) -> bool:
        """Whether a symmetry makes the number zero, so that a relative error means nothing."""
        m = next(m for m in self.action.measurements if m.label == label)
        if m.kind != "number" or len(m.brackets) != 1 or m.brackets[0].over != "sites":
            return False
        product = m.brackets[0].groups[0][1]
        for _, factor in m.brackets[0].groups[1:]:
            product = product * factor
        return is_odd(product, self.action.euclidean)

    def say(
        self,
        stage: str,
        chain: Chain | None,
        rows: tuple[tuple[str, str, float | None], ...] = (),
        remaining: float | None = None,
    ) -> None:
        if self.progress is None:
            return
        draws, chains = (chain.draws, chain.program.chains) if chain else (0, 0)
        self.progress(Progress(stage, clock.monotonic() - self.began, draws, chains, rows, remaining))

    # --- after ----------------------------------------------------------------------------------------------
    def numbers(self, evaluator: Evaluator, gaps: bool) -> dict[str, Estimate]:
        found: dict[str, Estimate] = {}
        for m in self.action.measurements:
            if m.kind in ("number", "xi2"):
                found[m.label] = self.number(evaluator, m)
            elif m.kind == "gap" and gaps:
                found[m.label] = evaluator.gap(m).estimate
        return found

    def number(self, evaluator: Evaluator, m: Measurement) -> Estimate:
        """A number that is no gap."""
        return evaluator.number(m)

    def finish(self, chain: Chain, seed: int) -> Run:
        """Final estimates, exact column, warnings, record."""
        if chain.cut_in_warm_up:
            raise RequestError(
                "the run was interrupted during warm-up, before anything was measured: nothing to report"
            )
        evaluator, constants = self.evaluator(chain), self.constants()
        gaps = {m.label: evaluator.gap(m) for m in self.action.measurements if m.kind == "gap"}
        self.gap = doubts.lowest_gap(self.exact.transfer, [result.estimate for result in gaps.values()])
        numbers: dict[str, Estimate] = {}
        phase = evaluator.phase()
        if phase is not None:
            numbers["average phase"] = phase.with_exact(self.exact.average_phase())
        curves: dict[str, CurveEstimate] = {}
        for m in self.action.measurements:
            if m.kind == "curve":
                exact = self.exact.curve(m, constants, self.layout.steps)
                curves[m.label] = replace(evaluator.curve(m), exact=exact, quantity=m.quantity, step=step(self.action))
                continue
            if m.kind == "functional":
                numbers[m.label] = self.functionals[m.label]
                continue
            e = gaps[m.label].estimate if m.kind == "gap" else self.number(evaluator, m)
            numbers[m.label] = replace(e.with_exact(self.exact.number(m, constants)), quantity=m.quantity)
        warnings, numbers = self.judge(chain, evaluator, numbers, self.action.measurements)
        if self.met or not self.goal.precision:
            met = True
        else:
            shares = [self.share(label, e) for label, e in numbers.items() if label != "average phase"]
            met = all(s is None or s >= 1 for s in shares)
        stop = "satisfied" if met and self.goal.precision and chain.stop == "satisfied" else chain.stop
        chain.stop = stop
        record = self.record(chain, seed, numbers, curves, warnings)
        return Run(
            self.action,
            self.settings,
            numbers,
            curves,
            gaps,
            warnings,
            self.facts(chain),
            stop,
            met and all(e.state == GOOD for e in numbers.values()),
            record,
            record_name(record),
        )

    def record(
        self,
        chain: Chain,
        seed: int,
        numbers: Mapping[str, Estimate],
        curves: Mapping[str, CurveEstimate],
        warnings: tuple[str, ...],
    ) -> dict[str, Any]:
        """The record of the run."""
        return sample_record(self.action, self.settings, chain, seed, numbers, curves, warnings)

    def judge(
        self, chain: Chain, evaluator: Evaluator, numbers: Mapping[str, Estimate], measurements: Sequence[Measurement]
    ) -> tuple[tuple[str, ...], dict[str, Estimate]]:
        """All warnings, and the numbers with the state they deserve."""
        stuck = doubts.stuck_sectors(chain, self.action.euclidean, self.basins, self.exact.transfer)
        judged = dict(numbers)
        judged = {label: _doubted(e) for label, e in judged.items()}
        if stuck:
            judged = {
                label: replace(e, state=UNRESOLVED, remark=e.remark or "the chains are stuck") if e.state == GOOD else e
                for label, e in judged.items()
            }
        primary = {
            k: e
            for k, e in numbers.items()
            if e.gradient is not None and len(e.gradient) == evaluator.numbers.values.shape[2]
        }
        words = [
            *(("cut short: the run was interrupted and holds what there was",) if chain.stop == "interrupted" else ()),
            *stuck,
            *error_warnings(evaluator.numbers, list(primary.values()), list(primary)),
            *doubts.energy_violation(chain),
            *doubts.contradictions(list(judged), list(judged.values())),
            *doubts.contamination(self.settings.beta, self.gap),
            *self.artefacts(measurements, judged),
        ]
        if self.layout.is_complex:
            phase = numbers["average phase"]
            words.insert(0, f"the weight is complex: the numbers are reweighted by a phase whose average is {phase}")
        return tuple(words), judged

    def vacuum(self) -> tuple[tuple[str, str], ...]:
        """How far the lattice is from zero temperature."""
        if self.gap is None:
            return (("temperature", "the gap isn't known here: measure gap(…) for the size of exp(-beta gap)"),)
        whence = "of the transfer matrix" if self.exact.transfer is not None else "measured"
        weight = math.exp(-self.settings.beta * self.gap)
        return (("temperature", f"exp(-beta gap) = {weight:.2g}, with the lowest gap {self.gap:.4g} {whence}"),)

    def artefacts(self, measurements: Sequence[Measurement], numbers: Mapping[str, Estimate]) -> tuple[str, ...]:
        """What the spacing does to the numbers, where the continuum is known."""
        couplings, beta = self.settings.couplings, self.settings.beta
        return doubts.artefacts(measurements, numbers, self.action.euclidean, couplings, beta)

    def facts(self, chain: Chain) -> tuple[tuple[str, str], ...]:
        """The method, line by line."""
        recipe = chain.recipe
        assert isinstance(recipe, Recipe)
        moves = ", ".join(f"{name} {rate:.0%}" for name, rate in (chain.acceptance or {}).items())
        omega = ", ".join(f"{np.sqrt(w2):.4g}" for w2 in recipe.frequency_squared)
        mean, error = chain.exp_change
        facts = [
            (
                "lattice",
                f"{self.settings.sites} sites, a = {self.settings.spacing:g}, beta = {self.settings.beta:g}, periodic",
            ),
            ("chains", f"{chain.program.chains} chains of {chain.draws} draws after {chain.warm_up} of warm-up"),
            (
                "trajectory",
                f"{recipe.integrator}, {recipe.kicks} kicks over {recipe.angle:.3g} rad, reference frequency {omega}",
            ),
            ("moves accepted", moves),
            ("<exp(-dH)>", f"{mean:.5f} ± {error:.5f}"),
            ("stopped", f"{REASONS[chain.stop]}, {chain.seconds:.1f} s"),
        ]
        facts += [*self.vacuum(), *unit_facts(self.action)]
        if self.exact.reason:
            facts.append(("exact column", self.exact.reason))
        return tuple(facts)
