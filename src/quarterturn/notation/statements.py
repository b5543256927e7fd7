"""A body of notation becomes statements: one a line, or several with ";" between them.

A comment runs from "#" to the end of its line. A line that begins with an operator goes on with the one before it.
What a statement is follows from how it begins.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction

from quarterturn.errors import NotationError
from quarterturn.notation.parse import read_formula
from quarterturn.notation.symbols import FUNCTIONS, LATER, LETTERS, MEASURES, canonical_name
from quarterturn.notation.tokens import Lexeme, Source, evaluation_of_path, lexemes
from quarterturn.notation.tree import (
    Assignment,
    Boundary,
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

LONGEST = 20_000
MOST_DIGITS = 9  # of a number of sites
G = "".join(LETTERS)
NAME = rf"[A-Za-z{G}][A-Za-z0-9_{G}]*"
PATH = re.compile(rf"\s*({NAME})\s*(?:\[\s*(\d+)\s*\])?\s*\(([^()]*)\)\s*")
PATH_TAIL = re.compile(r"\s*(?:mod\b(?P<mod>.*)|(?P<complex>complex)|in\s+(?P<group>\S+))?\s*$", re.DOTALL)
ASSIGN = re.compile(rf"\s*({NAME})\s*(?:\(([^()]*)\))?\s*=(?!=)")
FORM = re.compile(r"\s*(LE|L|H|SE)\s*=(?!=)")
BOUNDARIES = ("periodic", "open", "antiperiodic", "twist", "fixed")


@dataclass(frozen=True)
class Piece:
    start: int
    end: int


@dataclass
class Names:
    """What a first look at the body finds: which names are paths, and which are functions."""

    paths: dict[str, tuple[str, ...]]
    functions: set[str]

    def is_call(self, name: str, rest: str) -> bool:
        if name in self.paths:
            return evaluation_of_path(rest, (*self.paths[name], "t"))
        return name in self.functions or name in FUNCTIONS or name in MEASURES or name in LATER


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
    cuts = [m.start() for m in re.finditer(r"[\n;]", text)] + [len(text)]
    kept: list[Piece] = []
    for cut in cuts:
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


def _first_look(source: Source, pieces: list[Piece]) -> Names:
    names = Names({}, set())
    for piece in pieces:
        body = source.text[piece.start : piece.end]
        if _keyword(body) or FORM.match(body):
            continue
        for part in _parts(source, piece):
            inside = source.text[part.start : part.end]
            assigned = ASSIGN.match(inside)
            declared = PATH.match(inside)
            if assigned and assigned.group(2) is not None:
                names.functions.add(canonical_name(assigned.group(1)))
            elif declared and not assigned:
                coordinates = tuple(c.strip() for c in declared.group(3).split(","))
                names.paths[canonical_name(declared.group(1))] = coordinates
    return names


def _keyword(body: str) -> str | None:
    match = re.match(rf"\s*(lattice|measure|metric|units|{'|'.join(BOUNDARIES)})\b(?!\s*[=(])", body)
    return match.group(1) if match else None


def _parts(source: Source, piece: Piece) -> Iterator[Piece]:
    """Split at commas outside all brackets."""
    depth, start, text = 0, piece.start, source.text
    for i in range(piece.start, piece.end):
        letter = text[i]
        depth += (letter in "([<⟨") - (letter in ")]>⟩")
        if letter == "," and depth <= 0:
            yield Piece(start, i)
            start = i + 1
    yield Piece(start, piece.end)


def _statements(source: Source, piece: Piece, names: Names) -> Iterator[Statement]:
    body = source.text[piece.start : piece.end]
    word = _keyword(body)
    offset = piece.start + len(body) - len(body.lstrip())
    span = source.span(offset, piece.start + len(body.rstrip()))
    if word == "lattice" or word in BOUNDARIES:
        yield _lattice(source, piece, word, names)
    elif word == "measure":
        yield _measure(source, piece, names)
    elif word == "metric":
        yield Metric(_signature(source, offset + len("metric"), piece.end), span)
    elif word == "units":
        named = tuple(part.strip() for part in body.split("units", 1)[1].split(",") if part.strip())
        yield Units(named, span)
    elif form := FORM.match(body):
        yield Dynamics(form.group(1), read_formula(source, piece.start + form.end(), piece.end, names.is_call), span)
    else:
        yield from _declarations(source, piece, names)


def _declarations(source: Source, piece: Piece, names: Names) -> Iterator[Statement]:
    parts = list(_parts(source, piece))
    for part in parts:
        body = source.text[part.start : part.end]
        offset = part.start + len(body) - len(body.lstrip())
        end = part.start + len(body.rstrip())
        span = source.span(offset, max(end, offset + 1))
        assigned, declared = ASSIGN.match(body), PATH.match(body)
        if assigned:
            parameters = tuple(canonical_name(p.strip()) for p in (assigned.group(2) or "").split(",") if p.strip())
            formula = read_formula(source, part.start + assigned.end(), part.end, _with(names, parameters))
            yield Assignment(canonical_name(assigned.group(1)), parameters, formula, span)
        elif declared:
            yield _path(source, part, declared, names)
        elif re.match(r"\s*\w+\.\w+\s*=\s*1\s*$", body):
            value = read_formula(source, part.start + body.index("=") + 1, part.end, names.is_call)
            yield Constraint(canonical_name(body.split(".")[0].strip()), value, span)
        else:
            raise _no_statement(source, offset, end)


def _with(names: Names, parameters: tuple[str, ...]) -> Callable[[str, str], bool]:
    return lambda name, rest: name not in parameters and names.is_call(name, rest)


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
        period = read_formula(source, tail.start("mod"), tail.end("mod"), names.is_call)
    elif tail.group("complex"):
        kind = "complex"
    elif tail.group("group"):
        kind = "group"
    count = int(components) if components and len(components) < 6 else 10**6 if components else 0
    if components and not 1 <= count <= 64:
        raise source.error(f"a path of {components} components; 1 to 64 are possible", part.start, tail_start)
    coordinates = tuple(c.strip() for c in declared.group(3).split(","))
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
    if re.fullmatch(r"\+-{0,3}|-\+{0,3}", text):
        return text
    raise source.error("a metric is +---, -+++, or 'mostly minus', 'mostly plus'", start, end)


def _lattice(source: Source, piece: Piece, word: str | None, names: Names) -> LatticeStatement:
    body = source.text[piece.start : piece.end]
    offset = piece.start + len(body) - len(body.lstrip())
    span = source.span(offset, piece.start + len(body.rstrip()))
    if word in BOUNDARIES:
        return LatticeStatement((), (), (Boundary(str(word), span=span),), None, span)
    inner = Piece(offset + len("lattice"), piece.end)
    extents: tuple[int, ...] = ()
    settings = []
    boundary = ""
    for part in _parts(source, inner):
        text = source.text[part.start : part.end].strip()
        if re.fullmatch(r"\d+(\s*[x×]\s*\d+)*", text):
            extents = _extents(source, part, text)
        elif named := re.match(rf"({'|'.join(BOUNDARIES)})\b", text):
            boundary = named.group(1)
        elif boundary == "fixed" and re.match(rf"{NAME}\s*\(", text):
            continue  # the other end: fixed q(0) = -1, q(beta) = 1
        elif assigned := re.match(r"\s*(a|beta|β)\s*=(?!=)", source.text[part.start : part.end]):
            formula = read_formula(source, part.start + assigned.end(), part.end, names.is_call)
            settings.append((canonical_name(assigned.group(1)), formula))
        else:
            raise source.error(
                "a lattice is written 'lattice 200, a = 0.1', 'lattice beta = 20, a = 0.1' or 'lattice 200, beta = 20'",
                part.start, part.end,
            )  # fmt: skip
    edges = (Boundary(boundary, span=span),) if boundary else ()
    return LatticeStatement(extents, tuple(settings), edges, None, span)


def _extents(source: Source, part: Piece, text: str) -> tuple[int, ...]:
    numbers = re.findall(r"\d+", text)
    if any(len(n) > MOST_DIGITS for n in numbers):
        at = part.start + source.text[part.start : part.end].index(text)
        raise source.error(f"a lattice of more than {10**MOST_DIGITS - 1} sites", at, at + len(text))
    return tuple(int(n) for n in numbers)


def _measure(source: Source, piece: Piece, names: Names) -> Measure:
    body = source.text[piece.start : piece.end]
    offset = piece.start + body.index("measure") + len("measure")
    items = []
    for part in _parts(source, Piece(offset, piece.end)):
        inside = source.text[part.start : part.end]
        if not inside.strip():
            raise source.error("a measurement is missing here", part.start - 1, part.start)
        if functional := re.search(r"\blog\s*Z\b(\s*\[[^\]]*\])?", inside):
            words = (
                "log Z[J] needs a source J(t), which is not available yet; <q> and <q(t) q(0)>_c are its derivatives"
            )
            raise source.error(words, part.start + functional.start(), part.start + functional.end())
        label = ASSIGN.match(inside)
        formula_start = part.start + (label.end() if label else 0)
        given = label_of(inside[: label.end() - 1]) if label else ""
        formula = read_formula(source, formula_start, part.end, names.is_call)
        written = label_of(source.text[formula_start : part.end])
        span = source.span(part.start + len(inside) - len(inside.lstrip()), part.start + len(inside.rstrip()))
        items.append(MeasureItem(given, f"{given} = {written}" if given else written, formula, span))
    return Measure(tuple(items), source.span(piece.start, piece.end))


def label_of(text: str) -> str:
    """The canonical spelling of a measurement's text: how it is called in results."""
    source = Source(text)
    tokens = lexemes(source, 0, len(text), lambda name, rest: True)
    return "".join(_spaced(tokens))


