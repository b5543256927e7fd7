"""How a body is cut into statements: at line ends and semicolons.

A comment runs from "#" to the end of its line. A line that begins with an operator goes on with the one before it, a
line that ends in one goes on with the next, and so does a list of measurements or of lattice settings behind a comma.
Braces and square brackets may go on over several lines.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from quarterturn.notation.symbols import NAME
from quarterturn.notation.vocabulary import Piece

BEGINS_WITH_OPERATOR = re.compile(r"\s*[-+*/−–·×⋅]")
ENDS_WITH_OPERATOR = re.compile(r"[-+/−–·×⋅=]\s*\Z")
LIST = re.compile(r"\s*(?:measure|lattice|units)\b(?!\s*=(?!=))")
WORD = re.compile(r"\s*(?:measure|lattice|units|metric)\b")
VALUE = re.compile(rf"\s*(?!(?:a(?:_[txyz])?|beta|β)\s*=){NAME}\s*=\s*[-+−–.]?\s*[0-9]|\s*(?:LE|L|H|SE)\s*=")
STATEMENT = re.compile(
    rf"\s*{NAME}\s*(?:[(\[][^()\[\]\n]*[)\]]\s*)*=(?!=)|\s*{NAME}\s*(?:\[[^\[\]\n]*\]\s*)?\(\s*t\s*[,)]"
)


def without_comments(text: str) -> str:
    """The body with blanks in the place of comments, so that places stay what they are."""
    return re.sub(r"#[^\n]*", lambda m: " " * len(m.group()), text.replace("\r", " "))


def pieces(text: str) -> Iterator[Piece]:
    """The statements of a body without comments."""
    start = 0
    kept: list[Piece] = []
    for cut in [*_cuts(text), len(text)]:
        if text[start:cut].strip():
            blank = bool(kept) and text[kept[-1].end : start].strip(" \t\n") == ""
            if blank and _goes_on(text, kept[-1], start, cut):
                kept[-1] = Piece(kept[-1].start, cut)
            else:
                kept.append(Piece(start, cut))
        start = cut + 1
    yield from (_without_trailing_comma(text, piece) for piece in kept)


def _goes_on(text: str, before: Piece, start: int, cut: int) -> bool:
    """Whether a line belongs to the statement before it."""
    if BEGINS_WITH_OPERATOR.match(text, start, cut):
        return True
    tail = text[before.start : before.end].rstrip()
    if WORD.match(text, start, cut):
        return False
    if tail.endswith(","):
        return bool(LIST.match(tail)) and not VALUE.match(text, start, cut)
    return bool(ENDS_WITH_OPERATOR.search(tail[-9:])) and not (WORD.match(tail) or STATEMENT.match(text, start, cut))


def _without_trailing_comma(text: str, piece: Piece) -> Piece:
    """w = 1, at the end of a line: the comma separates nothing."""
    body = text[piece.start : piece.end].rstrip()
    if body.endswith(",") and re.match(rf"\s*{NAME}\s*(?:[(\[][^()\[\]]*[)\]]\s*)*(?:=(?!=)|[,(]|\Z)", body):
        return Piece(piece.start, piece.start + len(body) - 1)
    return piece


def _cuts(text: str) -> list[int]:
    """Where statements end: at line ends and semicolons, but not inside braces and square brackets."""
    inside, everywhere, depth = [], [], 0
    for sign in re.finditer(r"[\n;{}\[\]]", text):
        letter, place = sign.group(), sign.start()
        depth += (letter in "{[") - (letter in "}]")
        if letter in "\n;":
            everywhere.append(place)
            if depth <= 0:
                inside.append(place)
    return everywhere if depth else inside  # a bracket that is never closed swallows nothing
