"""From the text of a cell to an `Action`: names are resolved, the turn is made, findings are collected.

Digests are SHA-256 of canonical notation. That of an action covers its paths and its Lagrangian, without the values of
couplings, the lattice and the measurements: a rerun with changed couplings is the same action. That of the turned
action covers L_E alone, so that L, LE and H spellings of the same physics agree.
"""

from __future__ import annotations

import hashlib
import itertools
from collections.abc import Mapping
from dataclasses import dataclass

from quarterturn.actions.circles import phase_of
from quarterturn.actions.dimensions import coupling_dimensions
from quarterturn.actions.expression import Atom, Expression, PathAtom
from quarterturn.actions.findings import check, phase_finding
from quarterturn.actions.measurements import MeasureScope, measurement_of, names_in
from quarterturn.actions.model import Action, Coupling, EuclideanAction, Finding, Geometry, Measurement, Path
from quarterturn.actions.printing import latex, notation
from quarterturn.actions.scope import Scope, constant_value
from quarterturn.actions.turn import (
    Turned,
    euclidean_lagrangian,
    keep_euclidean,
    lagrangian_of,
    mirrored,
    turn_lagrangian,
)
from quarterturn.errors import ActionError, NotationError, QuarterturnError, Span
from quarterturn.notation.parse import read_formula
from quarterturn.notation.statements import parse
from quarterturn.notation.symbols import CONSTANTS, FUNCTIONS, GEOMETRY, MEASURES
from quarterturn.notation.tokens import Source
from quarterturn.notation.tree import (
    Assignment,
    Constraint,
    Dynamics,
    LatticeStatement,
    Measure,
    MeasureItem,
    Metric,
    PathStatement,
    Statement,
    Units,
)

