"""Ratios against baselines, side by side on one core: `python -m tests.benchmarks [quick]`.

Contenders take turns in interleaved rounds, so that load on the machine strikes all of them; medians and the spread
of the rounds are printed next to the goals. Everybody's effective samples are counted by the same estimator, and
nobody's tuning is counted: the baselines take the best of a grid of steps.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

CORES = {min(os.sched_getaffinity(0))} if hasattr(os, "sched_setaffinity") else set()
if CORES:
    os.sched_setaffinity(0, CORES)  # before JAX counts the cores

import numpy as np  # noqa: E402

from . import ours  # noqa: E402
from .baselines import CompiledChains, Floats, PathProblem, compiled_chains, numpy_hamiltonian  # noqa: E402
from .coupled import coupled_levels  # noqa: E402
from .efficiency import autocorrelation_time, effective_samples  # noqa: E402

BETA = 20.0
QUARTIC = PathProblem("quartic path, N = 200", 200, BETA / 200, 0.5, 1.0)
FINE = PathProblem("quartic path, N = 1600", 1600, BETA / 1600, 0.5, 1.0)
WELLS = PathProblem("double well (q^2 - 2)^2, N = 200", 200, BETA / 200, -4.0, 1.0)
NAMES = ("q", "q^2")
Played = tuple[Floats, float]  # series (chains, draws, 2) and the seconds it took
Goals = Mapping[tuple[str, str], str]  # (contender, column) -> what is aimed at


@dataclass
class Contender:
    """One way to sample a problem: `play(seed)` plays a round."""

    name: str
    play: Callable[[int], Played]
    rounds: list[Played] = field(default_factory=list)

    def tau(self, column: int) -> float:
        return autocorrelation_time(np.concatenate([series[..., column] for series, _ in self.rounds]))

    def tau_words(self, column: int) -> str:
        """The autocorrelation time, or that the rounds are too short to tell: the rate is then too high if anything."""
        tau, longest = self.tau(column), max(series.shape[1] for series, _ in self.rounds)
        return f"tau {tau:,.3g}" if longest > 50 * tau else f"tau {tau:,.3g} or more, not resolved"

    def rates(self, column: int) -> Floats:
        """Effective samples per second of each round; the autocorrelation time is that of all rounds together."""
        tau = self.tau(column)
        return np.array([series[..., column].size / (2 * tau) / seconds for series, seconds in self.rounds])


def timed(call: Callable[[], tuple[Floats, float]]) -> Played:
    began = time.perf_counter()
    series, _ = call()
    seconds = time.perf_counter() - began
    return (series[None] if series.ndim == 2 else series.transpose(1, 0, 2)), seconds


def draws_for(seconds: float, cost: float, most: int) -> int:
    return int(min(most, max(16, seconds / cost)))


def best(candidates: Sequence[tuple], trial: Callable[..., Played]) -> tuple:
    """The candidate with the most effective samples of q^2 per second in a short trial."""

    def worth(candidate: tuple) -> float:
        series, seconds = trial(*candidate)
        values = series[:, series.shape[1] // 10 :, 1]
        return effective_samples(values) / seconds if np.ptp(values) > 0 and np.isfinite(values).all() else 0.0

    return max(candidates, key=worth)


def shapes(problem: PathProblem) -> list[tuple[float, int]]:
    """Steps as shares of the longest stable one, trajectories as shares of a period of the slow modes."""
    longest = 2 / np.sqrt(4 / problem.spacing + 4 * problem.spacing)
    sizes = [share * longest for share in (0.1, 0.15, 0.2, 0.25, 0.3)]
    lengths = [length / np.sqrt(problem.spacing) for length in (0.3, 0.45, 0.6, 0.8)]
    return [(e, max(1, round(length / e))) for e in sizes for length in lengths]


def our_contender(problem: PathProblem, seconds: float) -> Contender:
    program = ours.program(problem.sites)
    ours.run(program, problem, 16, 1)
    speed = ours.drawn(ours.run(program, problem, 160, 1))[1] / 160
    draws = draws_for(seconds, speed, 1024)
    return Contender("quarterturn", lambda seed: ours.drawn(ours.run(program, problem, draws, seed)))


def numpy_contender(problem: PathProblem, seconds: float) -> Contender:
    """With the shape that acceptance and length alone would choose: its rounds are too slow for a grid."""
    rng = np.random.default_rng(1)
    q = 0.3 * rng.standard_normal((16, problem.sites))
    step, steps = shapes(problem)[9 if problem.sites < 1000 else 5]
    numpy_hamiltonian(problem, q, step, steps, 20, rng)
    cost = timed(lambda: numpy_hamiltonian(problem, q, step, steps, 10, rng))[1] / 10
    draws = draws_for(seconds, cost, 10**6)
    return Contender("NumPy HMC", lambda seed: timed(lambda: numpy_hamiltonian(problem, q, step, steps, draws, rng)))


def c_contenders(problem: PathProblem, chains: CompiledChains, seconds: float) -> list[Contender]:
    q = 0.3 * np.random.default_rng(2).standard_normal(problem.sites)
    chains.hamiltonian(problem, q, *shapes(problem)[5], 4000, 1)
    width, _ = best(
        [(f * np.sqrt(problem.spacing), 0) for f in (1.2, 1.8, 2.4, 3.0)],
        lambda w, _: timed(lambda: chains.metropolis(problem, q, w, 40_000, 3)),
    )
    step, steps = best(shapes(problem), lambda e, n: timed(lambda: chains.hamiltonian(problem, q, e, n, 2000, 4)))
    sweep = timed(lambda: chains.metropolis(problem, q, width, 4000, 5))[1] / 4000
    trajectory = timed(lambda: chains.hamiltonian(problem, q, step, steps, 1000, 6))[1] / 1000
    hops, flights = draws_for(seconds, sweep, 10**7), draws_for(seconds, trajectory, 10**7)
    return [
        Contender("C Metropolis", lambda seed: timed(lambda: chains.metropolis(problem, q, width, hops, seed))),
        Contender("C HMC", lambda seed: timed(lambda: chains.hamiltonian(problem, q, step, steps, flights, seed))),
    ]


def compare(problem: PathProblem, chains: CompiledChains | None, rounds: int, seconds: float, goals: Goals) -> float:
    """Play the rounds, print rates and ratios; returns our autocorrelation time of q^2."""
    players = [our_contender(problem, seconds), numpy_contender(problem, seconds)]
    if chains is not None:
        players += c_contenders(problem, chains, seconds)
    for number in range(rounds):
        for player in players:
            player.rounds.append(player.play(100 + number))
    print(f"\n{problem.name}, beta = {BETA:g}: effective samples per second, {rounds} interleaved rounds")
    us, *others = players
    for column in sorted({NAMES.index(name) for _, name in goals}):
        name, mine = NAMES[column], us.rates(column)
        print(f"  {name}: quarterturn {np.median(mine):,.0f} ({us.tau_words(column)})")
        for other in others:
            theirs = other.rates(column)
            ratios, goal = mine / theirs, goals.get((other.name, name))
            print(
                f"    against {other.name:12s} {np.median(theirs):>10,.1f} ({other.tau_words(column)}): "
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
    mine, theirs = [], []
    for _ in range(9):
        began = time.perf_counter()
        solve(problem, 20)
        middle = time.perf_counter()
        eigsh(matrix, 20, sigma=0.0)
        mine.append(middle - began)
        theirs.append(time.perf_counter() - middle)
    print(
        f"\n20 levels of one path: {1e3 * np.median(mine):.2f} ms with error estimates; sparse eigensolver on 600 "
        f"points {1e3 * np.median(theirs):.2f} ms, without and with errors of second differences: "
        f"{np.median(np.array(theirs) / np.array(mine)):.2g}x   goal 10x"
    )


def changed_coupling() -> None:
    """What another value of a coupling costs before the first draw, beyond what the same value costs again."""
    program = ours.program(QUARTIC.sites)
    ours.run(program, QUARTIC, 16, 1)
    same, other = [], []
    for number in range(5):
        same.append(ours.first_draw(program, QUARTIC, 1))
        other.append(ours.first_draw(program, replace(QUARTIC, c4=1.0 + 0.01 * (number + 1)), 1))
    print(
        f"\nchanged coupling: first draws after {np.median(other):.2f} s, warm-up included; the same coupling again "
        f"{np.median(same):.2f} s; extra {np.median(other) - np.median(same):+.3f} s   goal 0.05 s; "
        f"compilations {program.compilations}   goal 1"
    )


def sweep_parts() -> None:
    """The costs that tuning reckons with, and what a number of chains costs."""
    program = ours.program(QUARTIC.sites)
    one, nine = (ours.sweep_cost(program, QUARTIC, kicks) for kicks in (1, 9))
    flips = ours.sweep_cost(program, QUARTIC, 1, "segments") - one
    kick = (nine - one) / 8
    print(
        f"\nsweep parts, N = 200: a kick {kick:.1f} ns a site, the rest {one - kick:.1f} ({one / kick - 1:.1f} kicks), "
        f"segment flips {flips:.1f} ({flips / kick:.1f} kicks)"
    )
    for problem in (QUARTIC, FINE):
        costs = {chains: ours.sweep_cost(ours.program(problem.sites, chains), problem, 2) for chains in (8, 16, 32, 64)}
        words = ", ".join(f"{chains}: {cost:.1f}" for chains, cost in costs.items())
        print(f"chains, N = {problem.sites}: ns a site and sweep of two kicks: {words}")


def imports() -> None:
    """Seconds to import, each in a new process."""
    for module in ("quarterturn", "quarterturn.sampling.driver", "jax"):
        code = f"import time; t = time.perf_counter(); import {module}; print(time.perf_counter() - t)"
        runs = [subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True) for _ in "123"]
        print(f"import {module}: {np.median([float(run.stdout) for run in runs]):.3f} s")


def main() -> None:
    rounds, seconds = (2, 1.0) if "quick" in sys.argv[1:] else (5, 4.0)
    where = f"one core of {os.cpu_count()}" if CORES else "all cores, since affinity can't be set here"
    print(where + (f", load {os.getloadavg()[0]:.1f}" if hasattr(os, "getloadavg") else ""))
    chains = compiled_chains()
    if chains is None:
        print("no C compiler found: the C baselines are left out, and with them the goals that name them")
    goals = {("C Metropolis", "q^2"): "12x", ("C HMC", "q^2"): "1.3x"}
    coarse = compare(QUARTIC, chains, rounds, seconds, goals)
    fine = compare(FINE, chains, rounds, seconds, {("C Metropolis", "q^2"): "400x", ("C HMC", "q^2"): "5x"})
    print(f"\ntau(q^2) at N = 1600 over N = 200: {fine / coarse:.3f}   goal 1.1")
    compare(WELLS, chains, rounds, seconds, {("C Metropolis", "q"): "20,000x", ("C HMC", "q^2"): ""})
    levels()
    coupled_levels()
    changed_coupling()
    sweep_parts()
    imports()


if __name__ == "__main__":
    main()
