"""`sample`: from a declared action to numbers with errors, an exact column, warnings and a record."""

from __future__ import annotations

import threading
import time as clock
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.model import Action
from quarterturn.compiled.observables import Observables
from quarterturn.compiled.target import Target
from quarterturn.errors import RequestError
from quarterturn.estimates.estimate import Estimate
from quarterturn.lattice.path import discretise
from quarterturn.runs.exact import ENERGY, ExactColumn
from quarterturn.runs.fields import needs_fields, sample_fields
from quarterturn.runs.functional import WORK, functionals, measured, node_draws
from quarterturn.runs.interruption import stoppable
from quarterturn.runs.layout import lay_out, observables
from quarterturn.runs.progress import Watcher
from quarterturn.runs.run import Run
from quarterturn.runs.session import Session
from quarterturn.runs.settings import goal, resolve
from quarterturn.sampling.driver import Chain, Request, run_chains
from quarterturn.sampling.program import default_chains, program_for

Floats = NDArray[np.float64]
FEWEST_DRAWS = 64  # per chain, before a precision can count as met
MOST_CHAINS = 4096
APART = 1e-6  # probability of the scatter of the chains below which there is no error to rely on


def sample(
    action: Action,
    *,
    error: Any = None,
    time: Any = None,
    draws: int | None = None,
    chains: int | None = None,
    seed: int = 1,
    progress: Watcher | None = None,
    stop: threading.Event | None = None,
    **keywords: float,
) -> Run:
    """Sample an action by Monte Carlo until a target error, a time or a number of draws, whichever is met first.

    Parameters
    ----------
    action
        From `quarterturn.action`.
    error
        Target for every measured number: "1%" (relative) or a number (absolute); or a mapping from labels to targets.
        Numbers that a symmetry makes zero are left out of a relative target. Default 1 %, with a minute of time.
    time
        Longest duration, warm-up included: seconds, "60s", "2 min".
    draws
        Number of draws per chain; a run cut by draws alone is repeated bit for bit from its seed.
    chains, seed
        Number of Markov chains (default by the length of the path) and seed of their generator.
    progress
        Called with a `Progress` a few times a second.
    stop
        Set it from another thread to end the run at the next safe point and keep what there is, as Ctrl-C does.
    **keywords
        Couplings of the action; `a`, `beta`, `sites` of the lattice.

    Returns
    -------
    Run
        Estimates by label, with the exact value at the same spacing for one path.

    Raises
    ------
    RequestError
        An unknown keyword, a value that can't be used, a time that is not on the lattice.
    ActionError
        A finding at these couplings makes the path integral diverge.
    """
    if needs_fields(action):
        return sample_fields(
            action, keywords, goal(error, time, draws), chains, int(seed), progress, stop or threading.Event()
        )
    settings = resolve(action, keywords)
    wanted = goal(error, time, draws)
    lattice = discretise(action.euclidean, settings.sites, settings.spacing)
    count = _chain_count(chains, lattice.sites, lattice.components)
    layout = lay_out(action.measurements, action.euclidean, settings.sites)
    target = Target(action.euclidean, settings.sites, tuple(sorted(settings.couplings)))
    program = program_for(target, observables(layout, target, settings.spacing), count)
    exact = ExactColumn(action.euclidean, settings.couplings, settings.sites, settings.spacing)
    session = Session(action, settings, layout, wanted, exact, progress, clock.monotonic())
    session.check_labels()
    _refuse_energy(action)
    event = stop or threading.Event()
    with stoppable(event):
        session.say("compiling" if program.compilations == 0 else "warming up", None)
        chain = run_chains(
            program,
            settings.couplings,
            settings.spacing,
            Request(int(seed), wanted.draws, wanted.seconds),
            session.edges(),
            event.is_set,
            session.satisfied,
        )
        session.functionals = _functionals(session, target, chain, int(seed), event.is_set)
    return session.finish(chain, int(seed))


def _functionals(
    session: Session, target: Target, chain: Chain, seed: int, interrupted: Callable[[], bool]
) -> dict[str, Estimate]:
    """log Z[J], sampled on a ladder of source strengths after the run itself."""
    wanted = functionals(session.action)
    if not wanted or chain.cut_in_warm_up:
        return {}
    session.say("climbing the ladder of source strengths", chain)
    settings = session.settings
    program = program_for(target, Observables(target, (WORK,), (), ((0,),)), chain.program.chains)
    edges = session.edges()

    def drawn(request: Request) -> Chain:
        return run_chains(program, settings.couplings, settings.spacing, request, edges, interrupted)

    e = measured(drawn, Request(seed, node_draws(chain.draws)))
    return {m.label: e.with_exact(session.exact.functional()) for m in wanted}


def _refuse_energy(action: Action) -> None:
    for m in action.measurements if action.euclidean.sources else ():
        if any(ENERGY in f.atoms() for b in m.brackets for _, f in b.groups):
            raise RequestError(f"{m.label}: a source depends on time, so that energy is not conserved; leave it out")


def _chain_count(asked: int | None, sites: int, components: int) -> int:
    if asked is None:
        return default_chains(sites, components)
    if isinstance(asked, bool) or int(asked) != asked or not 2 <= asked <= MOST_CHAINS:
        raise RequestError(
            f"chains must be a whole number from 2 (so that replicas can be compared) to {MOST_CHAINS}, got {asked!r}"
        )
    return int(asked)
