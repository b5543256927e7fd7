"""`sample` of fields on space, lattice actions and unit vectors: settings, memory, session, record."""

from __future__ import annotations

import math
import os
import threading
import time as clock
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Symbol
from quarterturn.actions.model import Action, Edge, Measurement
from quarterturn.compiled.field_observables import FieldObservables, field_places
from quarterturn.compiled.field_target import FieldTarget
from quarterturn.errors import RequestError
from quarterturn.estimates.estimate import CurveEstimate, Estimate
from quarterturn.lattice.field import put_on_lattice
from quarterturn.runs import doubts
from quarterturn.runs.evaluation import Evaluator
from quarterturn.runs.exact import ExactColumn
from quarterturn.runs.functional import WORK, functionals, measured, node_draws
from quarterturn.runs.interruption import stoppable
from quarterturn.runs.layout import Layout, lay_out
from quarterturn.runs.progress import Watcher
from quarterturn.runs.recording import field_record
from quarterturn.runs.run import Run
from quarterturn.runs.session import REASONS, Session
from quarterturn.runs.settings import Goal, Settings, examined, split_words
from quarterturn.runs.unit_words import facts as unit_facts
from quarterturn.sampling.driver import Chain, Request
from quarterturn.sampling.fields.driver import run_fields
from quarterturn.sampling.fields.program import default_field_chains, field_program_for
from quarterturn.sampling.fields.warm_up import FieldRecipe

Floats = NDArray[np.float64]
MOST_CHAINS = 4096
COPIES = 14  # arrays of the size of all chains that a trajectory holds at once, counted generously
SHARE_OF_MEMORY = 0.7
FEWEST_EFFECTIVE = 100


def needs_fields(action: Action) -> bool:
    """Whether an action is sampled in real space: fields, lattice actions, unit vectors."""
    euclidean = action.euclidean
    return bool(euclidean.dimension > 1 or euclidean.links or euclidean.spheres)


class NoExact(ExactColumn):
    """Fields have no exact column."""

    def __init__(self) -> None:
        self.transfer, self.reason = None, ""

    def number(self, measurement: Measurement, constants: Mapping[Atom, float]) -> float | None:
        return None

    def curve(self, measurement: Measurement, constants: Mapping[Atom, float], steps: int) -> Floats | None:
        return None

    def average_phase(self) -> float | None:
        return None


def field_settings(action: Action, keywords: Mapping[str, Any]) -> Settings:
    """Couplings and lattice of one run of fields.

    `sites` is a whole number for every direction or one number each; `a` likewise; `beta` sets the spacing in time.
    Raises RequestError for an unknown or unusable keyword, ActionError where the integral diverges.
    """
    couplings, lattice = split_words(action, keywords)
    dimension, given = action.euclidean.dimension, action.geometry
    extents = _every("sites", lattice.get("sites"), given.extents if given else None, dimension)
    spacings = _every("a", lattice.get("a"), given.spacings if given else None, dimension)
    if extents is None:
        raise RequestError(f"{action.name} declares no lattice: add a line such as 'lattice 32 x 32', or give sites")
    if any(n != int(n) or n < 1 for n in extents):
        raise RequestError(f"sites must be whole numbers, got {' x '.join(f'{n:g}' for n in extents)}")
    spacings = spacings or (1.0,) * dimension
    if "beta" in lattice:
        beta = _one("beta", lattice["beta"])
        if "a" in lattice:
            raise RequestError("a and beta together say one thing twice: beta = sites a in time")
        spacings = (beta / extents[0], *spacings[1:])
    if not all(a > 0 for a in spacings):
        raise RequestError(f"a must be positive, got {', '.join(f'{a:g}' for a in spacings)}")
    whole = tuple(int(n) for n in extents)
    return Settings(couplings, whole[0], spacings[0], examined(action, couplings), whole, spacings)


def _one(word: str, value: Any) -> float:
    try:
        number = float(value)
    except (TypeError, ValueError):
        raise RequestError(f"{word} must be a number, got {value!r}") from None
    if not math.isfinite(number) or number <= 0:
        raise RequestError(f"{word} must be positive and finite, got {number:g}")
    return number


