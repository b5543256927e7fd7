"""A body of notation becomes statements. What a statement is follows from how it begins."""

from __future__ import annotations

import re
from collections.abc import Iterator

from quarterturn.errors import NotationError
from quarterturn.notation.declarations import ASSIGN, FORM, declarations, first_look
from quarterturn.notation.labels import label_of
from quarterturn.notation.lattice_words import lattice
from quarterturn.notation.lines import pieces, without_comments
from quarterturn.notation.parse import read_formula
from quarterturn.notation.source import Source
from quarterturn.notation.symbols import BOUNDARIES, KEYWORDS, NAME
from quarterturn.notation.tree import Dynamics, Measure, MeasureItem, Metric, Statement, Units
from quarterturn.notation.vocabulary import Names, Piece, parts

LONGEST = 20_000
KEYWORD = re.compile(
    rf"\s*({'|'.join((*KEYWORDS, *BOUNDARIES))})\b(?!\s*=(?!=))(?!\s*\(\s*{NAME}\s*(?:,\s*{NAME}\s*)*\)\s*(?:=|\Z))"
)


def parse(text: str) -> tuple[Statement, ...]:
    """All statements of a body, in order. Raises NotationError with the place."""
    if len(text) > LONGEST:
        raise NotationError(f"the body has {len(text)} letters; {LONGEST} are the most")
    source = Source(without_comments(text))
    try:
        found = _read(source)
    except NotationError as trouble:
        trouble.text = text if trouble.span else None
        raise
    except RecursionError:  # brackets are counted by the parser; this is for towers of powers and the like
        raise NotationError("the formulas of this cell are nested too deeply to be read") from None
    if not found:
        raise NotationError(
            "the cell is empty: declare a path such as q(t) and an action such as L = 1/2 q'^2 - 1/2 q^2"
        )
    return found


def _read(source: Source) -> tuple[Statement, ...]:
    found = list(pieces(source.text))
    names = Names()
    for piece in found:
        body = source.text[piece.start : piece.end]
        if not (_keyword(body) or FORM.match(body)):
            first_look(source, piece, names)
    return tuple(s for piece in found for s in _statements(source, piece, names))


def _keyword(body: str) -> str | None:
    match = KEYWORD.match(body)
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
        yield Units(_units(source, offset + len("units"), piece.end), span)
    elif form := FORM.match(body):
        yield Dynamics(form.group(1), read_formula(source, piece.start + form.end(), piece.end, names), span)
    else:
        yield from declarations(source, piece, names)


def _units(source: Source, start: int, end: int) -> tuple[str, ...]:
    """The names of the units as they are written, one blank where there were several."""
    start, end = _trimmed(source.text, start, end)
    named = [part.strip() for part in source.text[start:end].split(",")]
    if not all(named) and named != [""]:
        raise source.error("a unit is missing between the commas, as in units amu, angstrom, 1/cm", start, end)
    return tuple(re.sub(r"\s+", " ", name) for name in named if name)


def _signature(source: Source, start: int, end: int) -> str:
    start, end = _trimmed(source.text, start, end)
    text = re.sub(r"\s+", " ", source.text[start:end]).replace("−", "-").replace("–", "-")
    if text in ("mostly minus", "mostly plus"):
        return text
    tight = re.sub(r"diag|[ (),1]", "", text)
    if re.fullmatch(r"\+-{0,3}|-\+{0,3}", tight):
        return tight
    words = "a metric is +---, -+++ (time first), or 'mostly minus', 'mostly plus'"
    if re.fullmatch(r"\+{1,4}", tight):
        words += "; in imaginary time write LE = … and no metric"
    elif re.fullmatch(r"-+\+|\++-", tight):
        words += "; time comes first"
    raise source.error(words, start, end, {"---+": "metric +---", "+++-": "metric -+++"}.get(tight))


def _trimmed(text: str, start: int, end: int) -> tuple[int, int]:
    body = text[start:end]
    begin = start + len(body) - len(body.lstrip())
    return min(begin, max(end - 1, start)), max(start + len(body.rstrip()), begin + 1)


def _measure(source: Source, piece: Piece, names: Names) -> Measure:
    body = source.text[piece.start : piece.end]
    offset = piece.start + body.index("measure") + len("measure")
    items = []
    for part in parts(source, Piece(offset, piece.end)):
        inside = source.text[part.start : part.end]
        if not inside.strip():
            words = "a measurement is missing here, such as <q^2>"
            raise source.error(words, part.start - 1, part.start)
        label = ASSIGN.match(inside)
        formula_start = part.start + (label.end() if label else 0)
        given = label_of(inside[: label.end() - 1]) if label else ""
        formula = read_formula(source, formula_start, part.end, names)
        written = label_of(source.text[formula_start : part.end])
        span = source.span(part.start + len(inside) - len(inside.lstrip()), part.start + len(inside.rstrip()))
        items.append(MeasureItem(given, f"{given} = {written}" if given else written, formula, span))
    return Measure(tuple(items), source.span(piece.start, piece.end))
