"""The lattice of a cell: sites, spacings and edges of each direction."""

from __future__ import annotations

import math

from quarterturn.actions.model import Edge, Geometry
from quarterturn.actions.numbers import constant_value
from quarterturn.actions.scope import Scope
from quarterturn.errors import ActionError, RequestError, Span
from quarterturn.notation.tree import Boundary, LatticeStatement
from quarterturn.units.system import System, natural

MOST = 10**9  # sites that a temperature asks for
FEWEST = 3  # sites of a periodic direction: two would double each link
VACUUM = 1e-6  # exp(-beta gap) where `beta = vacuum` names no tolerance


def geometry_of(
    text: str, statements: list[LatticeStatement], coordinates: tuple[str, ...], system: System | None = None
) -> Geometry | None:
    """The geometry that the lattice statements give together, None where there is none; `system` reads temperatures."""
    return _Lattice(text, statements, coordinates, system or natural()).geometry()


class _Lattice:
    def __init__(
        self, text: str, statements: list[LatticeStatement], coordinates: tuple[str, ...], system: System
    ) -> None:
        self.text, self.statements, self.coordinates, self.system = text, statements, coordinates, system
        self.settings: dict[str, float] = {}
        self.extents: tuple[int, ...] = ()
        self.vacuum: float | None = None
        self.place: Span | None = statements[0].span if statements else None

    def error(self, message: str, span: Span, repair: str | None = None) -> ActionError:
        return ActionError(message, span=span, text=self.text, repair=repair)

    def geometry(self) -> Geometry | None:
        for s in self.statements:
            self.read(s)
        if self.place is None or not (self.extents or self.settings or self.vacuum):
            return None
        if self.vacuum is None and self.extents and min(self.extents) < FEWEST:
            what = "path" if len(self.coordinates) == 1 else "direction"
            raise self.error(f"a periodic {what} needs at least {FEWEST} sites, got {min(self.extents)}", self.place)
        if len(self.coordinates) == 1:
            return self.of_path(self.place)
        return self.of_field(self.place)

    def read(self, s: LatticeStatement) -> None:
        if s.extents and len(s.extents) != len(self.coordinates):
            self.wrong_dimension(s)
        self.extents = s.extents or self.extents
        names = {"a", "beta", *(f"a_{c}" for c in self.coordinates)}
        for word, formula in s.settings:
            if word not in names:
                raise self.error(f"{word} belongs to a direction that no field has", formula.span)
            self.settings[word] = constant_value(Scope(self.text, {}, {}, {}), formula, word)
            if not self.settings[word] > 0:
                raise self.error(f"{word} must be positive, got {self.settings[word]:g}", formula.span)
        if s.temperature:
            self.heated(s)
        if s.vacuum is not None:
            self.vacuum = constant_value(Scope(self.text, {}, {}, {}), s.vacuum, "a tolerance")
            if not 0 < self.vacuum < 1:
                raise self.error("the tolerance for exp(-beta gap) lies between 0 and 1", s.vacuum.span, "1e-6")

    def heated(self, s: LatticeStatement) -> None:
        """beta from a temperature; where a path has a spacing, the lattice gets a whole number of them, none longer."""
        if "beta" in self.settings:
            raise self.error("temperature and beta are one thing: give one of them", s.span)
        try:
            beta = self.system.beta_at(s.temperature)
        except RequestError as trouble:
            raise self.error(trouble.message, s.span, trouble.repair) from None
        self.settings["beta"] = beta
        spacing = self.settings.get("a", 0.0)
        if len(self.coordinates) == 1 and not self.extents and spacing > 0:
            if beta / spacing > MOST:
                raise self.error(f"beta = {beta:g} is more than {MOST:.0e} spacings a = {spacing:g}", s.span)
            del self.settings["a"]
            self.extents = (max(math.ceil(beta / spacing * (1 - 1e-9)), FEWEST),)

    def wrong_dimension(self, s: LatticeStatement) -> None:
        if len(self.coordinates) == 1:
            raise self.error("a path has one extent, as in 'lattice 200, a = 0.1'", s.span)
        wanted = " x ".join(["32"] * len(self.coordinates))
        raise self.error(
            f"the lattice has {len(s.extents)} extents and the fields have {len(self.coordinates)} coordinates",
            s.span, f"lattice {wanted}",
        )  # fmt: skip

    # --- paths ----------------------------------------------------------------------------------------------
    def of_path(self, place: Span) -> Geometry:
        extents, settings = self.extents, dict(self.settings)
        if "a_t" in settings:
            settings["a"] = settings.pop("a_t")
        edges = self.edges()
        if self.vacuum is not None:
            if "a" not in settings or extents or "beta" in settings:
                raise self.error("beta = vacuum needs a spacing and nothing else: lattice beta = vacuum, a = 0.1",
                                 place, "lattice beta = vacuum, a = 0.1")  # fmt: skip
            return Geometry(0, settings["a"], vacuum=self.vacuum, edges=edges)
        if extents and len(settings) == 2:
            raise self.error("sites, a and beta together say one thing twice: beta = sites a", place)
        if extents and "a" in settings:
            return Geometry(extents[0], settings["a"], edges=edges)
        if extents and "beta" in settings:
            return Geometry(extents[0], settings["beta"] / extents[0], edges=edges)
        if len(settings) == 2:
            sites = self.whole(settings["beta"], settings["a"], place)
            return Geometry(sites, settings["a"], edges=edges)
        missing = "a spacing: add a = 0.1" if extents else "its second half: sites, a and beta, two of the three"
        raise self.error(f"the lattice lacks {missing}", place, "lattice 200, a = 0.1")

    def whole(self, beta: float, spacing: float, place: Span) -> int:
        sites = round(beta / spacing)
        if abs(sites * spacing - beta) > 1e-9 * beta or sites < FEWEST:
            raise self.error(
                f"beta = {beta:g} is not a whole number ({FEWEST} or more) of spacings a = {spacing:g}", place
            )
        return sites

    # --- fields ---------------------------------------------------------------------------------------------
    def of_field(self, place: Span) -> Geometry:
        if not self.extents:
            wanted = " x ".join(["32"] * len(self.coordinates))
            raise self.error("a lattice of fields names its sites in every direction", place, f"lattice {wanted}")
        if self.vacuum is not None:
            raise self.error("beta = vacuum is for paths; a field's lattice names its sites in every direction", place)
        common = self.settings.get("a", 1.0)
        spacings = [self.settings.get(f"a_{c}", common) for c in self.coordinates]
        if "beta" in self.settings:
            if "a_t" in self.settings:
                raise self.error("sites, a_t and beta together say one thing twice: beta = sites a_t", place)
            spacings[0] = self.settings["beta"] / self.extents[0]
        space = tuple(zip(self.extents[1:], spacings[1:], strict=True))
        return Geometry(self.extents[0], spacings[0], space, self.edges())

    def edges(self) -> tuple[Edge, ...]:
        found = [Edge()] * len(self.coordinates)
        for b in (b for s in self.statements for b in s.boundaries):
            if b.coordinate and b.coordinate not in self.coordinates:
                raise self.error(f"no field depends on {b.coordinate}", b.span)
            for k, c in enumerate(self.coordinates):
                if b.coordinate in ("", c):
                    found[k] = self.edge(b)
        return () if all(e == Edge() for e in found) else tuple(found)

    def edge(self, b: Boundary) -> Edge:
        if b.kind == "fixed" or (b.kind != "periodic" and len(self.coordinates) == 1):
            raise self.error(f"{b.kind} boundaries are not available yet; paths are periodic", b.span)
        if b.kind == "twist":
            if b.angle is None:
                raise self.error("a twist names its angle, as in twist x = 0.3", b.span)
            return Edge("twist", (constant_value(Scope(self.text, {}, {}, {}), b.angle, "a twist"),))
        return Edge(b.kind)
