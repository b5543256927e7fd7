"""From the text of a cell to an `Action`: names are resolved, the turn is made, findings are collected.

Digests are SHA-256 of canonical notation. That of an action covers its fields and its Lagrangian, without the values of
couplings, the lattice and the measurements: a rerun with changed couplings is the same action. That of the turned
action covers L_E alone, so that L, LE and H spellings of the same physics, in either metric, agree.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import dataclass, replace

from quarterturn.actions.canonical import canonical_text, digest, on_spheres, typeset
from quarterturn.actions.couplings import Assigned, assigned
from quarterturn.actions.default_measurements import default_items
from quarterturn.actions.degrees import degrees
from quarterturn.actions.dimensions import Dimensions, dimensions
from quarterturn.actions.effort import limited
from quarterturn.actions.expression import IMAGINARY, ZERO, Atom, Expression, PathAtom
from quarterturn.actions.findings import check, phase_finding
from quarterturn.actions.geometry import geometry_of
from quarterturn.actions.in_units import (
    HBAR,
    counted,
    counted_measurements,
    counted_paths,
    system_of,
    through_the_seam,
    with_hbar,
)
from quarterturn.actions.lattice_form import joined, sorted_links
from quarterturn.actions.measurements import MeasureScope, measurement_of
from quarterturn.actions.model import (
    Action,
    Coupling,
    EuclideanAction,
    Finding,
    Geometry,
    Measurement,
    Path,
    Source,
    UnitSystem,
)
from quarterturn.actions.places import Places
from quarterturn.actions.remarks import contradicting_terms, without_length
from quarterturn.actions.scope import Scope
from quarterturn.actions.turn import (
    Turned,
    euclidean_lagrangian,
    keep_euclidean,
    lagrangian_of,
    mirrored,
    turn_lagrangian,
)
from quarterturn.errors import ActionError, NotationError, QuarterturnError, Span
from quarterturn.notation.statements import parse
from quarterturn.notation.symbols import GEOMETRY
from quarterturn.notation.tree import (
    Assignment,
    Constraint,
    Dynamics,
    LatticeStatement,
    Measure,
    Metric,
    PathStatement,
    Statement,
    Sum,
)
from quarterturn.units.system import System

MOST_SYMMETRIC = 6  # variables up to which all sign vectors are tried
OTHER_NAMES_OF_L = ("S", "Lagrangian", "Le", "L_E", "S_E", "Lag", "action")


def declare(text: str, name: str = "action") -> Action:
    """Declare an action from a body of notation.

    Raises
    ------
    NotationError
        The text can't be read.
    ActionError
        It can be read, but is no action, or one that is not available yet. Both say where.
    """
    try:
        statements = parse(text)
        with limited():
            return _Declaration(text, name, statements).action()
    except RecursionError:  # brackets are counted by the parser; this is for towers of powers and the like
        raise NotationError("the formulas of this cell are nested too deeply to be read") from None


@dataclass
class _Declaration:
    text: str
    name: str
    statements: tuple[Statement, ...]

    def error(self, message: str, span: Span, repair: str | None = None) -> ActionError:
        return ActionError(message, span=span, text=self.text, repair=repair)

    def of(self, kind: type) -> list:
        return [s for s in self.statements if isinstance(s, kind)]

    # --- the pieces -----------------------------------------------------------------------------------------
    def dynamics(self) -> Dynamics:
        found = self.of(Dynamics)
        if not found:
            for s in self.of(Assignment):
                if s.name in OTHER_NAMES_OF_L:
                    raise self.error(
                        f"{s.name} = … is read as a definition: the action is given by its Lagrangian, L = … in real "
                        "time or LE = … in imaginary time", s.span, self.renamed(s),
                    )  # fmt: skip
            raise self.error(
                "there is no action: write L = … (real time), LE = … (imaginary time), H = … or SE = … (lattice)",
                self.statements[-1].span,
            )
        if len(found) > 1:
            raise self.error(
                f"a second action: {found[0].form} is given already in line {found[0].span.line}", found[1].span
            )
        return found[0]

    def renamed(self, s: Assignment) -> str:
        """The statement with L on its left."""
        line = self.text.split("\n")[s.span.line - 1][s.span.column - 1 :]
        return "L =" + line.split("=", 1)[1].split("#")[0].split(";")[0].rstrip()

    def metric(self, dimension: int) -> str:
        """The signature, one sign a coordinate, time first; mostly minus where none is declared."""
        found = self.of(Metric)
        if len(found) > 1 and found[0].signature != found[1].signature:
            raise self.error("a second metric", found[1].span)
        written = found[0].signature if found else "mostly minus"
        if written.startswith("mostly"):
            return "+" + "-" * (dimension - 1) if written == "mostly minus" else "-" + "+" * (dimension - 1)
        if len(written) != dimension:
            right = (written[0] + ("-" if written[0] == "+" else "+") * 3)[:dimension]
            raise self.error(
                f"the metric has {len(written)} signs and the fields have {dimension} coordinates", found[0].span,
                f"metric {right}",
            )  # fmt: skip
        return written

    def scope(
        self, paths: dict[str, Path], coordinates: tuple[str, ...], given: Assigned, metric: str, dynamics: Dynamics
    ) -> Scope:
        covariant = dynamics.form in ("L", "H")
        signs = tuple(1 if s == "+" else -1 for s in metric) if covariant else (1,) * len(coordinates)
        return Scope(
            self.text, paths, {n: c.span or dynamics.span for n, c in given.couplings.items()}, given.definitions,
            _momenta(paths) if dynamics.form == "H" else {}, coordinates=coordinates, signs=signs, heights=covariant,
            tensors=given.tensors, sources=given.sources, on_lattice=dynamics.form == "SE",
        )  # fmt: skip

    # --- the whole ------------------------------------------------------------------------------------------
    def action(self) -> Action:
        started = self.of(Dynamics) or self.statements
        paths, coordinates = degrees(self.text, self.of(PathStatement), self.of(Constraint), started[0].span)
        dynamics = self.dynamics()
        system = system_of(self.text, self.statements, coordinates)
        given = assigned(self.text, self.statements, paths, coordinates)
        given.couplings = with_hbar(given.couplings, system)
        metric = self.metric(len(coordinates))
        scope = self.scope(paths, coordinates, given, metric, dynamics)
        variables = tuple(atom for path in paths.values() for atom in path.atoms)
        written = self.real(scope.formula(dynamics.body), dynamics)
        sources = tuple(
            Source(n, s.parameters, scope.inside_source(n), s.span)
            for n, s in given.sources.items()
            if any(symbol.kind == "source" and symbol.name == n for symbol in written.symbols)
        )
        lagrangian, bare = self.turned(on_spheres(written, paths), dynamics, paths, variables, scope)
        geometry = geometry_of(self.text, self.of(LatticeStatement), coordinates, system)
        measurements, used = self.measurements(scope, paths, geometry, dynamics, _defaults(given.couplings))
        known = _dimensions(bare, paths, system)
        couplings, bare = counted(given.couplings, known), through_the_seam(bare, system)
        places = self.places(dynamics, scope, paths)
        found = (
            *check(bare, _defaults(couplings), places),
            *phase_finding(bare, places),
            *contradicting_terms(whole_action(bare), bare, paths, system, places),
        )
        findings = tuple(Finding(f.severity, f.topic, f.message, f.span or dynamics.span) for f in found)
        dropped = (*bare.findings, *without_length(written, paths))
        notes = self.notes(scope, dropped, given, sources, used)
        euclidean = _completed(bare, paths, sources, (*findings, *notes))
        form = dynamics.form if dynamics.form in ("LE", "SE") else "L"
        canonical = canonical_text(paths, coordinates, form, lagrangian, sources, system.names)
        return Action(
            self.name, self.text, counted_paths(paths, known), metric, form, lagrangian, couplings, geometry,
            counted_measurements(measurements, known), euclidean, digest(canonical), canonical,
            typeset(form, lagrangian, len(coordinates)), UnitSystem(system.names) if system.names else None,
            scope.files, places=places,
        )  # fmt: skip

    def places(self, dynamics: Dynamics, scope: Scope, paths: Mapping[str, Path]) -> Places:
        """Each term of the action as it was written, with the sign that it has in L_E, and where it stands."""
        body = dynamics.body
        terms = body.terms if isinstance(body, Sum) else (body,)
        quiet = replace(scope, notes=[], used=set())
        sign = -1 if dynamics.form == "L" else 1
        return tuple((on_spheres(quiet.number(t), paths).scaled(sign), t.span) for t in terms)

    def real(self, written: Expression, dynamics: Dynamics) -> Expression:
        """An action is real in real time; i is there to write complex fields."""
        if IMAGINARY in written.atoms():
            raise self.error(
                "the action is not real: add the complex conjugate, or write it in |psi|^2, Re and Im", dynamics.span
            )
        return written

    def turned(
        self,
        written: Expression,
        dynamics: Dynamics,
        paths: Mapping[str, Path],
        variables: tuple[PathAtom, ...],
        scope: Scope,
    ) -> tuple[Expression, EuclideanAction]:
        """The action in its canonical form, and the turned one, without findings (but for what was dropped)."""
        circles = [path.period is not None for path in paths.values() for _ in path.atoms]
        dimension = len(scope.coordinates)
        try:
            if dynamics.form == "SE":
                onsite, links = sorted_links(written, dimension)
                empty = Turned((), onsite, tuple(ZERO for _ in variables))
                return joined(onsite, links), _euclidean(empty, variables, paths, scope.coordinates, links)
            if dynamics.form == "LE":
                turned = keep_euclidean(written, variables, circles, dimension)
                return written, _euclidean(turned, variables, paths, scope.coordinates)
            if dynamics.form == "H":
                if any(p.order and not p.direction for p in written.paths):
                    raise ActionError("H is written in paths and momenta, without velocities")
                momenta = tuple(atom for name in scope.momenta for atom in scope.momenta[name])
                written = lagrangian_of(written, variables, momenta)
            turned = turn_lagrangian(written, variables, circles, dimension)
            return written, _euclidean(turned, variables, paths, scope.coordinates)
        except QuarterturnError as trouble:
            if trouble.span is None:
                trouble.span, trouble.text = dynamics.span, self.text
            raise

    def measurements(
        self,
        scope: Scope,
        paths: Mapping[str, Path],
        geometry: Geometry | None,
        dynamics: Dynamics,
        defaults: dict[str, float],
    ) -> tuple[tuple[Measurement, ...], set[str]]:
        measuring = MeasureScope(
            self.text, dict(paths), scope.couplings, scope.definitions, geometry=GEOMETRY, notes=scope.notes,
            coordinates=scope.coordinates, signs=scope.signs, tensors=scope.tensors, sources=scope.sources,
            on_lattice=True, files=scope.files, geometry_of_lattice=geometry, defaults=defaults,
        )  # fmt: skip
        items = [item for s in self.of(Measure) for item in s.items] or default_items(paths, dynamics)
        found: dict[str, Measurement] = {}
        for item in items:
            m = measurement_of(item, measuring)
            if m.label in found:
                raise self.error(f"{m.label} is measured twice", item.span)
            found[m.label] = m
        return tuple(found.values()), measuring.used

    def notes(
        self, scope: Scope, dropped: tuple[Finding, ...], given: Assigned, sources: tuple[Source, ...], used: set[str]
    ) -> tuple[Finding, ...]:
        found = [Finding("note", "notation", words, span) for words, span in scope.notes]
        found += dropped
        if "**" in self.text:
            found.append(Finding("note", "notation", "** is read as ^"))
        for s in sources:
            words = (
                f"{s.name} is a function of the coordinates of the Euclidean lattice, in which "
                f"{' and '.join(s.coordinates)} = 0 is the middle; it is not turned"
            )
            found.append(Finding("note", "source", words, s.span))
        for n, c in given.couplings.items():
            if n not in scope.used | used | {HBAR}:
                found.append(Finding("note", "couplings", f"{n} has a value but does not occur in the action", c.span))
        named = {s.name for s in sources}
        for n, a in given.sources.items():
            if n not in named:
                found.append(Finding("note", "source", f"the source {n} does not occur in the action", a.span))
        return tuple(dict.fromkeys(found))


def _momenta(paths: Mapping[str, Path]) -> dict[str, tuple[PathAtom, ...]]:
    """p for one path, p_x for each of several; a vector path has a vector momentum."""
    single = len(paths) == 1
    return {
        "p" if single else f"p_{name}": tuple(PathAtom(f"p of {name}", a.component, part=a.part) for a in path.atoms)
        for name, path in paths.items()
    }


def _defaults(couplings: Mapping[str, Coupling]) -> dict[str, float]:
    return {n: c.default for n, c in couplings.items()}


def _euclidean(
    turned: Turned,
    variables: tuple[PathAtom, ...],
    paths: Mapping[str, Path],
    coordinates: tuple[str, ...],
    links: tuple[Expression, ...] = (),
) -> EuclideanAction:
    """The turned action as a value; its findings are only what the turn dropped."""
    periods = tuple(path.period for path in paths.values() for _ in path.atoms)
    place = {atom: i for i, atom in enumerate(variables)}
    spheres = tuple(tuple(place[a] for a in p.atoms) for p in paths.values() if p.kind == "unit")
    dropped = tuple(Finding("note", "phase", words) for words in turned.notes)
    return EuclideanAction(
        variables, periods, turned.mass, turned.potential, turned.drift, dropped, _symmetries(turned, links, variables),
        coordinates=coordinates, stiffness=turned.stiffness, tilt=turned.tilt, links=links, spheres=spheres,
    )  # fmt: skip


def whole_action(euclidean: EuclideanAction) -> Expression:
    """L_E, or the action per site of a lattice action, as one expression."""
    if euclidean.links:
        return joined(euclidean.potential, euclidean.links)
    turned = Turned(euclidean.mass, euclidean.potential, euclidean.drift, (), euclidean.stiffness, euclidean.tilt)
    return euclidean_lagrangian(turned, euclidean.variables)


def _completed(
    bare: EuclideanAction, paths: Mapping[str, Path], sources: tuple[Source, ...], findings: tuple[Finding, ...]
) -> EuclideanAction:
    form, whole = "SE" if bare.links else "LE", whole_action(bare)
    canonical = canonical_text(paths, bare.coordinates, form, whole, sources)
    return EuclideanAction(
        bare.variables, bare.periods, bare.mass, bare.potential, bare.drift, findings, bare.symmetries,
        digest(canonical), typeset(form, whole, bare.dimension), bare.coordinates, bare.stiffness, bare.tilt,
        bare.links, bare.spheres, sources,
    )  # fmt: skip


def _dimensions(euclidean: EuclideanAction, paths: Mapping[str, Path], system: System) -> Dimensions:
    pure = frozenset(name for name, path in paths.items() if path.period is not None or path.kind == "unit")
    return dimensions(whole_action(euclidean), euclidean.dimension, pure, system, bool(euclidean.links))


def _symmetries(
    turned: Turned, links: tuple[Expression, ...], variables: tuple[PathAtom, ...]
) -> tuple[tuple[int, ...], ...]:
    """Sign vectors that leave the action unchanged, the identity left out."""
    size = len(variables)
    choices = itertools.product((1, -1), repeat=size) if size <= MOST_SYMMETRIC else [(-1,) * size]
    matrices = [m for m in (turned.mass, *turned.stiffness) if m]
    linear = (turned.drift, *turned.tilt)
    found = []
    for signs in choices:
        if all(s == 1 for s in signs):
            continue
        table: dict[Atom, int] = dict(zip(variables, signs, strict=True))
        if any(m[i][j].terms and signs[i] != signs[j] for m in matrices for i in range(size) for j in range(i)):
            continue
        if any(mirrored(e, table) != e for e in (turned.potential, *links)):
            continue
        if all(mirrored(a, table).scaled(s) == a for along in linear for a, s in zip(along, signs, strict=True)):
            found.append(tuple(signs))
    return tuple(found)
