"""Declarations: paths and fields, constraints, couplings, tensors, definitions, sources; several stand in one line."""

from __future__ import annotations

import re
from collections.abc import Iterator

from quarterturn.errors import NotationError
from quarterturn.notation.parse import read_formula
from quarterturn.notation.source import Source
from quarterturn.notation.symbols import (
    COMPLEX,
    CONSTANTS,
    FORMS,
    FUNCTIONS,
    MEASURES,
    NAME,
    PIECES,
    RESERVED,
    canonical_name,
)
from quarterturn.notation.tree import Assignment, Constraint, Dynamics, PathStatement, Statement
from quarterturn.notation.vocabulary import Names, Piece, parts

MOST_COMPONENTS = 64
PATH = re.compile(rf"\s*({NAME})\s*(?:\[\s*([0-9]+)\s*\])?\s*\(([^()]*)\)\s*")
GROUP = r"(?:su|u|so|sp|SU|U|SO|SP|Sp)\s*\(\s*[0-9]+\s*\)"
TAIL = re.compile(
    rf"\s*(?:mod\b(?P<mod>.*)|(?P<complex>complex|(?:in|∈)\s*(?:C|ℂ))|(?:in|∈)\s*{GROUP}(?P<group>)|real|(?:in|∈)\s*(?:R|ℝ))?"
    r"\s*\Z",
    re.DOTALL,
)
ASSIGN = re.compile(rf"\s*({NAME})\s*(?:\(([^()]*)\)|\[\s*(?P<entry>[0-9]+(?:\s*,\s*[0-9]+)*)\s*\])?\s*=(?!=)")
CONSTRAINT = re.compile(rf"\s*({NAME})\s*[.·⋅]\s*({NAME})\s*=(?!=)")
OTHER_CONSTRAINT = re.compile(
    rf"\s*(?:\|\s*(?P<length>{NAME})\s*\|(?:\^2|²)?|(?P<square>{NAME})(?:\^2|\*\*2|²)|"
    rf"(?P<indexed>{NAME})\[(?P<i>\w+)\]\s*(?P=indexed)\[(?P=i)\])\s*=(?!=)"
)
FORM = re.compile(rf"\s*({'|'.join(FORMS)})\s*=(?!=)")
PYTHON = re.compile(r"(import|from|def|for|if|while|return|print|lambda|class|with|try)\b(?!\s*[=(])")
BEFORE = re.compile(
    rf"(?P<word>complex|real|field|path|vector|angle|scalar)\s+(?P<path>{NAME}(?:\[[0-9]+\])?\s*\([^()]*\))"
)


def first_look(source: Source, piece: Piece, names: Names) -> None:
    """Enter the names that a line declares."""
    for part in parts(source, piece):
        inside = source.text[part.start : part.end]
        assigned, declared = ASSIGN.match(inside), PATH.match(inside)
        if assigned:
            name = canonical_name(assigned.group(1))
            names.given.add(name)
            if assigned.group(2) is not None:
                names.functions.add(name)
        elif declared:
            name = canonical_name(declared.group(1))
            names.paths[name] = _coordinates(declared.group(3))
            if declared.group(2):
                names.vectors.add(name)
            if re.compile(r"complex|(?:in|∈)\s*[Cℂ]\b").match(inside, declared.end()):
                names.complex.add(name)


def declarations(source: Source, piece: Piece, names: Names) -> Iterator[Statement]:
    """The statements of one line of declarations. Raises NotationError with the place."""
    for part in parts(source, piece):
        body = source.text[part.start : part.end]
        offset = part.start + len(body) - len(body.lstrip())
        end = part.start + len(body.rstrip())
        span = source.span(offset, max(end, offset + 1))
        if form := FORM.match(body):
            yield Dynamics(form.group(1), read_formula(source, part.start + form.end(), part.end, names), span)
        elif assigned := ASSIGN.match(body):
            _check_name(source, assigned, part)
            parameters = _parameters(source, assigned, part)
            formula = read_formula(source, part.start + assigned.end(), part.end, names.inside(parameters))
            yield Assignment(_assigned_name(assigned), parameters, formula, span)
        elif declared := PATH.match(body):
            _check_name(source, declared, part)
            yield _path(source, part, declared, names)
        elif (constrained := CONSTRAINT.match(body)) and constrained.group(1) == constrained.group(2):
            value = read_formula(source, part.start + constrained.end(), part.end, names)
            yield Constraint(canonical_name(constrained.group(1)), value, span)
        else:
            raise _no_statement(source, offset, end, names)


def _check_name(source: Source, left: re.Match[str], part: Piece) -> None:
    name = canonical_name(left.group(1))
    start, end = part.start + left.start(1), part.start + left.end(1)
    if name in RESERVED:
        raise source.error(f"{name} is {RESERVED[name]} and can't be a name", start, end, f"{name}_1")
    if name == "t" or (left.re is PATH and name in _coordinates(left.group(3))):
        raise source.error(f"{name} is a coordinate and can't be a name here", start, end, f"{name}_1")


