"""The exact column: every number measured of one or two paths, from the transfer matrix at the same spacing and beta.

Shares nothing with the sampler but the symbolic action. A quantity that a transfer matrix does not give in closed
form (a modulus of a mean, a third moment of a mean) has no exact value, and None says so.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Function, Symbol
from quarterturn.actions.findings import without_sources
from quarterturn.actions.model import Bracket, EuclideanAction, Measurement
from quarterturn.compiled.observables import lattice_offsets
from quarterturn.errors import SpectrumError
from quarterturn.imaginary.binding import local_function, problem_of
from quarterturn.imaginary.coupled_transfer import CoupledTransfer
from quarterturn.imaginary.solve import AnyTransfer, transfer_of
from quarterturn.lattice.sources import source_values

Floats = NDArray[np.float64]
ENERGY = Symbol("observable", "energy")


class ExactColumn:
    """Exact values of measurements at one spacing; `reason` says why there are none."""

    def __init__(self, euclidean: EuclideanAction, couplings: Mapping[str, float], sites: int, spacing: float) -> None:
        self.euclidean, self.couplings = euclidean, couplings
        self.sites, self.spacing = sites, spacing
        self.reason = ""
        self.transfer: AnyTransfer | None = None
        try:
            self.transfer = transfer_of(problem_of(euclidean, couplings), spacing, sites)
        except SpectrumError as trouble:
            self.reason = trouble.message

    def number(self, measurement: Measurement, constants: Mapping[Atom, float]) -> float | None:
        """The exact value of a number or a gap, or None."""
        if self.transfer is None:
            return None
        try:
            if measurement.kind == "gap":
                return float(self.transfer.gap([self._function(f) for f in measurement.operators]))
            values = [self._bracket(b) for b in measurement.brackets]
        except SpectrumError:
            return None
        return self._combine(measurement, values, constants)

    def curve(self, measurement: Measurement, constants: Mapping[Atom, float], steps: int) -> Floats | None:
        """The exact curve at the separations 0 … steps - 1, or None."""
        if self.transfer is None:
            return None
        separations = np.arange(steps)
        try:
            values = [self._free(b, separations) if b.free else self._bracket(b) for b in measurement.brackets]
        except SpectrumError:
            return None
        combined = self._combine(measurement, values, constants)
        return None if combined is None else np.broadcast_to(combined, (steps,))

    def functional(self) -> float | None:
        """log Z[J]/Z[0] by one factor exp(-a [V(q, J_i) - V(q, 0)]) at each site; None where there is none."""
        silent = replace(self.euclidean, sources=(), potential=without_sources(self.euclidean.potential))
        geometry = (self.sites,), (self.spacing,)
        rows = source_values(self.euclidean.sources, self.couplings, ("t",), *geometry)
        try:
            solved = transfer_of(problem_of(silent, self.couplings), self.spacing, self.sites)
            ratio = solved.product([(n, self._kick(rows[:, n])) for n in range(self.sites)])
        except SpectrumError:
            return None
        value = float(np.real(ratio))
        return float(np.log(value)) if np.isfinite(value) and value > 0 else None

    def _kick(self, strengths: Floats):  # type: ignore[no-untyped-def]
        change = self.euclidean.potential - without_sources(self.euclidean.potential)
        values = {s.name: float(v) for s, v in zip(self.euclidean.sources, strengths, strict=True)}
        given = change.substitute(
            lambda a: (
                Expression.of(Symbol("coupling", f"source {a.name}"))
                if isinstance(a, Symbol) and a.kind == "source"
                else None
            )
        )
        couplings = {**self.couplings, **{f"source {name}": v for name, v in values.items()}}
        weight = local_function(given, self.euclidean, couplings)
        return lambda q: np.exp(-self.spacing * weight(q))

    def average_phase(self) -> float | None:
        return None if self.transfer is None else float(self.transfer.average_phase())

    def _combine(self, measurement: Measurement, values: list, constants: Mapping[Atom, float]):  # type: ignore[no-untyped-def]
        if any(v is None for v in values):
            return None
        lookup: dict[Atom, object] = dict(constants)
        lookup.update({Symbol("bracket", str(i)): v for i, v in enumerate(values)})
        return np.real(measurement.formula.evaluate(lookup, np))

    def _function(self, expression: Expression):  # type: ignore[no-untyped-def]
        return local_function(expression, self.euclidean, self.couplings)

    # --- brackets -------------------------------------------------------------------------------------------
    def _bracket(self, bracket: Bracket) -> float | None:
        assert self.transfer is not None
        if bracket.over == "path":
            return self._whole(bracket.groups[0][1])
        offsets = lattice_offsets(bracket, self.spacing, self.sites)
        groups = [(n, self._function(f)) for n, (_, f) in zip(offsets, bracket.groups, strict=True)]
        if len(groups) == 1:
            return float(self.transfer.expectation(groups[0][1]))
        return float(np.real(self.transfer.product(groups)))

    def _free(self, bracket: Bracket, separations: NDArray[np.int_]) -> Floats | None:
        """<f(t) F> folded with -t, F a product at fixed times."""
        assert self.transfer is not None
        moving = next(self._function(f) for t, f in bracket.groups if t is None)
        offsets = lattice_offsets(bracket, self.spacing, self.sites)
        fixed = [(n, self._function(f)) for n, (t, f) in zip(offsets, bracket.groups, strict=True) if t is not None]
        if len(fixed) == 1 and fixed[0][0] == 0:
            return np.real(self.transfer.correlator(moving, fixed[0][1], separations))
        both = [
            [float(np.real(self.transfer.product([(int(sign * n) % self.sites, moving), *fixed]))) for n in separations]
            for sign in (1, -1)
        ]
        return np.mean(both, axis=0)

    def _whole(self, expression: Expression) -> float | None:
        """Functions of whole-path quantities: the energy, and what is at most quadratic in means and charges."""
        total = 0.0
        for monomial, coefficient in expression.terms:
            value: float | None = float(coefficient)
            factors: list[Atom] = []
            for atom, power in monomial:
                if isinstance(atom, Symbol) and atom != ENERGY:
                    value = value * self._symbol(atom) ** power if value is not None else None
                else:
                    factors += [atom] * power if power > 0 else [atom, atom, atom]
            moment = self._moment(factors)
            if moment is None or value is None:
                return None
            total += value * moment
        return total

    def _symbol(self, symbol: Symbol) -> float:
        geometry = {"a": self.spacing, "beta": self.sites * self.spacing, "vol": self.sites * self.spacing}
        if symbol.kind == "geometry":
            return geometry[symbol.name]
        return float(Expression.of(symbol).evaluate({symbol: self.couplings.get(symbol.name, np.nan)}, np))

    def _moment(self, factors: list[Atom]) -> float | None:
        assert self.transfer is not None
        if not factors:
            return 1.0
        if factors == [ENERGY]:
            return float(self.transfer.energy())
        if not all(isinstance(f, Function) for f in factors):
            return None
        names = [f.name for f in factors if isinstance(f, Function)]
        arguments = [f.argument for f in factors if isinstance(f, Function)]
        if names == ["mean"]:
            return float(self.transfer.expectation(self._function(arguments[0])))
        if names == ["mean", "mean"]:
            f, g = (self._function(a) for a in arguments)
            return float(np.mean(np.real(self.transfer.correlator(f, g, np.arange(self.sites)))))
        if names == ["charge", "charge"]:
            return self._winding(arguments)
        if names == ["charge"] and not any(a.terms for a in self.euclidean.drift):
            return 0.0
        return None

    def _winding(self, arguments: list[Expression]) -> float | None:
        """<Q^2> of one angle."""
        if arguments[0] != arguments[1]:
            return None
        if isinstance(self.transfer, CoupledTransfer):
            axis = [Expression.of(atom) for atom in self.euclidean.variables].index(arguments[0])
            return float(self.transfer.winding_second_moment(axis))
        return None if self.transfer is None else float(self.transfer.winding_second_moment())