MOST_SYMMETRIC = 6  # variables up to which all sign vectors are tried
MOST_VARIABLES = 64
OTHER_NAMES_OF_L = ("S", "Lagrangian", "Le", "L_E", "S_E", "Lag", "action")
NATURAL = ((), ("natural",))


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
        return _Declaration(text, name, parse(text)).action()
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
    def paths(self) -> dict[str, Path]:
        found: dict[str, Path] = {}
        for s in self.of(PathStatement):
            self.refuse_later(s)
            if s.name in found:
                raise self.error(f"{s.name} is declared twice", s.span)
            if s.name in FUNCTIONS or s.name in CONSTANTS or s.name in MEASURES or s.name in GEOMETRY:
                raise self.error(f"{s.name} has a meaning of its own and can't name a path", s.span, f"{s.name}_1(t)")
            found[s.name] = Path(s.name, s.components, self.period(s), s.span)
        if not found:
            dynamics = self.of(Dynamics)
            raise self.error(
                "no path is declared: the first line names the degrees of freedom, such as q(t)",
                dynamics[0].span if dynamics else self.statements[0].span, "q(t)",
            )  # fmt: skip
        if sum(max(1, p.components) for p in found.values()) > MOST_VARIABLES:
            raise self.error(f"more than {MOST_VARIABLES} degrees of freedom", self.statements[0].span)
        return found

    def refuse_later(self, s: PathStatement) -> None:
        if len(s.coordinates) > 1:
            raise self.error(
                f"{s.name} depends on space ({', '.join(s.coordinates)}): fields are not available yet, only paths "
                f"such as {s.name}(t)", s.span,
            )  # fmt: skip
        if s.coordinates != ("t",):
            raise self.error(f"a path depends on t: {s.name}(t)", s.span, f"{s.name}(t)")
        if s.kind != "real":
            words = {
                "complex": "complex paths are",
                "group": "group-valued paths are",
            }
            raise self.error(f"{words[s.kind]} not available yet", s.span)

    def period(self, s: PathStatement) -> Expression | None:
        if s.period is None:
            return None
        scope = Scope(self.text, {}, {}, {})
        if s.components:
            raise self.error("a vector of angles: declare each angle by itself", s.span)
        try:
            value = constant_value(scope, s.period, "a period")
        except ActionError:
            raise self.error("a period is a positive constant, as in mod 2 pi", s.period.span, "mod 2 pi") from None
        if not value > 0:
            raise self.error("a period is a positive constant, as in mod 2 pi", s.period.span, "mod 2 pi")
        return scope.number(s.period)

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
                "there is no action: write L = … (real time), LE = … (imaginary time) or H = …",
                self.statements[-1].span,
            )
        if len(found) > 1:
            raise self.error(
                f"a second action: {found[0].form} is given already in line {found[0].span.line}", found[1].span
            )
        if found[0].form == "SE":
            raise self.error("a lattice action SE is not available yet: write L, LE or H", found[0].span)
        return found[0]

    def renamed(self, s: Assignment) -> str:
        """The statement with L on its left."""
        line = self.text.split("\n")[s.span.line - 1][s.span.column - 1 :]
        return "L =" + line.split("=", 1)[1].split("#")[0].split(";")[0].rstrip()

    def assigned(self, paths: Mapping[str, Path]) -> tuple[dict[str, Coupling], dict[str, Assignment]]:
        couplings: dict[str, Coupling] = {}
        definitions: dict[str, Assignment] = {}
        for s in self.of(Assignment):
            if s.name in couplings or s.name in definitions:
                raise self.error(f"{s.name} is given twice", s.span)
            if s.name in paths:
                raise self.error(f"{s.name} is a path and can't have a value", s.span)
            if s.name in FUNCTIONS or s.name in CONSTANTS or s.name in MEASURES or s.name in GEOMETRY:
                raise self.error(f"{s.name} has a meaning of its own and can't be given a value", s.span, f"{s.name}_1")
            if s.parameters == ("t",):
                raise self.error("sources and couplings that depend on time are not available yet", s.span)
            if not s.parameters and _is_constant(s):
                value = constant_value(Scope(self.text, {}, {}, {}), s.body, s.name)
                couplings[s.name] = Coupling(s.name, value, None, s.span)
            else:
                definitions[s.name] = s
        return couplings, definitions

    def geometry(self) -> Geometry | None:
        extents: tuple[int, ...] = ()
        settings: dict[str, float] = {}
        place: Span | None = None
        for s in self.of(LatticeStatement):
            place = place or s.span
            for b in s.boundaries:
                if b.kind != "periodic":
                    raise self.error(f"{b.kind} boundaries are not available yet; paths are periodic", s.span)
            if len(s.extents) > 1:
                raise self.error("a path has one extent, as in 'lattice 200, a = 0.1'", s.span)
            extents = s.extents or extents
            for word, formula in s.settings:
                settings[word] = constant_value(Scope(self.text, {}, {}, {}), formula, word)
                if not settings[word] > 0:
                    raise self.error(f"{word} must be positive, got {settings[word]:g}", formula.span)
        if place is None or (not extents and not settings):
            return None
        return self._geometry(extents, settings, place)

    def _geometry(self, extents: tuple[int, ...], settings: dict[str, float], place: Span) -> Geometry:
        if extents and extents[0] < 3:
            raise self.error(f"a periodic path needs at least 3 sites, got {extents[0]}", place)
        if extents and len(settings) == 2:
            raise self.error("sites, a and beta together say one thing twice: beta = sites a", place)
        if extents and "a" in settings:
            return Geometry(extents[0], settings["a"])
        if extents and "beta" in settings:
            return Geometry(extents[0], settings["beta"] / extents[0])
        if len(settings) == 2:
            sites = round(settings["beta"] / settings["a"])
            if abs(sites * settings["a"] - settings["beta"]) > 1e-9 * settings["beta"] or sites < 3:
                raise self.error(
                    f"beta = {settings['beta']:g} is not a whole number (3 or more) of spacings a = {settings['a']:g}",
                    place,
                )
            return Geometry(sites, settings["a"])
        missing = "a spacing: add a = 0.1" if extents else "its second half: sites, a and beta, two of the three"
        raise self.error(f"the lattice lacks {missing}", place, "lattice 200, a = 0.1")

    # --- the whole ------------------------------------------------------------------------------------------
    def action(self) -> Action:
        for s in self.of(Constraint):
            raise self.error("constraints such as n.n = 1 are not available yet", s.span)
        for s in self.of(Units):
            if s.names not in NATURAL:
                raise self.error("units other than natural ones (hbar = c = 1) are not available yet", s.span)
        paths, dynamics = self.paths(), self.dynamics()
        couplings, definitions = self.assigned(paths)
        variables = tuple(atom for path in paths.values() for atom in path.atoms)
        scope = Scope(
            self.text, paths, {n: c.span or dynamics.span for n, c in couplings.items()}, definitions,
            _momenta(paths) if dynamics.form == "H" else {},
        )  # fmt: skip
        written = scope.number(dynamics.body)
        lagrangian, turned = self.turned(written, dynamics, paths, variables, scope)
        geometry = self.geometry()
        measurements, used = self.measurements(scope, paths, geometry, dynamics, _defaults(couplings))
        euclidean = self.euclidean(turned, paths, variables, couplings)
        notes = self.notes(scope, turned, couplings, definitions, used)
        angles = frozenset(name for name, path in paths.items() if path.period is not None)
        dimensions = coupling_dimensions(euclidean_lagrangian(turned, variables), angles)
        couplings = {
            n: Coupling(n, c.default, dimensions.get(n), c.span)
            for n, c in sorted(couplings.items(), key=lambda item: item[0])
        }
        metric = self.of(Metric)[0].signature if self.of(Metric) else "+"
        form = "LE" if dynamics.form == "LE" else "L"
        canonical = _canonical(paths, form, lagrangian)
        place = dynamics.span
        findings = tuple(
            Finding(f.severity, f.topic, f.message, place)
            for f in (*check(euclidean, _defaults(couplings)), *phase_finding(euclidean))
        )
        full = EuclideanAction(
            euclidean.variables, euclidean.periods, euclidean.mass, euclidean.potential, euclidean.drift,
            (*findings, *notes), euclidean.symmetries, euclidean.digest, euclidean.latex,
        )  # fmt: skip
        return Action(
            self.name, self.text, tuple(paths.values()), metric, form, lagrangian, couplings, geometry, measurements,
            full, _digest(canonical), canonical, _typeset(form, lagrangian),
        )  # fmt: skip

    def turned(
        self,
        written: Expression,
        dynamics: Dynamics,
        paths: Mapping[str, Path],
        variables: tuple[PathAtom, ...],
        scope: Scope,
    ) -> tuple[Expression, Turned]:
        circles = [path.period is not None for path in paths.values() for _ in path.atoms]
        try:
            if dynamics.form == "LE":
                return written, keep_euclidean(written, variables)
            if dynamics.form == "H":
                if any(p.order for p in written.paths):
                    raise ActionError("H is written in paths and momenta, without velocities")
                momenta = tuple(atom for name in scope.momenta for atom in scope.momenta[name])
                written = lagrangian_of(written, variables, momenta)
            return written, turn_lagrangian(written, variables, circles)
        except QuarterturnError as trouble:
            if trouble.span is None:
                trouble.span, trouble.text = dynamics.span, self.text
            raise

    def euclidean(
        self,
        turned: Turned,
        paths: Mapping[str, Path],
        variables: tuple[PathAtom, ...],
        couplings: Mapping[str, Coupling],
    ) -> EuclideanAction:
        whole = euclidean_lagrangian(turned, variables)
        periods = tuple(path.period for path in paths.values() for _ in path.atoms)
        canonical = _canonical(paths, "LE", whole)
        return EuclideanAction(
            variables, periods, turned.mass, turned.potential, turned.drift, (), _symmetries(turned, variables),
            _digest(canonical), _typeset("LE", whole),
        )  # fmt: skip

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
            geometry_of_lattice=geometry, defaults=defaults,
        )  # fmt: skip
        items = [item for s in self.of(Measure) for item in s.items] or _default_items(paths, dynamics)
        found: dict[str, Measurement] = {}
        for item in items:
            m = measurement_of(item, measuring)
            if m.label in found:
                raise self.error(f"{m.label} is measured twice", item.span)
            found[m.label] = m
        return tuple(found.values()), measuring.used

    def notes(
        self, scope: Scope, turned: Turned, couplings: Mapping[str, Coupling], definitions: Mapping[str, Assignment],
        used: set[str],
    ) -> tuple[Finding, ...]:  # fmt: skip
        found = [Finding("note", "notation", words, span) for words, span in scope.notes]
        found += [Finding("note", "phase", words) for words in turned.notes]
        if "**" in self.text:
            found.append(Finding("note", "notation", "** is read as ^"))
        for n, c in couplings.items():
            if n not in scope.used | used:
                found.append(Finding("note", "couplings", f"{n} has a value but does not occur in the action", c.span))
        return tuple(dict.fromkeys(found))


