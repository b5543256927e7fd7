"""The ground state by evolution in imaginary time, with steps refined until its energy stands still."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.boxes import checked, fitted_grid, held
from quarterturn.imaginary.propagation import CHIN_4A, Grid, Numbers, Propagator, Scheme, System, measured_order

FIRST = {2: 4.0, 4: 24.0}  # first step, over the largest kinetic energy of the grid
STEPS_A_CHUNK = 16
MOST_CHUNKS = 400
STILL = 1e-14  # relative change of the energy over a chunk
AGREEMENT = 1e-12  # relative change of the energy when steps are halved
HALVINGS = 12
CLEAN = 1e-8  # amplitude at the ends of the box or among the fastest momenta, above which the grid is enlarged
ENLARGEMENTS = 12


@dataclass(frozen=True, eq=False)
class Ground:
    """The lowest state that evolution found: the state itself, its energy, and how both converged.

    `spread` is sqrt(<H^2> - <H>^2): some level lies within it of the energy. `rates` are -d log(norm)/dt at each step,
    which approach the energy with the order of the splitting; the energy <H> itself does so twice as fast.
    """

    grid: Grid
    wave: Numbers  # sum |wave|^2 cell = 1
    energy: float
    error: float
    spread: float
    scheme: Scheme
    eps: tuple[float, ...]  # steps, each half of the one before
    energies: tuple[float, ...]
    rates: tuple[float, ...]

    @property
    def order(self) -> float | None:
        """The measured order of convergence of the rates; None where rounding leaves nothing to measure."""
        scale = max(abs(self.energy), 1e-300)
        changes = [abs(b - a) / scale for a, b in pairwise(self.rates)]
        return measured_order([round(self.eps[0] / e) for e in self.eps], changes)


def ground_state(system: System, scheme: Scheme = CHIN_4A) -> Ground:
    """Evolve a positive wave until only the ground state is left.

    Raises
    ------
    SpectrumError
        The potential does not confine, or another state is so close that evolution would take for ever.
    """
    grid = fitted_grid(system)
    for _ in range(ENLARGEMENTS):
        found = _on_grid(system, grid, scheme)
        ends, fastest = held(found.wave, grid, tuple(system.periods))
        if max(ends, fastest) < CLEAN:
            break
        grid = checked(grid.wider(1.25, system.periods) if ends >= CLEAN else grid.finer(1.3))
    else:
        raise SpectrumError("no grid of moderate size holds the ground state")
    other = _on_grid(system, checked(grid.wider(1.1, system.periods).finer(1.15)), scheme, found.eps[-1])
    return replace(found, error=found.error + abs(other.energy - found.energy))


def _start(first: Propagator) -> Numbers:
    """Positive, with every symmetry of the potential: exp(-V) on the scale of the kinetic energies of the grid."""
    v = first._v
    scale = float(np.max(first.kinetic)) / 20
    return np.exp(-np.minimum((v - np.min(v)) / scale, 300.0)).astype(np.complex128)


def _on_grid(system: System, grid: Grid, scheme: Scheme, finest: float | None = None) -> Ground:
    probe = Propagator(system, grid, scheme, 1.0)
    eps = FIRST[scheme.order] / float(np.max(probe.kinetic)) if finest is None else finest
    wave = _start(probe)
    steps, energies, rates, spreads = [], [], [], []
    drift = 0.0
    for _ in range(1 if finest is not None else HALVINGS):
        wave, energy, rate, drift = _settled(Propagator(system, grid, scheme, eps, probe.energy(wave)), wave)
        steps.append(eps)
        energies.append(energy)
        rates.append(rate)
        spreads.append(_spread(probe, wave, energy))
        scale = max(abs(energy), float(np.max(probe.kinetic)) * 1e-3)
        if len(energies) > 2 and abs(energies[-1] - energies[-2]) <= AGREEMENT * scale:
            break
        eps /= 2
    wave = wave / np.sqrt(np.sum(np.abs(wave) ** 2) * grid.cell)
    last = abs(energies[-1] - energies[-2]) if len(energies) > 1 else 0.0
    rounding = 1e-15 * float(np.max(probe.kinetic))
    # what the splitting leaves falls with the step; another state, too close to be left behind, does not
    if len(spreads) > 1 and spreads[-1] > max(0.6 * spreads[-2], 1e3 * rounding):
        drift += spreads[-1]
    return Ground(
        grid, wave, energies[-1], last + drift + rounding, spreads[-1], scheme,
        tuple(steps), tuple(energies), tuple(rates),
    )  # fmt: skip


def _settled(propagator: Propagator, wave: Numbers) -> tuple[Numbers, float, float, float]:
    """The wave once its energy stands still at one step; energy, rate and the last drift of the energy."""
    energy, drift, chunk = propagator.energy(wave), np.inf, STEPS_A_CHUNK
    for _ in range(MOST_CHUNKS):
        wave = propagator.advance(wave, chunk)
        wave = wave / np.linalg.norm(wave)
        before, energy = energy, propagator.energy(wave)
        drift = abs(energy - before)
        if drift <= STILL * max(abs(energy), float(np.max(propagator.kinetic)) * 1e-2):
            after = propagator.advance(wave, 1)
            growth = float(np.log(np.linalg.norm(after) / np.linalg.norm(wave))) / propagator.eps.real
            return wave, energy, propagator.reference - growth, drift
        chunk = min(2 * chunk, 256)
    raise SpectrumError(
        f"the energy still falls by {drift:.1g} a chunk after an imaginary time of "
        f"{MOST_CHUNKS * chunk * propagator.eps.real:.3g}: another state lies too close; solve for the levels instead"
    )


def _spread(probe: Propagator, wave: Numbers, energy: float) -> float:
    """|H wave - E wave| over |wave|."""
    h = np.fft.ifftn(probe.kinetic * np.fft.fftn(wave)) + np.where(np.abs(wave) > 0, probe._v * wave, 0.0)
    return float(np.linalg.norm(h + (probe.reference - energy) * wave) / np.linalg.norm(wave))
