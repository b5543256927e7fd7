"""Ratios against baselines, side by side on one core: `python -m tests.benchmarks [quick]`.

Contenders take turns in interleaved rounds, so that load on the machine strikes all of them; medians and the spread
of the rounds are printed next to the goals. Everybody's effective samples are counted by the same estimator, and nobody's tuning
is counted: the C chains take the best of a grid of steps.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

CORES = {min(os.sched_getaffinity(0))} if hasattr(os, "sched_setaffinity") else set()
if CORES:
    os.sched_setaffinity(0, CORES)  # before JAX counts the cores

import numpy as np  # noqa: E402

from . import ours  # noqa: E402
from .baselines import CompiledChains, Floats, PathProblem, compiled_chains, numpy_hamiltonian  # noqa: E402
from .efficiency import autocorrelation_time, effective_samples  # noqa: E402

BETA = 20.0
QUARTIC = PathProblem("quartic path, N = 200", 200, BETA / 200, 0.5, 1.0)
FINE = PathProblem("quartic path, N = 1600", 1600, BETA / 1600, 0.5, 1.0)
WELLS = PathProblem("double well (q^2 - 2)^2, N = 200", 200, BETA / 200, -4.0, 1.0)
NAMES = ("q", "q^2")
Round = Callable[[int], tuple[Floats, float]]  # seed -> series (chains, draws, 2) and its seconds


@dataclass
class Contender:
    """One way to sample a problem, and what its rounds gave."""

    name: str
    play: Round
    rounds: list[tuple[Floats, float]]

    def rates(self, column: int) -> Floats:
        """Effective samples per second of each round; the autocorrelation time is that of all rounds together."""
        series = np.concatenate([s[..., column] for s, _ in self.rounds])
        tau = autocorrelation_time(series)
        return np.array([s[..., column].size / (2 * tau) / seconds for s, seconds in self.rounds])

    def tau(self, column: int) -> float:
        return autocorrelation_time(np.concatenate([s[..., column] for s, _ in self.rounds]))


def timed(call: Callable[[], tuple[Floats, float]]) -> tuple[Floats, float]:
    """Series as (chains, draws, 2) and seconds of a baseline."""
    began = time.perf_counter()
    series, _ = call()
    seconds = time.perf_counter() - began
    return (series[None] if series.ndim == 2 else series.transpose(1, 0, 2)), seconds


def contenders(problem: PathProblem, compiled: CompiledChains | None, seconds: float, column: int) -> list[Contender]:
    """Everybody on one problem, each tuned for a column and set to rounds of about so many seconds."""
    program = ours.program(problem.sites)
    ours.run(program, problem, 16, 1)
    speed = ours.drawn(ours.run(program, problem, 160, 1))[1] / 160
    found = [
        Contender("quarterturn", lambda s: ours.drawn(ours.run(program, problem, _draws(seconds, speed, 1024), s)), [])
    ]
    rng = np.random.default_rng(1)
    paths = 0.3 * rng.standard_normal((16, problem.sites))
    steps = _best([(e, n) for e in _steps(problem) for n in (4, 8, 16)], _numpy_trial(problem, paths, rng), column)
    cost = timed(lambda: numpy_hamiltonian(problem, paths, *steps, 10, rng))[1] / 10
    count = _draws(seconds, cost, 10**6)
    found.append(
        Contender("NumPy HMC", lambda s: timed(lambda: numpy_hamiltonian(problem, paths, *steps, count, rng)), [])
    )
    if compiled is not None:
        found += _compiled_contenders(problem, compiled, seconds, column)
    return found


def _numpy_trial(problem: PathProblem, paths: Floats, rng: np.random.Generator) -> Callable[..., tuple[Floats, float]]:
    return lambda e, n: timed(lambda: numpy_hamiltonian(problem, paths, e, n, 60, rng))


def _compiled_contenders(problem: PathProblem, c: CompiledChains, seconds: float, column: int) -> list[Contender]:
    q = 0.3 * np.random.default_rng(2).standard_normal(problem.sites)
    c.hamiltonian(problem, q, _steps(problem)[0], 8, 2000, 1)
    widths = [(f * np.sqrt(problem.spacing),) for f in (1.0, 1.5, 2.0, 2.5, 3.0)]
    (width,) = _best(
        widths, lambda w: timed(lambda: c.metropolis(problem, q, w, 20_000, 3)), column, by_acceptance=True
    )
    shapes = [(e, n) for e in _steps(problem) for n in (4, 6, 8, 12, 16, 24, 32, 64)]
    step, steps = _best(shapes, lambda e, n: timed(lambda: c.hamiltonian(problem, q, e, n, 4000, 4)), column)
    sweep = timed(lambda: c.metropolis(problem, q, width, 2000, 5))[1] / 2000
    trajectory = timed(lambda: c.hamiltonian(problem, q, step, steps, 2000, 6))[1] / 2000
    return [
        Contender(
            "C Metropolis",
            lambda s: timed(lambda: c.metropolis(problem, q, width, _draws(seconds, sweep, 10**7), s)),
            [],
        ),
        Contender(
            "C HMC",
            lambda s: timed(lambda: c.hamiltonian(problem, q, step, steps, _draws(seconds, trajectory, 10**7), s)),
            [],
        ),
    ]


def _steps(problem: PathProblem) -> list[float]:
    """Leapfrog steps in units of the stiffest mode's period, 2 / sqrt(4/a + …)."""
    stiffest = 2 / np.sqrt(4 / problem.spacing + problem.spacing * 12)
    return [f * stiffest for f in (0.5, 0.65, 0.8, 0.9)]