def _every(word: str, asked: Any, given: Sequence[float] | None, dimension: int) -> tuple[float, ...] | None:
    """One number for each direction."""
    if asked is None:
        return None if given is None else tuple(float(v) for v in given)
    if isinstance(asked, (list, tuple)):
        if len(asked) != dimension:
            raise RequestError(f"{word} has {len(asked)} entries, the fields have {dimension} coordinates")
        return tuple(_one(word, v) for v in asked)
    return (_one(word, asked),) * dimension


def sample_fields(
    action: Action,
    keywords: Mapping[str, Any],
    wanted: Goal,
    chains: int | None,
    seed: int,
    progress: Watcher | None,
    event: threading.Event,
) -> Run:
    """Sample fields. As `sample`, whose doors lead here."""
    settings = field_settings(action, keywords)
    edges: tuple[Edge, ...] = action.geometry.edges if action.geometry else ()
    target = FieldTarget(put_on_lattice(action.euclidean, settings.extents, edges), tuple(sorted(settings.couplings)))
    count = _chain_count(chains, target)
    _refuse_too_large(target, count)
    layout = lay_out(action.measurements, action.euclidean, settings.sites)
    _refuse_unavailable(action, layout, edges)
    observables = _observables(layout, target, settings.spacings)
    layout = replace(layout, directions=observables.directions, lengths=observables.lengths)
    program = field_program_for(target, observables, count)
    session = FieldSession(action, settings, layout, wanted, NoExact(), progress, clock.monotonic())
    session.check_labels()
    with stoppable(event):
        session.say("compiling" if program.compilations == 0 else "warming up", None)
        chain = run_fields(
            program, settings.couplings, settings.spacings, Request(seed, wanted.draws, wanted.seconds),
            session.basin_edges(), event.is_set, session.satisfied,
        )  # fmt: skip
        session.functionals = _functionals(session, target, chain, seed, event.is_set)
    return session.finish(chain, seed)


def _observables(layout: Layout, target: FieldTarget, spacings: tuple[float, ...]) -> FieldObservables:
    lattice = target.lattice
    places = tuple(
        field_places(b, lattice.euclidean.coordinates, spacings, lattice.extents) for b in (*layout.fixed, *layout.free)
    )
    return FieldObservables(target, layout.fixed, layout.free, places)


def _functionals(
    session: FieldSession, target: FieldTarget, chain: Chain, seed: int, interrupted: Callable[[], bool]
) -> dict[str, Estimate]:
    """log Z[J], sampled on a ladder of source strengths after the run itself."""
    wanted = functionals(session.action)
    if not wanted or chain.cut_in_warm_up:
        return {}
    session.say("climbing the ladder of source strengths", chain)
    here = ((0,) * target.dimension,)
    program = field_program_for(target, FieldObservables(target, (WORK,), (), (here,)), chain.program.chains)
    settings, edges = session.settings, session.basin_edges()

    def drawn(request: Request) -> Chain:
        return run_fields(program, settings.couplings, settings.spacings, request, edges, interrupted)

    e = measured(drawn, Request(seed, node_draws(chain.draws)))
    return {m.label: e for m in wanted}


def _chain_count(asked: int | None, target: FieldTarget) -> int:
    if asked is None:
        return default_field_chains(target.sites, target.components)
    if isinstance(asked, bool) or int(asked) != asked or not 2 <= asked <= MOST_CHAINS:
        raise RequestError(
            f"chains must be a whole number from 2 (so that replicas can be compared) to {MOST_CHAINS}, got {asked!r}"
        )
    return int(asked)


