"""A stationary path with everything that follows from it: action, duration, fluctuations."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.saddles.branch import Half
from quarterturn.saddles.cosine import at, kinetic, midpoints, moments, tail
from quarterturn.saddles.fluctuations import Determinant, Modes, Operator, gelfand_yaglom, lattice_modes
from quarterturn.saddles.problem import Problem
from quarterturn.saddles.rest import Rest

Floats = NDArray[np.float64]
WINDOW = 18.0  # omega t beyond twice the duration, on either side of the centre, that the lattice covers


@dataclass(frozen=True, eq=False)
class Saddle:
    """A stationary path and its fluctuations. Units of the notation, hbar = 1; the action is above the minimum's.

    kind: instanton | bounce | thermal bounce | static. `ratio` is det' O / det O_0: O is the fluctuation operator
    without its zero mode, O_0 that of the harmonic oscillator at the minimum; None where the two ends have different
    frequencies.
    """

    kind: str
    t: Floats  # (K,), the centre at zero
    path: Floats  # (n, K), in q
    action: float
    action_error: float
    norm: float  # integral of x'^2
    duration: float  # root mean square of t, weighted with x'^2
    duration_error: float
    vacuum: Rest
    end: Rest | None = None  # of an instanton: where it leads
    barrier: Rest | None = None  # of a bounce: what it leads over
    beta: float | None = None
    turning: tuple[float, ...] = ()  # periods at which the branch of thermal bounces turns
    ratio: Determinant | None = None
    modes: Modes | None = None
    mark: tuple[float, ...] = ()  # moments, which tell paths of equal action apart


def instanton(problem: Problem, half: Half, start: Rest, end: Rest) -> Saddle:
    """The instanton along `half`, with its fluctuations."""
    s = midpoints(half.points)
    speed = np.sum(at(half.x, s, order=1) ** 2, axis=0)
    t = half.length * s
    centre = float(speed @ t / np.sum(speed))
    action = kinetic(half.x, half.length)
    direct = action / 2 + half.length * float(np.mean(problem.value(half.x) - start.height))

    def curvature(time: Floats) -> Floats:
        return problem.curvature(at(half.x, np.clip((time + centre) / half.length, 0.0, 1.0)))

    free = problem.curvature(start.x)
    alike = np.allclose(start.curvatures, end.curvatures, rtol=1e-6)
    duration = float(np.sqrt(speed @ (t - centre) ** 2 / np.sum(speed)))
    whole = Operator(curvature, -centre, half.length, "decaying", problem.size)
    return Saddle(
        kind="instanton",
        t=t - centre,
        path=problem.q(half.x),
        action=action,
        action_error=abs(direct - action) + 1e-14 * action,
        norm=action,
        duration=duration,
        duration_error=duration * _unresolved(half),
        vacuum=start,
        end=end,
        ratio=gelfand_yaglom(whole, free, 1) if alike else None,
        modes=lattice_modes(_window(problem, curvature, start, duration), free, 1),
        mark=tuple(map(float, moments(half.x))),
    )


def bounce(problem: Problem, half: Half, vacuum: Rest, barrier: Rest, beta: float | None) -> Saddle:
    """The bounce whose second half is `half`; periodic in `beta`, or at zero temperature."""
    ends = np.linalg.norm(half.x[:, [0, -1]] - vacuum.x[:, None], axis=0)
    x = half.x if ends[1] < ends[0] else half.x[:, ::-1]
    s = midpoints(half.points)
    t, speed = half.length * s, np.sum(at(x, s, order=1) ** 2, axis=0)
    norm = 2 * kinetic(x, half.length)
    action = norm / 2 + 2 * half.length * float(np.mean(problem.value(x) - vacuum.height))
    energy = speed / half.length**2 / 2 - problem.value(x)

    def curvature(time: Floats) -> Floats:
        return problem.curvature(at(x, np.minimum(np.abs(time) / half.length, 1.0)))

    free = problem.curvature(vacuum.x)
    duration = float(np.sqrt(speed @ t**2 / np.sum(speed)))
    ends_as = "decaying" if beta is None else "periodic"
    window = _window(problem, curvature, vacuum, duration)
    whole = Operator(curvature, -half.length, 2 * half.length, ends_as, problem.size)
    return Saddle(
        kind="bounce" if beta is None else "thermal bounce",
        t=np.concatenate([-t[::-1], t]),
        path=problem.q(np.concatenate([x[:, ::-1], x], axis=1)),
        action=norm if beta is None else action,
        action_error=(abs(action - norm) if beta is None else 2 * half.length * float(np.std(energy))) + 1e-14 * action,
        norm=norm,
        duration=duration,
        duration_error=duration * _unresolved(half),
        vacuum=vacuum,
        barrier=barrier,
        beta=beta,
        ratio=gelfand_yaglom(whole, free, 1),
        modes=lattice_modes(whole if beta is not None else window, free, 1),
        mark=tuple(map(float, moments(x))),
    )


def static(problem: Problem, vacuum: Rest, barrier: Rest, beta: float) -> Saddle:
    """The path that rests on the top of the barrier for the time `beta`; its determinant in closed form."""
    action = beta * (barrier.height - vacuum.height)
    t = np.array([-beta / 2, beta / 2])
    unstable = np.sin(barrier.frequencies[0] * beta / 2)
    stable = np.prod(np.sinh(barrier.frequencies[1:] * beta / 2)) / np.prod(np.sinh(vacuum.frequencies * beta / 2))
    ratio = -float((unstable * stable) ** 2)
    waves = (2 * np.pi / beta * np.array([0, 1, 1, 2, 2])[:, None]) ** 2 + barrier.curvatures
    values = np.sort(waves.ravel())[:6]
    return Saddle(
        kind="static",
        t=t,
        path=problem.q(np.repeat(barrier.x[:, None], 2, axis=1)),
        action=action,
        action_error=1e-14 * action,
        norm=0.0,
        duration=0.0,
        duration_error=0.0,
        vacuum=vacuum,
        barrier=barrier,
        beta=beta,
        ratio=Determinant(ratio, 1e-13 * abs(ratio), 0),
        modes=Modes(values, 1e-14 * np.abs(values), ratio, 1e-13 * abs(ratio), 0),
        mark=tuple(barrier.x),
    )


def _unresolved(half: Half) -> float:
    """A relative error from what is left in the highest cosine coefficients."""
    return 1e-12 + 100 * tail(half.x)


def _window(problem: Problem, curvature: Callable[[Floats], Floats], vacuum: Rest, duration: float) -> Operator:
    """The part of the line that the lattice covers: beyond it fluctuations are those of the minimum."""
    reach = 2 * duration + WINDOW / float(vacuum.frequencies[0])
    return Operator(curvature, -reach, 2 * reach, "fixed", problem.size)
