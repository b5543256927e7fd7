"""The solver that belongs to a problem: one path, several, or a unit vector."""

from __future__ import annotations

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.binding import Problem
from quarterturn.imaginary.coupled import CoupledPaths
from quarterturn.imaginary.coupled_levels import coupled_levels
from quarterturn.imaginary.coupled_transfer import CoupledTransfer, coupled_transfer
from quarterturn.imaginary.levels import levels
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.rotor_levels import rotor_levels
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.transfer import Transfer, transfer

AnyTransfer = Transfer | CoupledTransfer


def spectrum_of(problem: Problem, count: int) -> Spectrum:
    """The lowest `count` levels in the continuum. Raises SpectrumError."""
    if isinstance(problem, OnePath):
        return levels(problem, count)
    return coupled_levels(problem, count) if isinstance(problem, CoupledPaths) else rotor_levels(problem, count)


def transfer_of(problem: Problem, spacing: float, sites: int) -> AnyTransfer:
    """The transfer matrix of one or two degrees of freedom. Raises SpectrumError."""
    if isinstance(problem, OnePath):
        return transfer(problem, spacing, sites)
    if isinstance(problem, CoupledPaths):
        return coupled_transfer(problem, spacing, sites)
    raise SpectrumError("the transfer matrix is not solved for unit vectors")
