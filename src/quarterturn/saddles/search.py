"""Which saddle an action has: an instanton between minima of equal height, or a bounce out of a higher one.

Among paths of one kind the lowest action dominates exp(-S); the others are handed on, so that they can be told.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SaddleError
from quarterturn.saddles.branch import AT_REST, Branch, Half, at_period, follow, prolonged, rests_at
from quarterturn.saddles.instanton import instantons
from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.rest import Rest
from quarterturn.saddles.saddle import Saddle, bounce, instanton, static
from quarterturn.saddles.turning import run_back

Floats = NDArray[np.float64]
ZERO_TEMPERATURE = 25.0  # omega beta / 2 beyond which exp(-omega beta) is below rounding
NEARLY = 1e-5  # of all differences of height
MOST_PARTNERS = 6  # minima, the closest ones, to which instantons are looked for
APART = 1e-4  # relative difference of moments, beyond which paths differ
SAME = 1e-8  # relative difference of actions, within which paths are equivalent


def chosen(land: Landscape, near: Sequence[float] | None) -> Rest:
    """The minimum that paths start from: the one next to `near`, or the one that leaves no doubt.

    Without `near`: the lowest, where others are level with it; else the one that is not the lowest; else the only one.
    Raises SaddleError where several would do.
    """
    if near is not None:
        goal = np.asarray(near, dtype=np.float64)
        return min(land.minima, key=lambda m: float(np.linalg.norm(land.problem.q(m.x) - goal)))
    lowest = land.minima[0]
    if len(level := land.level_with(lowest)) > 1:
        return min(level, key=lambda m: (round(float(np.linalg.norm(land.problem.q(m.x))), 6), tuple(m.x)))
    higher = [m for m in land.minima if not land.level(m, lowest)]
    if not higher:
        return lowest
    if len(land.level_with(higher[0])) < len(higher):
        places = "; ".join(_place(land, m) for m in land.minima[:6])
        raise SaddleError(f"there are several minima to start from: {places}; say which with vacuum=…")
    return higher[0]


def _place(land: Landscape, minimum: Rest) -> str:
    return f"q = {', '.join(f'{v + 0.0:.4g}' for v in land.problem.q(minimum.x))} with V = {minimum.height:.4g}"


def tunnelling(land: Landscape, vacuum: Rest) -> list[Saddle]:
    """Instantons from `vacuum` to minima level with it, lowest action first; of one variable to its neighbours.

    Raises SaddleError where no path was found, because something lower lies in between.
    """
    partners = [m for m in land.partners(vacuum) if not _walled(land, vacuum, m)]
    if land.problem.size == 1:
        right = sorted((m for m in partners if m.x[0] > vacuum.x[0]), key=lambda m: float(m.x[0]))[:1]
        left = sorted((m for m in partners if m.x[0] < vacuum.x[0]), key=lambda m: -float(m.x[0]))[:1]
        partners = right + left
    partners = sorted(partners, key=lambda m: float(np.linalg.norm(m.x - vacuum.x)))[:MOST_PARTNERS]
    found, refused = [], None
    for partner in partners:
        for half in instantons(land.problem, vacuum, partner):
            try:
                found.append(instanton(land.problem, half, vacuum, partner))
            except SaddleError as reason:  # told only where no other path is sound
                refused = reason
    if refused is not None and not found:
        raise refused
    if not found:
        raise SaddleError(
            "no path of finite action was found between the minima of equal height: an infinite wall or "
            "something lower "
            "lies between them; give vacuum=… to start from another minimum, or use levels"
        )
    return sorted(found, key=lambda s: float(f"{s.action:.9g}"))


def _walled(land: Landscape, one: Rest, other: Rest) -> bool:
    """Whether the potential of one variable becomes infinite between two points: seen by looking closer."""
    if land.problem.size > 1:
        return False
    heights = []
    for points in (1001, 8001):
        v = land.problem.value(np.linspace(one.x, other.x, points).T)
        if not np.isfinite(v).all():
            return True
        heights.append(float(np.max(v)) - one.height)
    return heights[1] > 2 * heights[0]


def escape(land: Landscape, vacuum: Rest, beta: float | None) -> list[Saddle]:
    """Bounces out of `vacuum`, lowest action first: periodic in `beta`, or at zero temperature.

    Above the crossover temperature the static path on top of the barrier takes their place.
    Raises SaddleError where there is no barrier, or where nothing beyond it is lower.
    """
    barriers = land.barriers(vacuum)
    if not barriers:
        raise SaddleError(
            f"no barrier leads out of the minimum at {_place(land, vacuum)}, and no second minimum is level with it: "
            "there is nothing to tunnel to; levels give its energies"
        )
    omega = float(vacuum.frequencies[0])
    longest = ZERO_TEMPERATURE / omega
    length = longest if beta is None else min(beta / 2, longest)
    cold = beta is None or beta / 2 >= longest
    found: list[Saddle] = []
    for barrier in barriers:
        branch, halves = _followed(land, barrier, vacuum, length, cold)
        dressed = [bounce(land.problem, h, vacuum, barrier, None if cold else beta) for h in halves]
        found += [replace(s, turning=tuple(branch.turning)) for s in dressed]
        if not cold and beta is not None:
            found.append(static(land.problem, vacuum, barrier, beta))
    if not found and cold and land.problem.size == 1:
        ways = [way for side in (-1.0, 1.0) if (way := run_back(land, vacuum, side, length)) is not None]
        found = [bounce(land.problem, half, vacuum, barrier, None) for half, barrier in ways]
    if not found:
        raise _no_way_out(land, vacuum)
    return sorted(found, key=lambda s: float(f"{s.action:.9g}"))


def _no_way_out(land: Landscape, vacuum: Rest) -> SaddleError:
    others = [m for m in land.minima if 0 < abs(m.height - vacuum.height) < NEARLY * land.scale]
    if others:
        return SaddleError(
            f"the minimum at {_place(land, vacuum)} and another are so nearly level that its bounce waits too long "
            "to be found; nothing decays by such a difference: levels give the pair"
        )
    return SaddleError(
        f"no bounce was found that leads out of the minimum at {_place(land, vacuum)}: where nothing beyond its "
        "barriers is lower there is none; give vacuum=… to start from a higher minimum, or use levels"
    )


def _followed(land: Landscape, barrier: Rest, vacuum: Rest, length: float, cold: bool) -> tuple[Branch, list[Half]]:
    """A branch and its half paths of half period `length`; followed further where none is found yet."""
    branch = Branch()
    for closeness in AT_REST:
        branch = follow(land.problem, barrier, vacuum, length, closeness)
        if _joins_level_minima(land, branch, vacuum):
            break
        if halves := _halves(land, branch, vacuum, length, cold):
            return branch, halves
    return branch, []


def _joins_level_minima(land: Landscape, branch: Branch, vacuum: Rest) -> bool:
    """Whether the branch ends as a pair of instantons: nothing decays over such a barrier."""
    return bool(branch.steps) and any(rests_at(branch.steps[-1], m) for m in land.partners(vacuum))


def _halves(land: Landscape, branch: Branch, vacuum: Rest, length: float, cold: bool) -> list[Half]:
    """Half paths of half period `length`: those on the branch, and the one that waits longer than its end."""
    found = [] if cold else at_period(land.problem, branch, length)
    if branch.steps and rests_at(branch.steps[-1], vacuum) and branch.steps[-1].length < length:
        longer = prolonged(land.problem, branch.steps[-1], vacuum, length)
        if longer is not None:
            found.append(longer)
    return found


def equivalents(saddles: Sequence[Saddle]) -> list[Saddle]:
    """The first of them, and those of the same kind and action but another course."""
    first, kept = saddles[0], [saddles[0]]
    size = float(np.max(np.abs(first.mark)))
    for other in saddles[1:]:
        alike = other.kind == first.kind and abs(other.action - first.action) <= SAME * first.action
        if alike and all(np.max(np.abs(np.subtract(other.mark, k.mark))) > APART * size for k in kept):
            kept.append(other)
    return kept
