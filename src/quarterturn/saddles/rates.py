"""What a saddle gives at one loop: an amplitude for tunnelling, a splitting or a band, a rate of decay.

With N = integral of x'^2 and R = det' O / det O_0 an instanton contributes K exp(-S) = sqrt(N / 2 pi) |R|^(-1/2)
exp(-S) to the amplitude between two minima, a bounce half of that to Im E (Coleman, Phys. Rev. D 15 (1977) 2929;
Callan and Coleman, ibid. 16 (1977) 1762; Coleman, The Uses of Instantons, 1979). At a temperature above the crossover
the rate is (omega_b / 2 pi) prod sinh(omega beta/2) / [sin(omega_b beta/2) prod' sinh(omega' beta/2)] exp(-beta V_b),
below it 2 Im F of the periodic bounce (Affleck, Phys. Rev. Lett. 46 (1981) 388).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.saddle import Saddle

NEAR_CROSSOVER = 0.05  # relative distance of temperatures, within which fluctuations about neither saddle are Gaussian
SMALL_ACTION = 5.0  # below which corrections of relative order 1/S are told as a warning


@dataclass(frozen=True)
class Rate:
    """A number that follows from a saddle. value is None where it does not, and `why` says why."""

    label: str
    latex: str
    value: float | None
    error: float = 0.0  # numerical
    why: str = ""


def amplitude(saddle: Saddle) -> tuple[float, float]:
    """sqrt(N / 2 pi) |R|^(-1/2) exp(-S) and its numerical error."""
    assert saddle.ratio is not None
    value = math.sqrt(saddle.norm / (2 * math.pi) / abs(saddle.ratio.ratio)) * math.exp(-saddle.action)
    error = value * (saddle.action_error + saddle.ratio.error / abs(saddle.ratio.ratio) / 2)
    return value, error


def tunnelling_rates(land: Landscape, saddles: Sequence[Saddle], theta: float = 0.0) -> list[Rate]:
    """The amplitude of one of these equivalent instantons, and the splitting or width of the band where one follows.

    A pair of level minima is split by 2 K exp(-S), summed over the ways between them, two ways around a circle with the
    phases exp(+-i theta / 2). On a circle with one minimum the lowest level is -2 K exp(-S) cos(theta) off its mean.
    """
    first, label, latex = saddles[0], "K exp(-S)", r"K e^{-S}"
    if first.ratio is None:
        why = (
            "the two minima have different frequencies, so that their levels are not degenerate at one loop and no "
            "splitting follows; levels give them"
        )
        return [Rate(label, latex, None, why=why)]
    if first.modes is not None and first.modes.negative:
        why = f"the path found has {first.modes.negative} negative modes, so that another one has a lower action"
        return [Rate(label, latex, None, why=why)]
    value, error = amplitude(first)
    if 2 * value > first.vacuum.frequencies[0]:
        why = "it would split levels by more than their distance omega: the wells are too shallow for tunnelling"
        return [Rate(label, latex, None, why=why)]
    found = [Rate(label, latex, value, error)]
    level = land.level_with(first.vacuum)
    places = [m for i, m in enumerate(level) if not any(land.same_place(m, other) for other in level[:i])]
    on_circle = any(period is not None for period in land.problem.periods)
    if on_circle and len(places) == 1 and land.problem.size == 1:
        found.append(Rate("width of the band", r"4 K e^{-S}", 4 * value, 4 * error))
    elif len(places) == 2 and (not on_circle or len(saddles) == 2):
        ways = 2 * abs(math.cos(theta / 2)) if on_circle else len(saddles)
        found.append(Rate("E_1 - E_0", r"E_1 - E_0", 2 * ways * value, 2 * ways * error))
    return found


def crossover(saddle: Saddle) -> float | None:
    """The temperature omega_b / 2 pi at which bounces over the barrier of this saddle begin."""
    return None if saddle.barrier is None else float(saddle.barrier.frequencies[0]) / (2 * math.pi)


def decay_rate(saddle: Saddle, equivalent: int) -> Rate:
    """Gamma = -2 Im E, or 2 Im F at a temperature, summed over `equivalent` ways out."""
    label, latex = "decay rate", r"\Gamma"
    critical = crossover(saddle)
    assert critical is not None and saddle.ratio is not None
    if saddle.beta is not None and abs(1 / saddle.beta / critical - 1) < NEAR_CROSSOVER:
        why = "too close to the crossover temperature: fluctuations about the saddle are not Gaussian there"
        return Rate(label, latex, None, why=why)
    if saddle.kind == "static":
        assert saddle.beta is not None
        if saddle.beta * critical > 1:
            why = "below the crossover temperature the path on top of the barrier does not give the rate"
            return Rate(label, latex, None, why=why)
        value = equivalent * critical / math.sqrt(abs(saddle.ratio.ratio)) * math.exp(-saddle.action)
        return Rate(label, latex, value, 1e-13 * value)
    if saddle.modes is not None and saddle.modes.negative != 1:
        why = f"the path has {saddle.modes.negative} negative modes, and a bounce has one"
        return Rate(label, latex, None, why=why)
    value, error = amplitude(saddle)
    return _bounded(saddle, equivalent * value, equivalent * error)


def _bounded(saddle: Saddle, value: float, error: float) -> Rate:
    """The rate, withheld where a state would decay before it has gone to and fro once."""
    label, latex = "decay rate", r"\Gamma"
    if value > saddle.vacuum.frequencies[0] / (2 * math.pi):
        why = (
            "it would exceed omega/(2 pi), one decay for each swing in the well: the barrier is too low, or the state "
            "beyond it nearly level"
        )
        return Rate(label, latex, None, why=why)
    return Rate(label, latex, value, error)


def doubts(saddle: Saddle) -> list[str]:
    """What a reader of the one-loop numbers has to know."""
    found = []
    if saddle.action < SMALL_ACTION:
        found.append(
            f"the action S = {saddle.action:.3g} is not large: one-loop numbers have corrections of relative "
            "order 1/S, here "
            f"{1 / saddle.action:.0%} times a number that need not be small"
        )
    if saddle.ratio is not None and saddle.modes is not None:
        difference = abs(saddle.ratio.ratio - saddle.modes.ratio)
        allowed = 10 * (saddle.ratio.error + saddle.modes.error) + 1e-6 * abs(saddle.ratio.ratio)
        if not difference <= allowed:
            found.append(
                f"the two calculations of the determinant differ by {difference / abs(saddle.ratio.ratio):.1g} of it: "
                "the rate is no better than that"
            )
    return found