def _refuse_too_large(target: FieldTarget, chains: int) -> None:
    needed = 8.0 * COPIES * chains * target.components * target.sites
    try:
        there = float(os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES"))
    except (AttributeError, ValueError, OSError):
        return
    if needed > SHARE_OF_MEMORY * there:
        raise RequestError(
            f"{chains} chains of {target.sites} sites need some {needed / 2**30:.1f} GiB; this machine has "
            f"{there / 2**30:.1f} GiB: take fewer chains or a smaller lattice"
        )


def _refuse_unavailable(action: Action, layout: Layout, edges: tuple[Edge, ...]) -> None:
    if any(edge.kind != "periodic" for edge in edges):
        apart = [b for b in (*layout.fixed, *layout.free) if b.free or len(b.groups) > 1]
        if apart:
            raise RequestError(
                f"{apart[0].label}: functions of several points are averaged over translations, which these boundaries "
                "break; measure at one point, or make the lattice periodic"
            )
    energy = Symbol("observable", "energy")
    if any(energy in f.atoms() for b in layout.fixed for _, f in b.groups):
        raise RequestError("energy is available for paths; of fields on space measure a gap or <V(phi)>")


@dataclass
class FieldSession(Session):
    """One run of fields while it runs."""

    basins: doubts.Basins | None = field(default=None, init=False)

    def basin_edges(self) -> tuple[Floats, ...]:
        """Lattice means at zero part the sectors of variables that some sign symmetry reverses."""
        euclidean = self.action.euclidean
        flipped = np.any(np.array(euclidean.symmetries).reshape(-1, len(euclidean.variables)) < 0, axis=0)
        return tuple(np.zeros(1) if f else np.zeros(0) for f in flipped)

    def constants(self) -> dict[Atom, float]:
        values: dict[Atom, float] = {Symbol("coupling", n): v for n, v in self.settings.couplings.items()}
        lengths = [n * a for n, a in zip(self.settings.extents, self.settings.spacings, strict=True)]
        for name, value in (("a", self.settings.spacing), ("beta", lengths[0]), ("vol", math.prod(lengths))):
            values[Symbol("geometry", name)] = value
        return values

    def number(self, evaluator: Evaluator, m: Measurement) -> Estimate:
        if m.kind != "xi2":
            return evaluator.number(m)
        extent = max(self.settings.extents)
        return evaluator.correlation_length(m, extent, self.settings.spacings[self.settings.extents.index(extent)])

    def record(
        self,
        chain: Chain,
        seed: int,
        numbers: Mapping[str, Estimate],
        curves: Mapping[str, CurveEstimate],
        warnings: tuple[str, ...],
    ) -> dict[str, Any]:
        return field_record(self.action, self.settings, chain, seed, numbers, curves, warnings)

    def artefacts(self, measurements: Sequence[Measurement], numbers: Mapping[str, Estimate]) -> tuple[str, ...]:
        return ()

    def facts(self, chain: Chain) -> tuple[tuple[str, str], ...]:
        """The method, line by line."""
        recipe = chain.recipe
        assert isinstance(recipe, FieldRecipe)
        moves = ", ".join(f"{name} {rate:.0%}" for name, rate in (chain.acceptance or {}).items())
        mean, error = chain.exp_change
        edges = self.action.geometry.edges if self.action.geometry else ()
        kinds = ", ".join(edge.kind for edge in edges) or "periodic"
        spacings = ", ".join(f"{a:g}" for a in sorted(set(self.settings.spacings)))
        extents = " x ".join(map(str, self.settings.extents))
        return (
            ("lattice", f"{extents} sites, a = {spacings}, {kinds}"),
            ("chains", f"{chain.program.chains} chains of {chain.draws} draws after {chain.warm_up} of warm-up"),
            ("trajectory", f"minimum norm, {recipe.steps} steps of {recipe.step:.3g} on average"),
            ("moves accepted", moves),
            ("<exp(-dH)>", f"{mean:.5f} ± {error:.5f}"),
            ("stopped", f"{REASONS[chain.stop]}, {chain.seconds:.1f} s"),
            ("discretisation", self.discretisation()),
            *self.vacuum(),
            *unit_facts(self.action),
        )

    def discretisation(self) -> str:
        """What the links are, and the order of the leading lattice artefact."""
        euclidean = self.action.euclidean
        if euclidean.links:
            return "the lattice action as it was declared"
        if euclidean.dimension == 1 and euclidean.spheres:
            return "-n.n' on each link, leading artefact of order a: the sphere's measure is not corrected for"
        return "forward differences on each link, leading artefact of order a^2"
