"""Levels of a unit vector with three components: bases of angular momentum that grow until two agree."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.rotor import Rotor, SphereBasis
from quarterturn.imaginary.spectrum import Spectrum

Floats = NDArray[np.float64]
AGREEMENT = 1e-12  # change between two bases, relative to the height of the levels, that counts as none
TOLERATED = 1e-3
CONVERGED = 1e-9
ROUNDING = 2.3e-16
HIGHEST = 40  # angular momentum: 1681 harmonics
THERMAL_RESIDUE = 27.0  # states suppressed by more than exp(-27) = 2e-12


def rotor_levels(rotor: Rotor, count: int) -> Spectrum:
    """The lowest `count` levels of a rigid rotor in a potential.

    Parameters
    ----------
    rotor
        Moment of inertia and potential on the sphere.
    count
        Number of levels, at least 1; the 2l + 1 states of one l are counted one by one.

    Returns
    -------
    Spectrum
        Energies, shape (count,), ascending, each with an error estimate: its change between two bases and rounding.

    Raises
    ------
    SpectrumError
        The potential is not finite on the sphere or too rough for the basis, or so many levels are beyond it.
    """
    if count < 1:
        raise SpectrumError(f"at least one level must be asked for, not {count}")
    v = rotor.values(SphereBasis.up_to(12).grid)
    depth, spread = float(v.min()), float(np.ptp(v))
    waves = math.sqrt(2 * rotor.inertia * spread) + math.sqrt(count)
    highest = math.ceil(1.3 * waves) + 6
    if highest > HIGHEST:
        raise SpectrumError(
            f"{count} levels of this rotor need angular momenta beyond l = {HIGHEST}: ask for fewer, or sample it"
        )
    while True:
        basis = SphereBasis.up_to(highest)
        values, vectors = np.linalg.eigh(basis.matrix(rotor))
        other = np.linalg.eigvalsh(SphereBasis.up_to(highest - 3).matrix(rotor))
        size = min(len(values), len(other))
        change = np.abs(values[:size] - other[:size])
        rounding = ROUNDING * 4 * (highest * (highest + 1) / (2 * rotor.inertia) + abs(depth) + spread)
        height = float(values[count - 1]) - depth
        worst = float(change[:count].max())
        if worst <= AGREEMENT * height + 10 * rounding or highest == HIGHEST:
            break
        highest = min(HIGHEST, highest + max(4, highest // 4))
    errors = change + rounding
    if not np.all(errors[:count] <= TOLERATED * height + 10 * rounding):
        raise SpectrumError(f"the levels do not settle: l up to {highest} still changes them by {worst:.2g}")
    good = errors <= CONVERGED * (values[:size] - values[0] + height) + 10 * rounding
    reliable = max(count, len(good) if good.all() else int(np.argmin(good)))

    def extended(above: float) -> Spectrum:
        number = 2 * rotor.inertia * (float(values[0]) + above - depth)
        return rotor_levels(rotor, math.ceil((math.sqrt(number) + 2) ** 2))

    def refused(kinetic: float) -> Spectrum:
        raise SpectrumError("observables with kinks are not resolved on the sphere")

    return Spectrum(
        energies=values[:count],
        errors=errors[:count],
        basis=basis,
        mass=rotor.inertia,
        values=values,
        vectors=vectors,
        reliable=reliable,
        threshold=np.inf,
        facts={"basis": f"{basis.size} spherical harmonics, l up to {highest}"},
        extend=extended,
        refine=refused,
        residue=THERMAL_RESIDUE,
    )
