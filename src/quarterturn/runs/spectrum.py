"""`levels`: the imaginary-time solution of up to three paths, in the continuum or at the action's own spacing."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Symbol
from quarterturn.actions.measurements import measurement_label
from quarterturn.actions.model import Action, Bracket, Measurement
from quarterturn.errors import RequestError, SpectrumError
from quarterturn.estimates.estimate import CurveEstimate
from quarterturn.imaginary.binding import local_function, one_path, problem_of
from quarterturn.imaginary.products import euclidean_product
from quarterturn.imaginary.solve import spectrum_of
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.records.canonical import record_name
from quarterturn.records.schema import validate
from quarterturn.reports.bundle import mimebundle
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.reports.text import text as render_text
from quarterturn.runs.consequences import Consequences
from quarterturn.runs.exact import ENERGY, ExactColumn
from quarterturn.runs.recording import base_record, with_unit
from quarterturn.runs.settings import NO_SPECTRUM, Settings, examined, require_paths, resolve, split
from quarterturn.runs.unit_words import along, level, step
from quarterturn.runs.unit_words import facts as unit_facts
from quarterturn.units.number import Number
from quarterturn.units.quantity import UNKNOWN, Quantity

Floats = NDArray[np.float64]
CURVE_POINTS = 101


@dataclass(frozen=True, eq=False)
class Levels(Consequences):
    """What `levels` returns: energies with errors, and measured quantities in the vacuum or at a temperature."""

    action: Action
    couplings: Mapping[str, float]
    energies: Floats  # (count,)
    errors: Floats  # (count,), numerical error estimates
    numbers: Mapping[str, float]
    curves: Mapping[str, CurveEstimate]  # without errors
    facts: tuple[tuple[str, str], ...]
    spectrum: Spectrum | None  # None at a finite spacing
    beta: float | None = None  # None: the vacuum
    record: dict[str, Any] = field(default_factory=dict, repr=False)
    record_name: str = ""

    def __getitem__(self, label: str) -> Any:
        """A measured quantity by its label, in any spelling of it; RequestError lists what there is."""
        for name in (label, measurement_label(label)):
            if name in self.numbers:
                return Number(self.numbers[name], self._quantities.get(name, UNKNOWN))
            if name in self.curves:
                return self.curves[name]
        raise RequestError(
            f"there is no {label!r} here; there is {', '.join([*self.numbers, *self.curves]) or 'nothing'}"
        )

    def __iter__(self) -> Iterator[str]:
        yield from self.numbers
        yield from self.curves

    def __len__(self) -> int:
        return len(self.numbers) + len(self.curves)

    @property
    def _quantities(self) -> dict[str, Quantity]:
        return {m.label: m.quantity for m in self.action.measurements}

    def to(self, unit: str, *, scale: str | None = None) -> Floats:
        """The energies counted in another unit, (count,); parameters and errors as `Estimate.to`."""
        return self.energies * level(self.action).converted(unit, scale)[0]

    def at(self, beta: float) -> Levels:
        """The same spectrum at inverse temperature `beta`: thermal averages in the place of vacuum ones.

        Raises SpectrumError where the levels found do not suffice for the thermal sum, and RequestError at a finite
        spacing, where beta belongs to the lattice.
        """
        if self.spectrum is None:
            raise RequestError(
                "at a finite spacing beta belongs to the lattice: call levels(…, spacing='lattice', beta=…)"
            )
        if not beta > 0:
            raise RequestError(f"beta must be positive, got {beta}")
        return _continuum(self.action, self.couplings, self.spectrum, len(self.energies), float(beta))

    def report(self) -> Report:
        """Everything a person sees, as plain data."""
        latex = {m.label: m.latex for m in self.action.measurements}
        rows = [
            Row(f"E_{n}", f"E_{{{n}}}", float(e), float(err), unit=level(self.action).name)
            for n, (e, err) in enumerate(zip(self.energies, self.errors, strict=True))
        ]
        units = {label: quantity.name for label, quantity in self._quantities.items()}
        rows += [
            Row(label, latex.get(label, ""), float(v), unit=units.get(label, ""))
            for label, v in self.numbers.items()
            if np.isfinite(v)
        ]
        curves = [
            Curve(
                label,
                latex.get(label, ""),
                along(self.action),
                tuple(map(float, c.t)),
                tuple(map(float, c.value)),
                unit=c.unit,
            )
            for label, c in self.curves.items()
        ]
        where = "in the continuum" if self.spectrum is not None else "at the lattice spacing"
        return Report(
            kind="levels",
            title=f"{self.action.name}, levels {where}",
            action_text=self.action.canonical,
            latex=self.action.euclidean.latex,
            couplings=tuple(self.couplings.items()),
            rows=tuple(rows),
            curves=(*self._waves(), *curves),
            facts=(*self.facts, *unit_facts(self.action)),
            record_name=self.record_name,
            record=self.record,
        )

    def _waves(self) -> list[Curve]:
        """The potential, and the wave function of each level, over the region that the levels reach."""
        if self.spectrum is None or len(self.action.euclidean.variables) > 1:
            return []
        grid, states = self.spectrum.grid, self.spectrum.states[:, : len(self.energies)]
        reach = np.flatnonzero((np.abs(states) > 1e-3 * np.abs(states).max()).any(axis=1))
        part = slice(max(0, reach[0] - 1), reach[-1] + 2)
        problem = one_path(self.action.euclidean, self.couplings)
        assert problem is not None
        x = tuple(map(float, grid[part]))
        q, unit = along(self.action, self.action.paths[0].name), level(self.action).name
        potential = tuple(map(float, problem.potential(grid[part])))
        curves = [Curve("V", "V", q, x, potential, style="potential", unit=unit)]
        for n, energy in enumerate(self.energies):
            wave = tuple(map(float, np.real(states[part, n])))
            curves.append(Curve(f"E_{n}", f"E_{{{n}}}", q, x, wave, style="wave", baseline=float(energy), unit=unit))
        return curves

    def __repr__(self) -> str:
        return render_text(self.report())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return mimebundle(self.report())


def levels(action: Action, *, count: int = 6, spacing: str | None = None, **keywords: float) -> Levels:
    """Energies and measured quantities of one, two or three paths, without sampling.

    Parameters
    ----------
    action
        From `quarterturn.action`, with one, two or three degrees of freedom (two on the lattice).
    count
        Number of levels.
    spacing
        None for the continuum; "lattice" for the transfer matrix at the action's own spacing, boundary and beta.
    **keywords
        Couplings; for spacing="lattice" also `a`, `beta`, `sites`; in the continuum `beta` gives thermal averages.

    Returns
    -------
    Levels
        Each energy with an estimate of its numerical error.

    Raises
    ------
    RequestError, ActionError
        As `sample`.
    SpectrumError
        The potential does not confine as many levels, or the solution did not converge.
    """
    if isinstance(count, bool) or int(count) != count or count < 1:
        raise RequestError(f"count must be a whole number of levels, at least 1, got {count!r}")
    if spacing not in (None, "lattice"):
        raise RequestError(f"spacing must be 'lattice' (the action's own) or absent (the continuum), got {spacing!r}")
    if spacing == "lattice" or action.euclidean.dimension > 1 or action.euclidean.links:
        require_paths(action, "the spectrum")
    if spacing == "lattice":
        return _lattice(action, resolve(action, keywords), int(count))
    couplings, lattice = split(action, keywords)
    examined(action, couplings, NO_SPECTRUM)
    beta = lattice.pop("beta", None)
    if lattice:
        raise RequestError(f"{', '.join(lattice)} has no meaning in the continuum: add spacing='lattice'")
    problem = problem_of(action.euclidean, couplings)
    result = _continuum(action, couplings, spectrum_of(problem, int(count)), int(count), None)
    return result if beta is None else result.at(beta)


def _continuum(
    action: Action, couplings: Mapping[str, float], spectrum: Spectrum, count: int, beta: float | None
) -> Levels:
    if beta is not None and not beta > 0:
        raise RequestError(f"beta must be positive, got {beta:g}")
    longest = beta or (action.geometry.beta if action.geometry and action.geometry.sites else 20.0)
    times = np.linspace(0, longest / 2, CURVE_POINTS)
    view = _View(action, couplings, spectrum, beta, times)
    numbers, curves = {}, {}
    left_out: list[tuple[str, str]] = []
    for m in action.measurements:
        try:
            value = view.measure(m)
        except SpectrumError as trouble:
            if len(action.euclidean.variables) == 1:
                raise
            left_out.append((f"{m.label} is left out", trouble.message))
            continue
        if value is None:
            continue
        if m.kind == "curve":
            curves[m.label] = _bare(times, np.broadcast_to(value, times.shape), m, action)
        else:
            numbers[m.label] = float(value)
    facts = (
        ("averages", "in the vacuum" if beta is None else f"thermal, beta = {beta:g}"),
        *spectrum.facts.items(),
        *left_out,
    )
    return _recorded(
        Levels(
            action,
            couplings,
            spectrum.energies[:count],
            spectrum.errors[:count],
            numbers,
            curves,
            facts,
            spectrum,
            beta,
        ),
        None,
    )


def _bare(t: Floats, value: Floats, m: Measurement, action: Action) -> CurveEstimate:
    nothing, none = np.zeros(len(t)), np.zeros((len(t), len(t)))
    return CurveEstimate(
        t, np.asarray(value, float), nothing, none, None, m.label, quantity=m.quantity, step=step(action)
    )


@dataclass(frozen=True)
class _View:
    """Measurements on a continuum spectrum; None for what a spectrum alone does not give."""

    action: Action
    couplings: Mapping[str, float]
    spectrum: Spectrum
    beta: float | None
    times: Floats

    def measure(self, m: Measurement) -> Any:
        if m.kind == "gap":
            return self._gap(m)
        values = [self._bracket(b) for b in m.brackets]
        if any(v is None for v in values):
            return None
        lookup: dict[Atom, Any] = {Symbol("coupling", n): v for n, v in self.couplings.items()}
        if any(s.kind == "geometry" for s in m.formula.symbols):
            return None
        lookup.update({Symbol("bracket", str(i)): v for i, v in enumerate(values)})
        return np.real(m.formula.evaluate(lookup, np))

    def _function(self, expression: Any) -> Any:
        return local_function(expression, self.action.euclidean, self.couplings)

    def _gap(self, m: Measurement) -> float | None:
        for n in range(1, len(self.spectrum.energies)):
            sizes = [abs(self.spectrum.matrix_element(self._function(f), 0, n)) for f in m.operators]
            if max(sizes) > 1e-8:
                return float(self.spectrum.energies[n] - self.spectrum.energies[0])
        return None

    def _bracket(self, bracket: Bracket) -> Any:
        if bracket.over == "path":
            expression = bracket.groups[0][1]
            only_energy = len(expression.terms) == 1 and expression.terms[0][0] == ((ENERGY, 1),)
            if not only_energy:
                return None
            vacuum = float(self.spectrum.energies[0])
            return vacuum if self.beta is None else float(self.spectrum.energy(self.beta))
        if len(bracket.groups) == 1:
            return float(np.real(self.spectrum.expectation(self._function(bracket.groups[0][1]), self.beta)))
        if len(bracket.groups) > 2:
            if bracket.free:
                return None
            factors = [(float(time or 0), self._function(e)) for time, e in bracket.groups]
            return float(np.real(euclidean_product(self.spectrum, factors, self.beta)))
        (t1, f), (t2, g) = bracket.groups
        if t1 is not None and t2 is not None:
            apart = np.array([abs(float(t1 - t2))])
            return float(np.real(self.spectrum.correlator(self._function(f), self._function(g), apart, self.beta))[0])
        if t2 is None:
            f, g, t2 = g, f, t1
        if t2 != 0:
            return None
        return np.real(self.spectrum.correlator(self._function(f), self._function(g), self.times, self.beta))


def _lattice(action: Action, settings: Settings, count: int) -> Levels:
    exact = ExactColumn(action.euclidean, settings.couplings, settings.sites, settings.spacing)
    if (solution := exact.transfer) is None:
        raise SpectrumError(exact.reason)
    energies = np.asarray(solution.energies)[:count]
    if len(energies) < count:
        raise SpectrumError(
            f"the transfer matrix resolves {len(energies)} levels at this spacing, {count} were asked for"
        )
    constants: dict[Atom, float] = {Symbol("coupling", n): v for n, v in settings.couplings.items()}
    for name, value in (("a", settings.spacing), ("beta", settings.beta), ("vol", settings.beta)):
        constants[Symbol("geometry", name)] = value
    numbers, curves = {}, {}
    steps = settings.sites // 2 + 1
    for m in action.measurements:
        if m.kind == "curve":
            curve = exact.curve(m, constants, steps)
            if curve is not None:
                curves[m.label] = _bare(np.arange(steps, dtype=np.float64) * settings.spacing, curve, m, action)
        else:
            number = exact.number(m, constants)
            if number is not None:
                numbers[m.label] = float(number)
    errors = np.broadcast_to(np.asarray(solution.error, dtype=np.float64), np.shape(solution.energies))[:count]
    facts = (
        ("averages", f"on {settings.sites} sites, a = {settings.spacing:g}, beta = {settings.beta:g}"),
        ("method", "transfer matrix, symmetric splitting of the potential"),
    )
    return _recorded(
        Levels(action, settings.couplings, energies, errors, numbers, curves, facts, None, settings.beta), settings
    )


def _recorded(result: Levels, settings: Settings | None) -> Levels:
    from dataclasses import replace

    geometry = result.action.geometry
    shown = settings or Settings(
        result.couplings, geometry.sites if geometry else 0, geometry.spacing if geometry else 0.0
    )
    record = base_record("levels", result.action, shown)
    if settings is None:
        record["lattice"] = None
    record["request"] = {"count": len(result.energies), "beta": result.beta if settings is None else None}
    record["method"] = dict(result.facts)
    units = {m.label: with_unit(m.quantity) for m in result.action.measurements}
    energies = with_unit(level(result.action))
    record["results"] = [
        {"label": f"E_{n}", "kind": "number", "value": float(e), "error": float(err), "state": "good", **energies}
        for n, (e, err) in enumerate(zip(result.energies, result.errors, strict=True))
    ]
    record["results"] += [
        {"label": label, "kind": "number", "value": float(v), "error": None, "state": "good", **units.get(label, {})}
        for label, v in result.numbers.items()
        if np.isfinite(v)
    ]
    record["warnings"] = []
    record["stop"] = "converged"
    record["wall_seconds"] = 0.0
    validate(record)
    return replace(result, record=record, record_name=record_name(record))
