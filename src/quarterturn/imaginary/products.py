"""Euclidean time-ordered products of any number of operators, in the vacuum or at a temperature."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Numbers
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product_observables import observer
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.thermal import Thermal, finer_for_kinks
from quarterturn.imaginary.traces import together

Factor = tuple[float, Local]  # a time and a function of q


def euclidean_product(spectrum: Spectrum, factors: Sequence[Factor], beta: float | None = None) -> float | complex:
    """<f(t_1) g(t_2) h(t_3) …>, ordered by imaginary time whatever the order they are given in.

    Parameters
    ----------
    spectrum
        Of one degree of freedom.
    factors
        Times and functions; factors at one time are multiplied.
    beta
        Inverse temperature; None for the vacuum.

    Raises
    ------
    SpectrumError
        At a temperature: times further apart than beta; or what `Spectrum.correlator` raises.
    """
    ordered = _ordered(factors)
    if len(ordered) == 1:
        return spectrum.expectation(ordered[0][1], beta)
    if len(ordered) == 2:
        (late, f), (early, g) = ordered
        value = spectrum.correlator(f, g, np.array([late - early]), beta)[0]
        return complex(value) if np.iscomplexobj(value) else float(value)
    span = ordered[0][0] - ordered[-1][0]
    if beta is None:
        spectrum._continuum_is_resolved(span)
        return _product(spectrum, ordered, np.ones(1), np.inf)
    if span > beta:
        raise SpectrumError(f"times {span:g} apart lie beyond beta = {beta:g}")
    thermal = spectrum.at(beta)
    return _product(thermal, ordered, thermal.probabilities, beta)


def _ordered(factors: Sequence[Factor]) -> list[Factor]:
    """Latest first, functions at one time multiplied."""
    times = sorted({t for t, _ in factors}, reverse=True)
    return [(t, together([f for u, f in factors if u == t])) for t in times]


def _product(solved: Spectrum | Thermal, ordered: list[Factor], probabilities: Numbers, beta: float) -> float | complex:
    """sum_m <m| f e^-(H - E_0) dt g … |m> exp(-(beta - span)(E_m - E_0)), over exp(-beta (E_m - E_0)) summed."""
    count = len(probabilities)
    watching = observer(solved.basis, solved.vectors[:, :count], probabilities)
    operators = [watching.operator(f) for _, f in ordered]
    times = np.array([t for t, _ in ordered])
    apart = -np.diff(times)
    around = np.append(apart, beta - (times[0] - times[-1])) if np.isfinite(beta) else apart
    refine: Callable[[float], Spectrum | Thermal] = solved.refine
    finer = finer_for_kinks(operators, around, solved.basis, solved.mass, refine)
    if finer is not None:
        return _product(finer, ordered, probabilities, beta)
    above = solved.values - solved.values[0]
    # the trace starts where the walk round the circle is longest or, in the vacuum, ends
    outside = np.exp(-(beta - (times[0] - times[-1])) * above) if np.isfinite(beta) else (above == 0) * 1.0
    kept = outside > 1e-18
    current = solved.vectors[:, kept]
    for operator, wait in zip(reversed(operators), [*reversed(apart), None], strict=True):
        current = operator @ current
        if wait is not None:
            amplitudes = solved.vectors.conj().T @ current
            current = solved.vectors @ (np.exp(-wait * above)[:, None] * amplitudes)
    diagonal = np.sum(solved.vectors[:, kept].conj() * current, axis=0)
    norm = float(np.sum(np.exp(-beta * above))) if np.isfinite(beta) else 1.0
    total = np.sum(outside[kept] * diagonal) / norm
    return complex(total) if np.iscomplexobj(total) else float(total)
