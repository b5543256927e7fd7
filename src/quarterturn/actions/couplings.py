"""What the assignments of a cell are: couplings with a value, tensors of couplings, definitions, sources."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from quarterturn.actions.degrees import taken
from quarterturn.actions.indices import parts
from quarterturn.actions.model import Coupling, Path
from quarterturn.actions.numbers import constant_value
from quarterturn.actions.scope import Scope, entry_name
from quarterturn.errors import ActionError, Span
from quarterturn.notation.symbols import CONSTANTS, FUNCTIONS
from quarterturn.notation.tree import Array, Assignment, Call, Name, Node, Statement

MOST_ENTRIES = 256


@dataclass
class Assigned:
    """The assignments, sorted."""

    couplings: dict[str, Coupling] = field(default_factory=dict)
    tensors: dict[str, tuple[int, ...]] = field(default_factory=dict)  # shapes; the entries are couplings
    definitions: dict[str, Assignment] = field(default_factory=dict)
    sources: dict[str, Assignment] = field(default_factory=dict)

    def __contains__(self, name: str) -> bool:
        return any(name in kind for kind in (self.couplings, self.tensors, self.definitions, self.sources))


def assigned(
    text: str, statements: tuple[Statement, ...], paths: Mapping[str, Path], coordinates: tuple[str, ...]
) -> Assigned:
    """Sort the assignments of a cell. Raises ActionError with the place."""
    found = Assigned()
    called = _calls(statements)
    for s in statements:
        if not isinstance(s, Assignment):
            continue
        _check_name(text, s, found, paths)
        if isinstance(s.body, Array):
            _tensor(text, s, found)
        elif s.parameters and set(s.parameters) <= set(coordinates) and not called.get(s.name, set()) - {s.parameters}:
            found.sources[s.name] = s
        elif not s.parameters and _is_constant(s):
            value = constant_value(Scope(text, {}, {}, {}), s.body, s.name)
            found.couplings[s.name] = Coupling(s.name, value, None, s.span)
        else:
            found.definitions[s.name] = s
    _entries(found)
    return found


def _error(text: str, message: str, span: Span, repair: str | None = None) -> ActionError:
    return ActionError(message, span=span, text=text, repair=repair)


def _check_name(text: str, s: Assignment, found: Assigned, paths: Mapping[str, Path]) -> None:
    if s.name in found:
        raise _error(text, f"{s.name} is given twice", s.span)
    if s.name in paths:
        raise _error(text, f"{s.name} is a path and can't have a value", s.span)
    if taken(s.name):
        raise _error(text, f"{s.name} has a meaning of its own and can't be given a value", s.span, f"{s.name}_1")


def _tensor(text: str, s: Assignment, found: Assigned) -> None:
    shape, entries = _entries_of(text, s.body, s.body.span)
    values: dict[str, float] = {}
    for indices, node in entries:
        value = constant_value(Scope(text, {}, {}, {}), node, s.name)
        name = entry_name(s.name, sorted(indices))
        if name in values and values[name] != value:
            place = ", ".join(map(str, indices))
            raise _error(
                text, f"{s.name} is a symmetric tensor: {s.name}[{place}] and its mirror image differ", node.span
            )
        values[name] = value
    found.tensors[s.name] = shape
    for name, value in values.items():
        if name in found:
            raise _error(text, f"{name} is given twice", s.span)
        found.couplings[name] = Coupling(name, value, None, s.span)


def _entries_of(text: str, node: Node, whole: Span) -> tuple[tuple[int, ...], list[tuple[tuple[int, ...], Node]]]:
    """Shape and entries of nested arrays, indices from 1."""
    if not isinstance(node, Array):
        return (), [((), node)]
    if not node.items:
        raise _error(text, "an empty list", node.span)
    inner = [_entries_of(text, item, whole) for item in node.items]
    if len({shape for shape, _ in inner}) > 1:
        raise _error(text, "the rows of this tensor have different lengths", node.span)
    entries = [((i, *rest), value) for i, (_, found) in enumerate(inner, start=1) for rest, value in found]
    if len(entries) > MOST_ENTRIES:
        raise _error(text, f"a tensor of more than {MOST_ENTRIES} entries", whole)
    shape = (len(inner), *inner[0][0])
    if len(set(shape)) > 1:
        raise _error(text, "a tensor of couplings is symmetric, so all its indices run over equally many values", whole)
    return shape, entries


def _entries(found: Assigned) -> None:
    """g_11 = …, g_12 = …, g_22 = … make a tensor g where all entries up to symmetry are there."""
    stems: dict[str, set[tuple[int, ...]]] = {}
    for name in found.couplings:
        stem, _, digits = name.rpartition("_")
        if stem and digits.isdigit() and "0" not in digits and stem not in found:
            stems.setdefault(stem, set()).add(tuple(map(int, digits)))
    for stem, entries in stems.items():
        ranks = {len(e) for e in entries}
        if len(ranks) != 1:
            continue
        rank, size = ranks.pop(), max(max(e) for e in entries)
        if rank > 1 and all(tuple(sorted(e)) == e for e in entries) and len(entries) == _count(size, rank):
            found.tensors[stem] = (size,) * rank


def _count(size: int, rank: int) -> int:
    """Independent entries of a symmetric tensor."""
    from math import comb

    return comb(size + rank - 1, rank)


def _calls(statements: tuple[Statement, ...]) -> dict[str, set[tuple[str, ...]]]:
    """With which arguments each name is called; an argument that is no plain name counts as a blank."""
    found: dict[str, set[tuple[str, ...]]] = {}
    waiting: list[Node] = [s.body for s in statements if hasattr(s, "body") and not isinstance(s.body, Array)]
    while waiting:
        node = waiting.pop()
        if isinstance(node, Call):
            arguments = tuple(a.name if isinstance(a, Name) else "" for a in node.arguments)
            found.setdefault(node.name, set()).add(arguments)
        waiting.extend(parts(node))
    return found


def names_in(node: Node) -> set[str]:
    """Every name that a formula mentions, called or not."""
    found: set[str] = set()
    waiting = [node]
    while waiting:
        here = waiting.pop()
        if isinstance(here, (Name, Call)):
            found.add(here.name)
        waiting.extend(parts(here))
    return found


def _is_constant(s: Assignment) -> bool:
    return not names_in(s.body) - set(CONSTANTS) - set(FUNCTIONS)
