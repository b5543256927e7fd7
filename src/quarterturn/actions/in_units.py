"""An action in units: which system a cell names, the seam to hbar = 1, and what each of its numbers counts.

The Lagrangian keeps the units of its author, with hbar as one more known number. The turned action is where everything
becomes natural: powers of hbar go to the mass matrix, the drift and the potential as `units.system` derives them. The
rooms behind this one compute with plain numbers; only results carry units again.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from quarterturn.actions.dimensions import Dimensions
from quarterturn.actions.expression import Expression, Symbol
from quarterturn.actions.model import Action, Coupling, EuclideanAction, Measurement, Path
from quarterturn.errors import ActionError, NotationError
from quarterturn.notation.tree import Assignment, Dynamics, Statement, Units
from quarterturn.units.system import System, natural, system

HBAR = "hbar"


def system_of(text: str, statements: tuple[Statement, ...], coordinates: tuple[str, ...]) -> System:
    """The system that the cell names; natural units if none. Raises NotationError or ActionError with the place."""
    found = [s for s in statements if isinstance(s, Units)]
    if not found:
        return natural()
    if len(found) > 1:
        raise ActionError("units are named twice", span=found[1].span, text=text)
    span = found[0].span
    try:
        named = system(found[0].names)
    except NotationError as trouble:
        raise NotationError(trouble.message, span=span, text=text, repair=trouble.repair) from None
    if named.laboratory:
        _fit_for_a_laboratory(text, statements, coordinates, found[0])
    return named


def _fit_for_a_laboratory(
    text: str, statements: tuple[Statement, ...], coordinates: tuple[str, ...], units: Units
) -> None:
    if len(coordinates) > 1:
        words = "fields on space are in natural units; one energy names their scale"
        raise ActionError(words, span=units.span, text=text, repair="units GeV")
    for s in statements:
        if isinstance(s, Dynamics) and s.form == "SE":
            words = "a lattice action is a pure number, so a laboratory system has no meaning for it: leave units out"
            raise ActionError(words, span=units.span, text=text)
        if isinstance(s, Assignment) and s.name == HBAR:
            raise ActionError(
                f"{HBAR} is known in these units, {system(units.names).hbar:.10g}: leave it out", span=s.span, text=text
            )


def with_hbar(couplings: Mapping[str, Coupling], named: System) -> dict[str, Coupling]:
    """The couplings, and hbar among them where it is not 1."""
    return {**couplings, HBAR: Coupling(HBAR, named.hbar)} if named.laboratory else dict(couplings)


def known(action: Action, name: str) -> bool:
    """Whether a coupling is hbar of a laboratory system, which the cell does not give."""
    return name == HBAR and action.system.laboratory


def through_the_seam(euclidean: EuclideanAction, named: System) -> EuclideanAction:
    """S / hbar in imaginary time as the system measures it, from the turned action in the units of its author."""
    if not named.laboratory:
        return euclidean
    mass, drift, potential = (Expression.of(Symbol("coupling", HBAR)) ** power for power in named.seam)
    return replace(
        euclidean,
        mass=tuple(tuple(k * mass for k in row) for row in euclidean.mass),
        drift=tuple(a * drift for a in euclidean.drift),
        potential=euclidean.potential * potential,
    )


def counted(couplings: Mapping[str, Coupling], found: Dimensions) -> dict[str, Coupling]:
    """The couplings in order, each with what it counts."""
    named = found.system
    result = {}
    for name, c in sorted(couplings.items()):
        dimension = found.of_coupling(name)
        mass = dimension[0] if dimension is not None and not named.laboratory else None
        result[name] = replace(c, dimension=mass, quantity=named.quantity(dimension))
    return result


def counted_paths(paths: Mapping[str, Path], found: Dimensions) -> tuple[Path, ...]:
    """The fields, each with what its values count."""
    return tuple(replace(p, quantity=found.system.quantity(found.of_path(name))) for name, p in paths.items())


def counted_measurements(measurements: tuple[Measurement, ...], found: Dimensions) -> tuple[Measurement, ...]:
    """The measurements, each with what its number counts."""
    return tuple(replace(m, quantity=found.system.quantity(found.of_measurement(m))) for m in measurements)