def _is_constant(s: Assignment) -> bool:
    return not names_in(s.body) - set(CONSTANTS) - set(FUNCTIONS)


def _momenta(paths: Mapping[str, Path]) -> dict[str, tuple[PathAtom, ...]]:
    """p for one path, p_x for each of several; a vector path has a vector momentum."""
    single = len(paths) == 1
    return {
        "p" if single else f"p_{name}": tuple(PathAtom(f"p of {name}", a.component) for a in path.atoms)
        for name, path in paths.items()
    }


def _defaults(couplings: Mapping[str, Coupling]) -> dict[str, float]:
    return {n: c.default for n, c in couplings.items()}


def _default_items(paths: Mapping[str, Path], dynamics: Dynamics) -> list[MeasureItem]:
    """Without a measure statement: the mean and the mean square of each path, or the cosine of an angle."""
    items = []
    for path in paths.values():
        if path.period is not None:
            texts = [f"<cos({notation(phase_of(path.atoms[0], path.period))})>"]
        elif path.components:
            texts = [f"<{path.name}.{path.name}>"]
        else:
            texts = [f"<{path.name}>", f"<{path.name}^2>"]
        for text in texts:
            body = read_formula(Source(text), 0, len(text), lambda name, rest: name == "cos")
            items.append(MeasureItem("", text, body, dynamics.span))
    return items