def _draws(seconds: float, cost: float, most: int) -> int:
    return int(min(most, max(16, seconds / cost)))


def _best(
    candidates: list[Any], trial: Callable[..., tuple[Floats, float]], column: int, by_acceptance: bool = False
) -> Any:
    """The candidate with the most effective samples per second in a short trial."""
    del by_acceptance

    def worth(candidate: Any) -> float:
        series, seconds = trial(*candidate)
        values = series[:, series.shape[1] // 10 :, column]
        return effective_samples(values) / seconds if np.ptp(values) > 0 else 0.0

    return max(candidates, key=worth)


def compare(
    problem: PathProblem, compiled: CompiledChains | None, rounds: int, seconds: float, goals: dict[Any, str]
) -> float:
    """Play the rounds, print rates and ratios; returns our autocorrelation time of q^2."""
    players = contenders(problem, compiled, seconds, 1)
    for number in range(rounds):
        for player in players:
            player.rounds.append(player.play(100 + number))
    print(f"\n{problem.name}, beta = {BETA:g}: effective samples per second, {rounds} interleaved rounds")
    us = players[0]
    for column, name in enumerate(NAMES):
        if not any(key[1] == name for key in goals):
            continue
        mine = us.rates(column)
        print(f"  {name}: quarterturn {np.median(mine):,.0f} (tau {us.tau(column):.2f})")
        for other in players[1:]:
            theirs = other.rates(column)
            ratios = mine / theirs
            goal = goals.get((other.name, name))
            print(
                f"    against {other.name:12s} {np.median(theirs):>10,.1f} (tau {other.tau(column):,.1f}):  "
                f"{np.median(ratios):,.4g}x  [{ratios.min():,.4g} to {ratios.max():,.4g}]"
                + (f"   goal {goal}" if goal else "")
            )
    return us.tau(1)


def levels() -> None:
    """Twenty levels of the quartic oscillator against the sparse eigensolver on a grid of second differences."""
    try:
        from quarterturn.imaginary.levels import levels as solve
        from quarterturn.imaginary.problem import OnePath
    except ImportError as reason:
        print(f"\nlevels: left out ({reason})")
        return
    from scipy.sparse import diags
    from scipy.sparse.linalg import eigsh

    problem = OnePath(1.0, lambda q: 0.5 * q**2 + q**4, even=True)
    grid = np.linspace(-6, 6, 600)
    h = grid[1] - grid[0]
    matrix = diags([-0.5 / h**2, 1 / h**2 + 0.5 * grid**2 + grid**4, -0.5 / h**2], [-1, 0, 1], (600, 600), format="csc")
    ours_, theirs = [], []
    for _ in range(9):
        began = time.perf_counter()
        solve(problem, 20)
        middle = time.perf_counter()
        eigsh(matrix, 20, sigma=0.0)
        ours_.append(middle - began)
        theirs.append(time.perf_counter() - middle)
    ratio = np.array(theirs) / np.array(ours_)
    print(
        f"\n20 levels of one path: {1e3 * np.median(ours_):.2f} ms with error estimates, sparse eigensolver on 600 points "
        f"{1e3 * np.median(theirs):.2f} ms (second differences, error 1e-3):  {np.median(ratio):.2g}x   goal 10x"
    )


def changed_coupling() -> None:
    """What another value of a coupling costs before the first draw, beyond what the same value costs again."""
    program = ours.program(200)
    ours.run(program, QUARTIC, 16, 1)
    same, other = [], []
    for number in range(5):
        same.append(ours.first_draw(program, QUARTIC, 1))
        other.append(ours.first_draw(program, replace(QUARTIC, c4=1.0 + 0.01 * (number + 1)), 1))
    print(
        f"\nchanged coupling: first draw after {np.median(other):.2f} s, of which warm-up is all but a block; the same "
        f"coupling again {np.median(same):.2f} s; extra {np.median(other) - np.median(same):+.3f} s   goal 0.05 s; "
        f"compilations {program.compilations}   goal 1"
    )


def imports() -> None:
    """Seconds to import, each in a new process."""
    for module in ("quarterturn", "quarterturn.sampling.driver", "jax"):
        code = f"import time; t = time.perf_counter(); import {module}; print(time.perf_counter() - t)"
        seconds = [
            float(subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout)
            for _ in range(3)
        ]
        print(f"import {module}: {np.median(seconds):.3f} s")


def main() -> None:
    quick = "quick" in sys.argv[1:]
    rounds, seconds = (2, 1.0) if quick else (5, 4.0)
    print(
        f"one core of {os.cpu_count()}, load {os.getloadavg()[0]:.1f}"
        if CORES
        else "all cores: affinity can't be set here"
    )
    compiled = compiled_chains()
    if compiled is None:
        print("no C compiler found: the C baselines are left out, and with them the goals that name them")
    coarse = compare(QUARTIC, compiled, rounds, seconds, {("C Metropolis", "q^2"): "12x", ("C HMC", "q^2"): "1.3x"})
    fine = compare(FINE, compiled, rounds, seconds, {("C Metropolis", "q^2"): "400x", ("C HMC", "q^2"): "5x"})
    print(f"\ntau(q^2) at N = 1600 over N = 200: {fine / coarse:.3f}   goal 1.1")
    compare(WELLS, compiled, rounds, seconds, {("C Metropolis", "q"): "20,000x", ("C HMC", "q^2"): ""})
    levels()
    changed_coupling()
    imports()


if __name__ == "__main__":
    main()
