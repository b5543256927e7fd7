"""`propagate`: a state in imaginary time, by split operators, for one or two degrees of freedom."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.model import Action
from quarterturn.errors import RequestError, SpectrumError
from quarterturn.imaginary.boxes import checked, fitted_grid, held
from quarterturn.imaginary.fixed_ends import FixedEnds
from quarterturn.imaginary.fixed_ends import propagated as between_ends
from quarterturn.imaginary.ground import Ground, ground_state
from quarterturn.imaginary.propagation import SCHEMES, Evolved, Grid, Propagator, Scheme, System, evolve
from quarterturn.imaginary.systems import system_of
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.runs.following import Context
from quarterturn.runs.operators import point
from quarterturn.runs.settings import NO_SPECTRUM, examined, split
from quarterturn.runs.shown import Shown

Floats = NDArray[np.float64]
Start = Callable[..., Any]
CLEAN = 1e-8  # amplitude at the ends of the box or among the fastest momenta
ENLARGEMENTS = 14


@dataclass(frozen=True, eq=False, repr=False)
class GroundState(Shown):
    """The ground state by evolution: energy [1/time], its error, and how it converged with the step."""

    context: Context
    system: System
    found: Ground

    @property
    def energy(self) -> float:
        return self.found.energy

    @property
    def error(self) -> float:
        return self.found.error

    @property
    def order(self) -> float | None:
        """Measured order of the splitting."""
        return self.found.order

    @property
    def axes(self) -> tuple[Floats, ...]:
        """The grid along each degree of freedom."""
        return self.found.grid.axes

    @property
    def wave(self) -> NDArray[Any]:
        """On the grid, normalised."""
        return self.found.wave if self.system.flux.any() else self.found.wave.real

    def report(self) -> Report:
        f = self.found
        facts = [
            ("scheme", f.scheme.name),
            ("measured order", _order_words(f.order)),
            ("steps", ", ".join(f"{e:.3g}" for e in f.eps)),
            ("energy at each step, from the decay of the norm", ", ".join(f"{r:.12g}" for r in f.rates)),
            ("spread of the energy in the state", f"{f.spread:.1g}: some level lies no further away"),
            ("grid", " x ".join(map(str, f.grid.points)) + " points"),
        ]
        rows = [Row("E_0", "E_{0}", f.energy, f.error, unit=self.context.energy)]
        curves = _pictures(self.system, self.axes, self.wave, f.energy)
        return self.context.report("ground state by evolution", rows, curves, facts)


@dataclass(frozen=True, eq=False, repr=False)
class Propagated(Shown):
    """exp(-beta H) applied to a state."""

    context: Context
    system: System
    found: Evolved
    beta: float

    @property
    def axes(self) -> tuple[Floats, ...]:
        return self.found.grid.axes

    @property
    def wave(self) -> NDArray[Any]:
        """On the grid, with its norm."""
        wave = self.found.wave * np.exp(-self.beta * self.found.reference)
        return wave if np.iscomplexobj(wave) and self.system.flux.any() else np.real(wave)

    @property
    def norm(self) -> float:
        """int |psi|^2."""
        return float(np.sum(np.abs(self.wave) ** 2) * self.found.grid.cell)

    @property
    def energy(self) -> float:
        """<H> in the state."""
        f = self.found
        return Propagator(self.system, f.grid, f.scheme, 1.0, f.reference).energy(f.wave)

    @property
    def error(self) -> float:
        """Of the wave, relative to its norm."""
        return self.found.error

    @property
    def order(self) -> float | None:
        """Measured order of the splitting."""
        return self.found.order

    def report(self) -> Report:
        f = self.found
        rows = [
            Row("<H>", "", self.energy, unit=self.context.energy),
            Row("norm", "", self.norm, 2 * f.error * self.norm),
        ]
        facts = [
            ("scheme", f.scheme.name),
            ("measured order", _order_words(f.order)),
            ("steps", ", ".join(map(str, f.steps))),
            ("changes of the wave", ", ".join(f"{c:.2g}" for c in f.changes)),
            ("error of the wave", f"{f.error:.1g} of its norm"),
            ("grid", " x ".join(map(str, f.grid.points)) + " points"),
        ]
        title = f"state after imaginary time {self.beta:g}"
        return self.context.report(title, rows, _pictures(self.system, self.axes, self.wave, self.energy), facts)


@dataclass(frozen=True, eq=False, repr=False)
class BetweenEnds(Shown):
    """K(b, beta; a, 0), the propagator between fixed ends."""

    context: Context
    found: FixedEnds
    scheme: Scheme
    ends: tuple[tuple[float, ...], tuple[float, ...]]  # b, a
    beta: float

    @property
    def value(self) -> float | complex:
        return self.found.value

    @property
    def error(self) -> float:
        return self.found.error

    @property
    def order(self) -> float | None:
        """Measured order of the splitting."""
        return self.found.order

    def report(self) -> Report:
        value = self.value
        parts = [("Re K", value.real), ("Im K", value.imag)] if isinstance(value, complex) else [("K", value)]
        rows = [Row(label, "", part, self.error) for label, part in parts]
        facts = [
            ("scheme", self.scheme.name),
            ("measured order", _order_words(self.order)),
            ("steps", ", ".join(map(str, self.found.steps))),
            ("values", ", ".join(f"{v.real:.12g}" for v in self.found.values)),
        ]
        b, a = (", ".join(f"{x:g}" for x in end) for end in self.ends)
        return self.context.report(f"propagator from ({a}) to ({b}) in imaginary time {self.beta:g}", rows, [], facts)


def propagate(
    action: Action,
    *,
    start: Start | float | Sequence[float] | None = None,
    end: float | Sequence[float] | None = None,
    scheme: str = "fourth",
    **keywords: float,
) -> GroundState | Propagated | BetweenEnds:
    """Split-operator propagation in imaginary time, of one or two degrees of freedom.

    Parameters
    ----------
    action
        From `quarterturn.action`.
    start
        A function of the degrees of freedom, called with one array for each; or a point, with `end`. Without it, the
        ground state is evolved to.
    end
        With a point as start: the other end of the propagator K(end, beta; start, 0).
    scheme
        "fourth", with positive coefficients and the gradient of the potential (Suzuki; Chin, scheme 4A), or "second"
        (Strang).
    **keywords
        Couplings, and `beta`, the imaginary time, with a start.

    Returns
    -------
    GroundState, Propagated or BetweenEnds
        Each with `.error` from a ladder of steps, and `.order`, the measured order of convergence.

    Raises
    ------
    RequestError
        An unknown coupling or scheme, a start without beta, an end without a point to start from.
    SpectrumError
        More than two degrees of freedom, or a potential that does not confine.
    """
    if scheme not in SCHEMES:
        raise RequestError(f"scheme must be 'second' or 'fourth', got {scheme!r}")
    couplings, lattice = split(action, keywords)
    examined(action, couplings, NO_SPECTRUM)
    beta = _only_beta(lattice)
    system = system_of(action.euclidean, couplings)
    context = Context.of(action, couplings, None)
    if start is None:
        if beta is not None or end is not None:
            raise RequestError("a state to start from is missing: start=function of the path, or a point with end=…")
        return GroundState(context, system, ground_state(system, SCHEMES[scheme]))
    if beta is None or not beta > 0:
        raise RequestError(f"beta must be a positive imaginary time, got {beta!r}")
    if callable(start):
        if end is not None:
            raise RequestError("end belongs to a point as start, not to a function")
        return Propagated(context, system, _evolved(system, start, beta, SCHEMES[scheme]), beta)
    if end is None:
        raise RequestError("end is missing: from a point, the propagator leads to another, end=…")
    a, b = point("start", start, system.degrees), point("end", end, system.degrees)
    return BetweenEnds(context, between_ends(system, b, a, beta, SCHEMES[scheme]), SCHEMES[scheme], (b, a), beta)


def _only_beta(lattice: dict[str, float]) -> float | None:
    others = [word for word in lattice if word != "beta"]
    if others:
        raise RequestError(f"{', '.join(others)} has no meaning here: steps are chosen until nothing changes")
    return lattice.get("beta")


def _evolved(system: System, start: Start, beta: float, scheme: Scheme) -> Evolved:
    """On a grid that holds both the start and the end."""
    grid = fitted_grid(system)
    for _ in range(ENLARGEMENTS):
        wave = _on_grid(start, grid)
        v = Propagator(system, grid, scheme, 1.0)._v
        found = evolve(system, grid, wave, beta, scheme=scheme, reference=float(np.min(v)))
        shares = [held(w, grid, tuple(system.periods)) for w in (wave, found.wave)]
        ends, fastest = (max(share[i] for share in shares) for i in (0, 1))
        if max(ends, fastest) < CLEAN:
            return found
        grid = checked(grid.wider(1.3, system.periods) if ends >= CLEAN else grid.finer(1.4))
    raise SpectrumError("no grid of moderate size holds the state: it does not fall off, or has a step or a kink")


def _on_grid(start: Start, grid: Grid) -> NDArray[Any]:
    with np.errstate(all="ignore"):
        wave = np.asarray(start(*grid.positions))
    try:
        wave = np.broadcast_to(wave, grid.points).astype(np.complex128)
    except (TypeError, ValueError):
        raise RequestError(f"start must give one number at each point, an array of shape {grid.points}") from None
    if not np.isfinite(wave).all() or not wave.any():
        raise RequestError("start must be finite everywhere and not zero")
    return wave


def _order_words(order: float | None) -> str:
    return "not measured: nothing is left above rounding" if order is None else f"{order:.2f}"


def _pictures(system: System, axes: tuple[Floats, ...], wave: NDArray[Any], energy: float) -> list[Curve]:
    """The wave in the potential, of one degree of freedom."""
    if len(axes) != 1:
        return []
    size = np.abs(wave)
    reach = np.flatnonzero(size > 1e-3 * size.max())
    part = slice(max(0, reach[0] - 1), reach[-1] + 2)
    x = tuple(map(float, axes[0][part]))
    drawn = np.real(wave[part]) / size.max()
    return [
        Curve("V", "V", "q", x, tuple(map(float, system.potential(axes[0][part]))), style="potential"),
        Curve("state", "", "q", x, tuple(map(float, drawn)), style="wave", baseline=energy),
    ]