def _symmetries(turned: Turned, variables: tuple[PathAtom, ...]) -> tuple[tuple[int, ...], ...]:
    """Sign vectors that leave K, V and A unchanged, the identity left out."""
    size = len(variables)
    choices = itertools.product((1, -1), repeat=size) if size <= MOST_SYMMETRIC else [(-1,) * size]
    found = []
    for signs in choices:
        if all(s == 1 for s in signs):
            continue
        table: dict[Atom, int] = dict(zip(variables, signs, strict=True))
        if any(turned.mass[i][j].terms and signs[i] != signs[j] for i in range(size) for j in range(i)):
            continue
        if mirrored(turned.potential, table) != turned.potential:
            continue
        if all(mirrored(a, table).scaled(s) == a for a, s in zip(turned.drift, signs, strict=True)):
            found.append(tuple(signs))
    return tuple(found)


def _canonical(paths: Mapping[str, Path], form: str, lagrangian: Expression) -> str:
    lines = []
    for path in paths.values():
        size = f"[{path.components}]" if path.components else ""
        period = f" mod {notation(path.period)}" if path.period is not None else ""
        lines.append(f"{path.name}{size}(t){period}")
    return "\n".join([*sorted(lines), f"{form} = {notation(lagrangian)}"])


def _typeset(form: str, lagrangian: Expression) -> str:
    if form == "LE":
        return rf"S_E = \int_0^\beta \! d\tau \left[ {latex(lagrangian)} \right]"
    return rf"S = \int \! dt \left[ {latex(lagrangian)} \right]"


def _digest(canonical: str) -> str:
    return hashlib.sha256(canonical.encode("utf-8")).hexdigest()
