"""The lattice statement: sites, spacings and what happens at the ends of each direction."""

from __future__ import annotations

import difflib
import re
from dataclasses import replace
from fractions import Fraction

from quarterturn.errors import NotationError
from quarterturn.notation.parse import read_formula
from quarterturn.notation.symbols import BOUNDARIES, COORDINATES, NAME, canonical_name
from quarterturn.notation.tokens import Source
from quarterturn.notation.tree import Boundary, LatticeStatement, Node, Number
from quarterturn.notation.vocabulary import Names, Piece, parts

MOST_DIGITS = 9  # of a number of sites
VACUUM = Fraction(1, 10**6)  # exp(-beta gap) where `beta = vacuum` names no tolerance


def lattice(source: Source, piece: Piece, word: str | None, names: Names) -> LatticeStatement:
    body = source.text[piece.start : piece.end]
    offset = piece.start + len(body) - len(body.lstrip())
    span = source.span(offset, piece.start + len(body.rstrip()))
    inner = Piece(offset + (len("lattice") if word == "lattice" else 0), piece.end)
    extents: tuple[int, ...] = ()
    settings: list[tuple[str, Node]] = []
    boundaries: list[Boundary] = []
    vacuum: Node | None = None
    temperature = ""
    for part in parts(source, inner):
        written = source.text[part.start : part.end]
        text = written.strip()
        if re.fullmatch(r"[0-9]+(\s*[x×*]\s*[0-9]+)*", text):
            if extents:
                sizes = " x ".join(map(str, (*extents, *re.findall("[0-9]+", text))))
                words = "the sites of all directions stand together"
                raise source.error(words, part.start, part.end, f"lattice {sizes}")
            extents = _extents(source, part, text)
        elif re.match(rf"({'|'.join(BOUNDARIES)})\b", text):
            boundaries.append(_boundary(source, part, names))
        elif boundaries and boundaries[-1].kind == "fixed" and re.match(rf"{NAME}\s*\(", text):
            fixed = boundaries.pop()
            boundaries.append(replace(fixed, values=(*fixed.values, _fixed_end(source, part, names))))
        elif cold := re.match(r"\s*(?:beta|β)\s*=\s*vacuum\b", written):
            rest = Piece(part.start + cold.end(), part.end)
            blank = not source.text[rest.start : rest.end].strip()
            vacuum = Number(VACUUM, span) if blank else read_formula(source, rest.start, rest.end, names)
        elif hot := re.match(r"\s*temperature\s*=(?!=)", written):
            temperature = written[hot.end() :].strip()
            if not re.match(r"[0-9.]", temperature):
                words = "a temperature is a number, and its unit where units are named"
                raise source.error(words, part.start + hot.end(), part.end, "temperature = 300 K")
        elif assigned := re.match(r"\s*(a(?:_[txyz])?|beta|β)\s*=(?!=)", written):
            formula = read_formula(source, part.start + assigned.end(), part.end, names)
            if canonical_name(assigned.group(1)) in dict(settings):
                raise source.error(f"{assigned.group(1)} is given twice", part.start, part.end)
            settings.append((canonical_name(assigned.group(1)), formula))
        else:
            raise _no_setting(source, part, text)
    return LatticeStatement(extents, tuple(settings), tuple(boundaries), vacuum, span, temperature)


def _no_setting(source: Source, part: Piece, text: str) -> NotationError:
    start = part.start + source.text[part.start : part.end].index(text)
    end = start + max(len(text), 1)
    if not text:
        return source.error("a setting of the lattice is missing here", max(part.start - 1, 0), part.start)
    if re.fullmatch(r"[0-9]+\s*\^\s*[1-4]|[0-9]+[²³⁴]", text):
        size, power = re.findall(r"[0-9]+|[²³⁴]", text)
        sizes = " x ".join([size] * int("²³⁴".index(power) + 2 if power in "²³⁴" else power))
        return source.error("the sites are written out, one number a direction", start, end, f"lattice {sizes}")
    known = (*BOUNDARIES, "beta", "a", "vacuum", "temperature")
    near = difflib.get_close_matches(re.split(r"[^A-Za-z]", text)[0], known, n=1)
    if near and near[0] != "a" and not text.startswith(near[0]):
        rest = re.sub(r"^[A-Za-z]*", "", text)
        return source.error(f"the lattice has no {text.split()[0]}; there is {near[0]}", start, end, near[0] + rest)
    return source.error(
        "a lattice is written 'lattice 200, a = 0.1', 'lattice beta = 20, a = 0.1', 'lattice 200, beta = 20', "
        "or for a field 'lattice 64 x 64, a = 0.1'",
        start, end,
    )  # fmt: skip


def _boundary(source: Source, part: Piece, names: Names) -> Boundary:
    """periodic, open t, antiperiodic t, twist x = 0.3, fixed q(0) = -1."""
    written = source.text[part.start : part.end]
    match = re.match(rf"\s*({'|'.join(BOUNDARIES)})\b", written)
    assert match is not None
    kind, rest = match.group(1), Piece(part.start + match.end(), part.end)
    behind = source.text[rest.start : rest.end]
    start = part.start + len(written) - len(written.lstrip())
    span = source.span(start, part.start + len(written.rstrip()))
    if kind == "fixed":
        return Boundary(kind, "", (_fixed_end(source, rest, names),), span=span)
    if kind == "twist":
        angle = re.match(r"\s*([txyz])\s*=(?!=)", behind)
        if angle is None:
            raise source.error("a twist names its direction and angle, as in twist x = 0.3", start, part.end)
        formula = read_formula(source, rest.start + angle.end(), rest.end, names)
        return Boundary(kind, angle.group(1), angle=formula, span=span)
    if behind.strip() not in ("", *COORDINATES):
        raise source.error(f"behind {kind} stands a direction, as in {kind} t", rest.start, rest.end)
    return Boundary(kind, behind.strip(), span=span)


def _fixed_end(source: Source, part: Piece, names: Names) -> tuple[str, Node, Node]:
    """q(0) = -1: the field, the place and the value."""
    written = source.text[part.start : part.end]
    match = re.match(rf"\s*({NAME})\s*\(([^()]*)\)\s*=(?!=)", written)
    if match is None:
        raise source.error("a fixed end is written fixed q(0) = -1, q(beta) = 1", part.start, part.end)
    place = read_formula(source, part.start + match.start(2), part.start + match.end(2), names)
    value = read_formula(source, part.start + match.end(), part.end, names)
    return canonical_name(match.group(1)), place, value


def _extents(source: Source, part: Piece, text: str) -> tuple[int, ...]:
    numbers = re.findall(r"\d+", text)
    if any(len(n) > MOST_DIGITS for n in numbers):
        at = part.start + source.text[part.start : part.end].index(text)
        raise source.error(f"a lattice of more than {10**MOST_DIGITS - 1} sites", at, at + len(text))
    return tuple(int(n) for n in numbers)
