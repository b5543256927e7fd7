"""The quarter turn itself, checked: one correlator at tau exp(i angle), from lines and by propagation.

The propagation starts from g times the vacuum and knows no excited level, so that agreement on the whole arc from
imaginary (0) to real time (pi/2) says that both describe one analytic function.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy import fft

from quarterturn.imaginary.basis import Circle, Interval
from quarterturn.imaginary.lines import Lines
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.propagation import Grid, System, evolve
from quarterturn.imaginary.spectrum import Spectrum

ANGLES = (0.0, np.pi / 6, np.pi / 3, np.pi / 2)
TOLERANCE = 1e-11
OVERSAMPLED = 1.3


@dataclass(frozen=True)
class OnTheArc:
    """<f(-i t exp(i angle)) g(0)> in the vacuum, twice; `error` is that of the propagation."""

    angle: float
    t: float
    from_lines: complex
    propagated: complex
    error: float

    @property
    def difference(self) -> float:
        return abs(self.from_lines - self.propagated)


def arc(
    spectrum: Spectrum, found: Lines, system: System, f: Local, g: Local, t: float, angles: Sequence[float] = ANGLES
) -> list[OnTheArc]:
    """The correlator on the arc of radius t > 0 in the plane of complex time.

    `found` are the lines of f and g in the vacuum; `system` is that of the spectrum.
    """
    basis = spectrum.basis
    points = fft.next_fast_len(int(np.ceil(OVERSAMPLED * len(basis.grid))))
    if isinstance(basis, Circle):
        grid = Grid((-basis.period / 2,), (basis.period,), (points,))
    else:
        assert isinstance(basis, Interval)  # of one path
        grid = Grid((basis.low,), (basis.high - basis.low,), (points,))
    q = grid.axes[0]
    vacuum = spectrum.wave(0, q)
    left, right = vacuum.conj() * f(q) * grid.cell, g(q) * vacuum
    scale = float(np.linalg.norm(left) * np.linalg.norm(right))
    result = []
    for angle in angles:
        time = t * np.exp(1j * angle)
        end = evolve(system, grid, right, time, reference=float(spectrum.energies[0]), tolerance=TOLERANCE)
        value = complex(np.sum(left * end.wave))
        error = end.error * float(np.linalg.norm(left) * np.linalg.norm(end.wave)) + 1e-14 * scale
        result.append(OnTheArc(angle, t, complex(found.rotated(np.array([t]), angle)[0]), value, error))
    return result
