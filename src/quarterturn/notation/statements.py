"""A body of notation becomes statements: one a line, or several with ";" between them.

A comment runs from "#" to the end of its line. A line that begins with an operator goes on with the one before it.
What a statement is follows from how it begins.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from quarterturn.errors import NotationError
from quarterturn.notation.labels import label_of
from quarterturn.notation.lattice_words import BOUNDARIES, lattice
from quarterturn.notation.parse import read_formula
from quarterturn.notation.symbols import canonical_name
from quarterturn.notation.tokens import Source
from quarterturn.notation.tree import (
    Assignment,
    Constraint,
    Dynamics,
    Measure,
    MeasureItem,
    Metric,
    PathStatement,
    Statement,
    Units,
)
from quarterturn.notation.vocabulary import NAME, Names, Piece, parts

LONGEST = 20_000
PATH = re.compile(rf"\s*({NAME})\s*(?:\[\s*(\d+)\s*\])?\s*\(([^()]*)\)\s*")
PATH_TAIL = re.compile(r"\s*(?:mod\b(?P<mod>.*)|(?P<complex>complex)|in\s+(?P<group>\S+))?\s*$", re.DOTALL)
ASSIGN = re.compile(rf"\s*({NAME})\s*(?:\(([^()]*)\)|\[\s*(?P<entry>\d+(?:\s*,\s*\d+)*)\s*\])?\s*=(?!=)")
CONSTRAINT = re.compile(rf"\s*({NAME})\s*[.·]\s*({NAME})\s*=(?!=)")
FORM = re.compile(r"\s*(LE|L|H|SE)\s*=(?!=)")


def parse(text: str) -> tuple[Statement, ...]:
    """All statements of a body, in order. Raises NotationError with the place."""
    if len(text) > LONGEST:
        raise NotationError(f"the body has {len(text)} letters; {LONGEST} are the most")
    source = Source(_without_comments(text))
    shown = Source(text)
    try:
        pieces = list(_pieces(source.text))
        names = _first_look(source, pieces)
        found = [s for piece in pieces for s in _statements(source, piece, names)]
    except NotationError as trouble:
        trouble.text = shown.text if trouble.span else None
        raise
    if not found:
        raise NotationError(
            "the cell is empty: declare a path such as q(t) and an action such as L = 1/2 q'^2 - 1/2 q^2"
        )
    return tuple(found)


def _without_comments(text: str) -> str:
    return re.sub(r"#[^\n]*", lambda m: " " * len(m.group()), text.replace("\r", " "))


def _pieces(text: str) -> Iterator[Piece]:
    start = 0
    kept: list[Piece] = []
    for cut in [*_cuts(text), len(text)]:
        if text[start:cut].strip():
            goes_on = (
                kept and re.match(r"\s*[-+*/−·]", text[start:cut]) and text[kept[-1].end : start].strip(" \t\n") == ""
            )
            if goes_on:
                kept[-1] = Piece(kept[-1].start, cut)
            else:
                kept.append(Piece(start, cut))
        start = cut + 1
    yield from kept


def _cuts(text: str) -> list[int]:
    """Where statements end: at line ends and semicolons, but not inside braces and square brackets."""
    inside, everywhere, depth = [], [], 0
    for i, letter in enumerate(text):
        depth += (letter in "{[") - (letter in "}]")
        if letter in "\n;":
            everywhere.append(i)
            if depth <= 0:
                inside.append(i)
    return everywhere if depth else inside  # a bracket that is never closed swallows nothing


def _first_look(source: Source, pieces: list[Piece]) -> Names:
    names = Names()
    for piece in pieces:
        body = source.text[piece.start : piece.end]
        if _keyword(body) or FORM.match(body):
            continue
        for part in parts(source, piece):
            inside = source.text[part.start : part.end]
            assigned = ASSIGN.match(inside)
            declared = PATH.match(inside)
            if assigned:
                name = canonical_name(assigned.group(1))
                names.given.add(name)
                if assigned.group(2) is not None:
                    names.functions.add(name)
            elif declared:
                coordinates = tuple(canonical_name(c.strip()) for c in declared.group(3).split(","))
                names.paths[canonical_name(declared.group(1))] = coordinates
    return names


def _keyword(body: str) -> str | None:
    match = re.match(rf"\s*(lattice|measure|metric|units|{'|'.join(BOUNDARIES)})\b(?!\s*[=(])", body)
    return match.group(1) if match else None


def _statements(source: Source, piece: Piece, names: Names) -> Iterator[Statement]:
    body = source.text[piece.start : piece.end]
    word = _keyword(body)
    offset = piece.start + len(body) - len(body.lstrip())
    span = source.span(offset, piece.start + len(body.rstrip()))
    if word == "lattice" or word in BOUNDARIES:
        yield lattice(source, piece, word, names)
    elif word == "measure":
        yield _measure(source, piece, names)
    elif word == "metric":
        yield Metric(_signature(source, offset + len("metric"), piece.end), span)
    elif word == "units":
        named = tuple(part.strip() for part in body.split("units", 1)[1].split(",") if part.strip())
        yield Units(named, span)
    elif form := FORM.match(body):
        yield Dynamics(form.group(1), read_formula(source, piece.start + form.end(), piece.end, names), span)
    else:
        yield from _declarations(source, piece, names)


def _declarations(source: Source, piece: Piece, names: Names) -> Iterator[Statement]:

    for part in parts(source, piece):
        body = source.text[part.start : part.end]
        offset = part.start + len(body) - len(body.lstrip())
        end = part.start + len(body.rstrip())
        span = source.span(offset, max(end, offset + 1))
        assigned, declared, constrained = ASSIGN.match(body), PATH.match(body), CONSTRAINT.match(body)
        if assigned:
            parameters = tuple(canonical_name(p.strip()) for p in (assigned.group(2) or "").split(",") if p.strip())
            formula = read_formula(source, part.start + assigned.end(), part.end, names.inside(parameters))
            yield Assignment(_assigned_name(assigned), parameters, formula, span)
        elif declared:
            yield _path(source, part, declared, names)
        elif constrained and constrained.group(1) == constrained.group(2):
            value = read_formula(source, part.start + constrained.end(), part.end, names)
            yield Constraint(canonical_name(constrained.group(1)), value, span)
        else:
            raise _no_statement(source, offset, end)


def _assigned_name(assigned: re.Match[str]) -> str:
    """The name; g[1,2] is g_12, and g_1_12 where an index has two digits."""
    name, entry = canonical_name(assigned.group(1)), assigned.group("entry")
    if entry is None:
        return name
    digits = [d.strip() for d in entry.split(",")]
    return f"{name}_{('_' if any(len(d) > 1 for d in digits) else '').join(digits)}"


def _path(source: Source, part: Piece, declared: re.Match[str], names: Names) -> PathStatement:
    name, components = canonical_name(declared.group(1)), declared.group(2)
    tail_start = part.start + declared.end()
    tail = PATH_TAIL.match(source.text, tail_start, part.end)
    span = source.span(part.start + declared.start(1), part.start + len(declared.group().rstrip()))
    if tail is None:
        raise source.error(
            "after a path there may be 'mod' and a period, as in theta(t) mod 2 pi", tail_start, part.end
        )
    period, kind = None, "real"
    if tail.group("mod") is not None:
        period = read_formula(source, tail.start("mod"), tail.end("mod"), names)
    elif tail.group("complex"):
        kind = "complex"
    elif tail.group("group"):
        kind = "group"
    count = int(components) if components and len(components) < 6 else 10**6 if components else 0
    if components and not 1 <= count <= 64:
        raise source.error(f"a path of {components} components; 1 to 64 are possible", part.start, tail_start)
    coordinates = tuple(canonical_name(c.strip()) for c in declared.group(3).split(","))
    return PathStatement(name, count, coordinates, period, kind, span)


def _no_statement(source: Source, start: int, end: int) -> NotationError:
    body = source.text[start:end]
    if "==" in body:
        return source.error("one = is enough: name = formula", start + body.index("=="), start + body.index("==") + 2)
    python = re.match(r"(import|from|def|for|if|while|return|print|lambda|class)\b", body)
    if python:
        words = f"{python.group(1)!r} is Python; a cell of notation holds paths, L, couplings, lattice and measure only"
        return source.error(words, start, start + python.end())
    name = re.match(rf"({NAME})\s*$", body)
    if name:
        return source.error(
            f"{body} alone says nothing: a path is {body}(t), a coupling {body} = 1", start, end, f"{body}(t)"
        )
    return source.error(
        "this is no statement: expected a path such as q(t), an action such as L = …, a coupling such as lam = 0.1, "
        "lattice …, or measure …",
        start,
        end,
    )


def _signature(source: Source, start: int, end: int) -> str:
    text = re.sub(r"\s+", " ", source.text[start:end]).strip().replace("−", "-")
    if text in ("mostly minus", "mostly plus"):
        return text
    tight = text.replace(" ", "")
    if re.fullmatch(r"\+-{0,3}|-\+{0,3}", tight):
        return tight
    raise source.error("a metric is +---, -+++, or 'mostly minus', 'mostly plus'", start, end)


def _measure(source: Source, piece: Piece, names: Names) -> Measure:
    body = source.text[piece.start : piece.end]
    offset = piece.start + body.index("measure") + len("measure")
    items = []
    for part in parts(source, Piece(offset, piece.end)):
        inside = source.text[part.start : part.end]
        if not inside.strip():
            raise source.error("a measurement is missing here", part.start - 1, part.start)
        label = ASSIGN.match(inside)
        formula_start = part.start + (label.end() if label else 0)
        given = label_of(inside[: label.end() - 1]) if label else ""
        formula = read_formula(source, formula_start, part.end, names)
        written = label_of(source.text[formula_start : part.end])
        span = source.span(part.start + len(inside) - len(inside.lstrip()), part.start + len(inside.rstrip()))
        items.append(MeasureItem(given, f"{given} = {written}" if given else written, formula, span))
    return Measure(tuple(items), source.span(piece.start, piece.end))
