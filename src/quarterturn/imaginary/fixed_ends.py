"""The propagator between fixed ends, K(b, beta; a, 0) = <b| exp(-beta H) |a>, twice: from levels, and by propagation.

The two share the potential and nothing else. Split with Strang's scheme in N steps, the second is exactly the path
integral over N - 1 points between fixed ends.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Interval
from quarterturn.imaginary.boxes import checked, fitted_grid
from quarterturn.imaginary.product import ProductBasis
from quarterturn.imaginary.propagation import CHIN_4A, Grid, Propagator, Scheme, System, measured_order
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.warm import warmed

COARSE = 32  # steps of a propagation that only has to be roughly right
SMOOTHED = 60.0  # exponent by which the fastest momentum of the grid has decayed over beta
FIRST, MOST_STEPS = 8, 8192
TOLERANCE = 1e-12
ROUNDING = 2e-15


@dataclass(frozen=True)
class FixedEnds:
    """A value of the kernel, [1 / length^d], with its error; and how it converged, where it was propagated."""

    value: float | complex
    error: float
    steps: tuple[int, ...] = ()
    values: tuple[complex, ...] = ()
    order: float | None = None  # measured


def from_levels(spectrum: Spectrum, b: Sequence[float], a: Sequence[float], beta: float) -> FixedEnds:
    """sum psi_n(b) psi_n(a)* exp(-beta E_n), over all levels of a basis that is large enough for beta.

    Raises
    ------
    SpectrumError
        A continuum, too high a temperature, or an end outside the box of the basis.
    """
    thermal, energy_error = warmed(spectrum, beta)
    basis = thermal.basis
    ends = np.array([b, a], dtype=np.float64).T  # (C, 2)
    if isinstance(basis, Interval) and not (basis.low < ends.min() and ends.max() < basis.high):
        raise SpectrumError(
            f"an end at q = {max(*b, *a, key=abs):g} lies outside the region that the levels fill, "
            f"q = {basis.low:.4g} to {basis.high:.4g}"
        )
    waves = basis.at(ends if isinstance(basis, ProductBasis) else ends[0]) @ thermal.vectors
    size = np.exp(-beta * (thermal.values - thermal.values[0]))
    terms = waves[0] * waves[1].conj() * size
    scale = float(np.exp(-beta * thermal.values[0]))
    total = complex(np.sum(terms)) * scale
    sizes = [np.abs(w) * np.sqrt(size) for w in waves]
    relative = 10 * ROUNDING + beta * energy_error
    exact_enough = beta * (thermal.values - thermal.values[0]) < spectrum.residue - 1
    unsure = float(np.sum((sizes[0] * sizes[1])[~exact_enough]))
    noise = 10 * ROUNDING * float(np.sqrt(np.sum(size) / basis.step) * (np.linalg.norm(sizes[0] + sizes[1])))
    error = relative * float(np.linalg.norm(sizes[0]) * np.linalg.norm(sizes[1])) + unsure + noise
    return FixedEnds(total if np.iscomplexobj(waves) else total.real, error * scale)


def propagated(
    system: System, b: Sequence[float], a: Sequence[float], beta: float, scheme: Scheme = CHIN_4A
) -> FixedEnds:
    """By split operators from a point source, with steps halved until the value at b stands still.

    Parameters
    ----------
    system
        One or two degrees of freedom.
    b, a
        The late and the early end, one number for each degree of freedom.
    beta
        Imaginary time between them.

    Raises
    ------
    SpectrumError
        The potential does not confine, or beta is so short that no grid of moderate size resolves it.
    """
    grid = _grid(system, a, b, beta)
    probe = Propagator(system, grid, scheme, 1.0)
    reference = float(np.min(probe._v))
    source, steps = grid.delta(a), FIRST
    counts: list[int] = []
    values: list[complex] = []
    while True:
        wave = Propagator(system, grid, scheme, beta / steps, reference).advance(source, steps)
        counts.append(steps)
        values.append(grid.at(wave, b))
        if len(values) > 2:
            last, before = abs(values[-1] - values[-2]), abs(values[-2] - values[-3])
            settled = last <= TOLERANCE * (2**scheme.order - 1) * abs(values[-1])
            small = settled or (last >= before and last <= 1e-6 * abs(values[-1]))
            if small or 2 * steps > MOST_STEPS:
                break
        steps *= 2
    scale = float(np.exp(-beta * reference))
    floor = _noise(system, grid, scheme, reference, b, beta) * float(np.max(np.abs(source)))
    changes = [abs(x - y) / max(abs(values[-1]), 1e-300) for x, y in zip(values[1:], values[:-1], strict=True)]
    # each step rounds the same factors in the same way, so that rounding grows with their number
    error = last / (2**scheme.order - 1) + ROUNDING * steps * abs(values[-1]) + floor
    found = values[-1] * scale
    return FixedEnds(
        found if system.flux.any() else found.real, error * scale, tuple(counts), tuple(v * scale for v in values),
        measured_order(counts, changes, max(1e-10, floor / max(abs(values[-1]), 1e-300))),
    )  # fmt: skip


def _noise(system: System, grid: Grid, scheme: Scheme, reference: float, b: Sequence[float], beta: float) -> float:
    """What rounding all over the grid, early on, and the end of its momenta leave at b, for a source of height 1."""
    coarse = Propagator(system, grid, scheme, beta / COARSE, reference)
    reached = float(np.sum(np.abs(coarse.advance(grid.delta(b), COARSE))) * grid.cell)
    fastest = min(float(np.pi / h) ** 2 / (2 * system.mass[i, i]) for i, h in enumerate(grid.steps))
    return 50 * ROUNDING * reached + float(np.exp(-beta * fastest))


def _grid(system: System, a: Sequence[float], b: Sequence[float], beta: float) -> Grid:
    """One that holds both ends, and what a point source still has of fast momenta after beta."""
    grid = fitted_grid(system)
    for _ in range(40):
        inside = all(
            p is not None or low + 0.1 * size < x < low + 0.9 * size
            for x_pair in (a, b)
            for x, low, size, p in zip(x_pair, grid.low, grid.length, system.periods, strict=True)
        )
        if inside:
            break
        grid = checked(grid.wider(1.3, system.periods))
    needed = [np.sqrt(2 * SMOOTHED * system.mass[i, i] / beta) for i in range(system.degrees)]
    factor = max(1.0, *(float(p * h / np.pi) for p, h in zip(needed, grid.steps, strict=True)))
    return checked(grid.finer(factor))