def _parameters(source: Source, assigned: re.Match[str], part: Piece) -> tuple[str, ...]:
    """The parameters of a definition. Raises NotationError for one that is no name, or stands twice."""
    if assigned.group(2) is None:
        return ()
    start, end = part.start + assigned.start(2), part.start + max(assigned.end(2), assigned.start(2) + 1)
    written = [p.strip() for p in assigned.group(2).split(",")]
    found = tuple(canonical_name(p) for p in written)
    for word, name in zip(written, found, strict=True):
        if not re.fullmatch(NAME, word):
            words = f"{word!r} is no parameter: " if word else ""
            raise source.error(f"{words}a definition has names in its bracket, as in V(q) = …", start - 1, end + 1)
        if name in RESERVED or any(name in table for table in (FUNCTIONS, CONSTANTS, MEASURES, COMPLEX, PIECES)):
            raise source.error(f"{name} has a meaning of its own and can't be a parameter", start, end)
        if found.count(name) > 1:
            raise source.error(f"the parameter {name} stands twice", start, end)
    return found


def _coordinates(inside: str) -> tuple[str, ...]:
    return tuple(canonical_name(c.strip()) for c in inside.split(","))


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
    tail = TAIL.match(source.text, tail_start, part.end)
    span = source.span(part.start + declared.start(1), part.start + len(declared.group().rstrip()))
    if tail is None:
        raise _strange_tail(source, declared, tail_start, part.end)
    period, kind = None, "real"
    if tail["mod"] is not None:
        period = read_formula(source, tail.start("mod"), tail.end("mod"), names)
    elif tail["complex"] is not None:
        kind = "complex"
    elif tail["group"] is not None:
        kind = "group"
    count = int(components) if components and len(components) < 6 else 10**6 if components else 0
    if components and not 1 <= count <= MOST_COMPONENTS:
        words = f"a path of {components} components; 1 to {MOST_COMPONENTS} are possible"
        raise source.error(words, part.start, tail_start)
    return PathStatement(name, count, _coordinates(declared.group(3)), period, kind, span)


def _strange_tail(source: Source, declared: re.Match[str], start: int, end: int) -> NotationError:
    tail, name = source.text[start:end].strip(), declared.group(1)
    behind = re.fullmatch(r"\[\s*([0-9]+)\s*\]", tail)
    if behind:
        words = "the number of components stands behind the name"
        return source.error(words, start, end, f"{name}[{behind.group(1)}]({declared.group(3)})")
    if re.match(r"(?:in|∈)\b", tail):
        return source.error("a field has values in R, in C, or in a group such as su(2)", start, end)
    if "=" in tail or re.match(rf"(?:{'|'.join(FORMS)})\b|{NAME}\s*\(", tail):
        words = "another statement stands behind a comma, behind ; or on its own line"
        return source.error(words, start, end)
    words = "behind a path there may be 'mod' and a period, as in theta(t) mod 2 pi, or 'complex', or a group: in su(2)"
    return source.error(words, start, end)


def _no_statement(source: Source, start: int, end: int, names: Names) -> NotationError:
    body = source.text[start:end]
    if not body.strip():
        return source.error("a declaration is missing between the commas", max(start - 1, 0), max(end, start + 1))
    if "==" in body:
        return source.error("one = is enough: name = formula", start + body.index("=="), start + body.index("==") + 2)
    if python := PYTHON.match(body):
        words = f"{python.group(1)!r} is Python; a cell of notation holds paths, L, couplings, lattice and measure only"
        return source.error(words, start, start + python.end())
    if re.fullmatch(rf"{NAME}", body):
        words = f"{body} alone says nothing: a path is {body}(t), a coupling {body} = 1"
        return source.error(words, start, end, f"{body}(t)")
    number = re.search(r"=\s*([0-9]+),\s*$", source.text[max(start - 40, 0) : start])
    if number and re.fullmatch(r"[0-9]+", body):
        return source.error("a decimal number has a point", start - 1, end, f"{number.group(1)}.{body}")
    if word := re.match(r"(?:lattice|measure|metric|units)\b", body):
        words = f"{word.group()} begins a statement of its own: it stands on its own line, or behind ;"
        return source.error(words, start, start + word.end())
    other = OTHER_CONSTRAINT.match(body)
    name = canonical_name(other["length"] or other["square"] or other["indexed"]) if other else ""
    if names.is_vector(name):
        words = f"a unit vector is constrained by its dot product: {name}.{name} = 1"
        return source.error(words, start, end, f"{name}.{name} = 1")
    if before := BEFORE.match(body):
        behind = before["word"] if before["word"] == "complex" else ""
        words = "a path is declared by its name and its coordinates; what kind it is stands behind them"
        return source.error(words, start, end, f"{before['path']} {behind}".rstrip())
    if colon := re.match(rf"({NAME})\s*:=?", body):
        return source.error("a name is given by =", start, start + colon.end(), f"{colon.group(1)} = …")
    if re.match(r"'''|\"|\\", body):
        return source.error("a cell of notation holds neither texts nor LaTeX: # starts a comment", start, start + 1)
    if "=" in body:
        words = "on the left of = stands a name, a name with arguments such as V(q), or an entry such as g[1,2]"
        return source.error(words, start, start + max(len(body.split("=")[0].rstrip()), 1))
    return source.error(
        "this is no statement: expected a path such as q(t), an action such as L = …, a coupling such as lam = 0.1, "
        "lattice …, or measure …",
        start,
        end,
    )
