"""Cases in braces: {f where |q| < 1 and q > -3, g where q > 5, h otherwise}."""

from __future__ import annotations

import re
from collections.abc import Iterator

from quarterturn.errors import NotationError
from quarterturn.notation.parse import read_formula
from quarterturn.notation.tokens import Source, Vocabulary
from quarterturn.notation.tree import Cases, Comparison, Node

SIGN = re.compile(r"<=|>=|≤|≥|<|>")
PLAIN = {"≤": "<=", "≥": ">="}
MOST_PIECES = 40
EXAMPLE = "{1/2 q^2 where |q| < 1, |q| - 1/2 otherwise}"


def read_cases(source: Source, start: int, end: int, names: Vocabulary) -> Cases:
    """The cases of source.text[start:end], braces included. Raises NotationError with the place."""
    parts = list(_split(source.text, start + 1, end - 1))
    if len(parts) > MOST_PIECES:
        raise source.error(f"more than {MOST_PIECES} cases", start, end)
    pieces = []
    for begin, stop in parts[:-1]:
        where = _word(source.text, begin, stop, "where")
        if where is None:
            _refuse_if(source, begin, stop)
            raise _no_case(source, begin, stop, "each case says where it holds")
        value = read_formula(source, begin, where.start(), names)
        pieces.append((value, tuple(_conditions(source, where.end(), stop, names))))
    begin, stop = parts[-1]
    last = _word(source.text, begin, stop, "otherwise")
    if last is None or source.text[last.end() : stop].strip():
        _refuse_else(source, begin, stop)
        raise _no_case(source, begin, stop, "the last case ends in 'otherwise'")
    if not pieces and (inner := _word(source.text, begin, stop, "where")):
        raise _no_case(source, inner.start(), stop, "a comma is missing between the cases")
    if not pieces:
        raise source.error(f"a single case needs no braces; several are written {EXAMPLE}", start, end)
    return Cases(tuple(pieces), read_formula(source, begin, last.start(), names), source.span(start, end))


def _no_case(source: Source, begin: int, stop: int, words: str) -> NotationError:
    body = source.text[begin:stop]
    start = min(begin + len(body) - len(body.lstrip()), stop - 1)
    return source.error(f"{words}, as in {EXAMPLE}", start, max(begin + len(body.rstrip()), start + 1))


def _refuse_if(source: Source, begin: int, stop: int) -> None:
    for word in ("if", "when", "for"):
        if found := _word(source.text, begin, stop, word):
            raise source.error("a case says where it holds", found.start(), found.end(), "where")


def _refuse_else(source: Source, begin: int, stop: int) -> None:
    if found := re.compile(r"\b(?:else|elsewhere|other)\b").search(source.text, begin, stop):
        raise source.error("the last case ends in 'otherwise'", found.start(), found.end(), "otherwise")


def _split(text: str, start: int, end: int) -> Iterator[tuple[int, int]]:
    """Pieces between commas outside all brackets."""
    depth, begin = 0, start
    for i in range(start, end):
        depth += (text[i] in "([{") - (text[i] in ")]}")
        if text[i] == "," and depth <= 0:
            yield begin, i
            begin = i + 1
    yield begin, end


def _word(text: str, begin: int, stop: int, word: str) -> re.Match[str] | None:
    return re.compile(rf"\b{word}\b").search(text, begin, stop)


def _conditions(source: Source, start: int, end: int, names: Vocabulary) -> Iterator[Comparison]:
    """Comparisons joined by 'and'; -1 < q < 1 is two of them."""
    begin = start
    while begin <= end:
        joint = _word(source.text, begin, end, "and")
        stop = joint.start() if joint else end
        yield from _chain(source, begin, stop, names)
        begin = joint.end() if joint else end + 1


def _chain(source: Source, start: int, end: int, names: Vocabulary) -> Iterator[Comparison]:
    if odd := re.compile(r"\bor\b|(?<![<>])=+|≠|!=").search(source.text, start, end):
        words = "conditions are comparisons with <, <=, > or >=, joined by 'and'; for 'or', write one more case"
        raise source.error(words, odd.start(), odd.end())
    signs = list(SIGN.finditer(source.text, start, end))
    if not signs:
        raise _no_case(source, start, end, "a condition compares two numbers")
    edges = [start, *(place for sign in signs for place in (sign.start(), sign.end())), end]
    sides: list[Node] = [read_formula(source, edges[i], edges[i + 1], names) for i in range(0, len(edges), 2)]
    for i, sign in enumerate(signs):
        span = source.span(edges[2 * i] + _blanks(source.text, edges[2 * i]), edges[2 * i + 3])
        yield Comparison(sides[i], PLAIN.get(sign.group(), sign.group()), sides[i + 1], span)


def _blanks(text: str, start: int) -> int:
    return len(text[start:]) - len(text[start:].lstrip())
