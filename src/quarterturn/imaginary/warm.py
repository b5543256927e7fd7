"""A spectrum solved so far up that each level a temperature reaches is converged by itself.

`Spectrum.at` is content with levels good to 1e-9, which shows in the tenth digit of a sum over states. Here levels of
one path are asked for one by one, and the error of the worst is known.
"""

from __future__ import annotations

import numpy as np

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.product import ProductBasis
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.thermal import Thermal

COMMON = 1e-9  # of their height above the vacuum: the error of levels of several paths that were not asked for


def warmed(spectrum: Spectrum, beta: float) -> tuple[Thermal, float]:
    """The spectrum at inverse temperature beta, and the error of a level in it.

    Raises SpectrumError as `Spectrum.at`.
    """
    if isinstance(spectrum.basis, ProductBasis) or not (beta > 0 and np.isfinite(beta)):
        thermal = spectrum.at(beta)
        height = float(spectrum.values[spectrum.reliable - 1] - spectrum.values[0])
        return thermal, float(np.max(spectrum.errors)) + COMMON * min(height, spectrum.residue / beta)
    if np.isfinite(spectrum.threshold):
        return spectrum.at(beta), float(np.max(spectrum.errors))  # which says why not
    needed = spectrum.residue / beta
    if spectrum.values[len(spectrum.energies) - 1] - spectrum.values[0] < needed:
        try:
            spectrum = spectrum.extend(needed)
        except SpectrumError as trouble:
            raise SpectrumError(f"beta = {beta:g} is too high a temperature: {trouble.message}") from trouble
    return spectrum.at(beta), float(np.max(spectrum.errors))
