"""What is said where a formula can't go on, in the words of somebody who writes actions."""

from __future__ import annotations

from quarterturn.errors import NotationError
from quarterturn.notation.tokens import Lexeme, Source

OPENERS = {"OPEN": "(", "CALL_OPEN": "(", "AT_OPEN": "(", "SQUARE_OPEN": "[", "ANGLE_OPEN": "<", "BAR_OPEN": "|"}
CLOSERS = {"CLOSE": "(", "SQUARE_CLOSE": "[", "ANGLE_CLOSE": "<", "ANGLE_CONNECTED": "<", "BAR_CLOSE": "|"}
PARTNERS = {"(": ")", "[": "]", "<": ">", "|": "|"}
OPERATORS = {"PLUS": "+", "MINUS": "-", "TIMES": "*", "OVER": "/", "DOT": "."}


def unexpected(source: Source, tokens: list[Lexeme], place: int) -> NotationError:
    """The complaint about token number `place`; `len(tokens)` stands for the end."""
    before = tokens[place - 1] if place else None
    here = tokens[place] if place < len(tokens) else None
    written = source.text[here.start : here.end] if here else ""
    start, end = (here.start, here.end) if here else (tokens[-1].end, tokens[-1].end + 1)
    opened = _open_bracket(tokens[:place])
    if before and before.kind == "CARET":
        base = tokens[place - 2].value if place > 1 else "q"
        return source.error(f"a power needs an exponent, such as {base}^4", start, end)
    if here is None:
        if before and before.kind in OPERATORS:
            words = f"the formula ends in {OPERATORS[before.kind]!r}: a term is missing after it"
            return source.error(words, before.start, before.end, _without_end(source, tokens))
        if opened:
            partner = PARTNERS[OPENERS[opened.kind]]
            words = f"this bracket is never closed: {partner} is missing"
            return source.error(words, opened.start, opened.end, _closed(source, tokens, partner))
        return source.error("the formula ends too early", start, end)
    if opened and opened.kind == "SQUARE_OPEN" and here.kind not in ("COMMA", *CLOSERS):
        words = "an index is a number or a letter, and ] closes its bracket, as in r[1] and r[a]"
        return source.error(words, opened.start, end)
    if here.kind == "ANGLE_CLOSE" and not opened:
        words = (
            f"{written!r} closes no bracket: an expectation value begins with <, and a comparison stands in a case, "
            "as in {q^2 where q > 1, q otherwise}"
        )
        return source.error(words, start, end)
    if here.kind in CLOSERS and not opened:
        return source.error(f"{written!r} closes a bracket that was never opened", start, end)
    if here.kind in CLOSERS and opened and OPENERS[opened.kind] != CLOSERS[here.kind]:
        partner = PARTNERS[OPENERS[opened.kind]]
        return source.error(f"{written!r} can't close {OPENERS[opened.kind]!r}: {partner!r} was expected", start, end)
    if here.kind in CLOSERS and before and before.kind in OPENERS:
        return source.error("there is nothing between the brackets", before.start, end)
    if here.kind == "SUM_OVER" and before and before.kind in (*OPERATORS, "ROOT", "MEAN", "DERIVATIVE"):
        words = f"a sum over an index behind another sign stands in round brackets: ({written} …)"
        return source.error(words, start, end, f"({written} …)")
    if here.kind == "PRIME" and (before is None or before.kind in (*OPERATORS, *OPENERS, "COMMA", "EQUALS")):
        words = "a prime stands behind a path, as in q'; a text, such as the name of a file, stands in double quotes"
        return source.error(words, start, end)
    if before and before.kind in OPERATORS:
        return source.error(f"a term is missing between {before.value!r} and {written!r}", before.start, end)
    if here.kind == "EQUALS":
        return source.error("one = is enough: name = formula", start, end)
    if here.kind == "PRIME" and before and before.kind == "NUMBER":
        return source.error("a number has no derivative: the prime belongs to a path, as in q'^2", start, end)
    if here.kind == "SUPERSCRIPT" or (here.kind == "CARET" and before and before.kind in ("CARET", "SUPERSCRIPT")):
        return source.error("two exponents in a row: write one power, such as q^4", start, end)
    if here.kind == "COMMA":
        if opened:
            return source.error("a comma has no place inside this bracket", start, end)
        words = "the formula ends before this comma; another statement stands on its own line, or after ;"
        return source.error(words, start, end)
    if here.kind in OPERATORS or here.kind == "CARET":
        return source.error(f"a term is missing before {written!r}", start, end)
    return source.error(f"{written!r} can't stand here; a term or an operator was expected", start, end)


def _open_bracket(tokens: list[Lexeme]) -> Lexeme | None:
    stack: list[Lexeme] = []
    for token in tokens:
        if token.kind in OPENERS:
            stack.append(token)
        elif token.kind in CLOSERS and stack:
            stack.pop()
    return stack[-1] if stack else None


def _closed(source: Source, tokens: list[Lexeme], partner: str) -> str:
    return source.text[tokens[0].start : tokens[-1].end] + partner


def _without_end(source: Source, tokens: list[Lexeme]) -> str:
    return source.text[tokens[0].start : tokens[-1].start].rstrip()