SPELT = {"TIMES": "*", "MINUS": "-", "DOT": ".", "ANGLE_OPEN": "<", "ANGLE_CLOSE": ">", "ANGLE_CONNECTED": ">_c",
         "PRIME": "'", "CARET": "^"}  # fmt: skip
TIGHT_BEFORE = {"CLOSE", "SQUARE_CLOSE", "ANGLE_CLOSE", "ANGLE_CONNECTED", "BAR_CLOSE", "PRIME", "BANG", "COMMA",
                "CARET", "OVER", "DOT", "CALL_OPEN", "AT_OPEN", "SQUARE_OPEN", "SUPERSCRIPT"}  # fmt: skip
TIGHT_AFTER = {"OPEN", "CALL_OPEN", "AT_OPEN", "SQUARE_OPEN", "ANGLE_OPEN", "BAR_OPEN", "CARET", "OVER", "DOT", "ROOT"}


def _spaced(tokens: list[Lexeme]) -> Iterator[str]:
    for i, token in enumerate(tokens):
        value = SPELT.get(token.kind, token.value)
        if token.kind == "SUPERSCRIPT":
            value = "^" + value
        elif token.kind == "NUMBER" and "/" not in value:
            value = _number(value)
        unary = token.kind in ("MINUS", "PLUS") and (
            i == 0 or tokens[i - 1].kind in TIGHT_AFTER or tokens[i - 1].kind == "COMMA"
        )
        after_unary = (
            i > 0
            and tokens[i - 1].kind in ("MINUS", "PLUS")
            and (i == 1 or tokens[i - 2].kind in TIGHT_AFTER or tokens[i - 2].kind == "COMMA")
        )
        tight = i == 0 or token.kind in TIGHT_BEFORE or tokens[i - 1].kind in TIGHT_AFTER or after_unary
        yield value if tight or (unary and i == 0) else " " + value


def _number(text: str) -> str:
    value = Fraction(text) if "e" not in text.lower() else None
    if value is None:
        return text.lower()
    return f"{float(value):.15g}"
