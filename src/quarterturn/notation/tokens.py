"""Tokens of a formula, each with its place; letters of every accepted spelling, and a clear word about the others."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Callable, Collection
from dataclasses import dataclass

from quarterturn.errors import NotationError, Span
from quarterturn.notation.symbols import FRACTIONS, LETTERS, SUPERSCRIPTS, canonical_name

LONGEST_NUMBER = 60  # digits
GREEK = "".join(LETTERS)
DOTTED = {"ẋ": "x", "ẏ": "y", "ż": "z", "ṙ": "r", "ṗ": "p", "ė": "e", "ḟ": "f", "ġ": "g", "ḣ": "h", "ṡ": "s"}
PATTERN = re.compile(
    rf"""(?P<SPACE>[ \t\u00a0\n]+)
    |(?P<NUMBER>\d+(?:\.\d+)?(?:[eE][+-]?\d+)?|\d+\.(?![A-Za-z{GREEK}(])|\.\d+(?:[eE][+-]?\d+)?)
    |(?P<D_T>(?:d_t|∂_t|∂ₜ)(?![A-Za-z0-9_]))
    |(?P<NAME>[A-Za-z{GREEK}][A-Za-z0-9_{GREEK}]*)
    |(?P<DOTTED>[{"".join(DOTTED)}])
    |(?P<STARS>\*\*)
    |(?P<ANGLE_CONNECTED>[>⟩]_c(?![A-Za-z0-9_]))
    |(?P<SIGN>['′\u0307^*/+\-−·.×!,()\[\]|<>⟨⟩√{"".join(SUPERSCRIPTS)}{"".join(FRACTIONS)}=])""",
    re.VERBOSE,
)
KINDS = {
    "'": "PRIME", "′": "PRIME", "\u0307": "PRIME", "^": "CARET", "*": "TIMES", "×": "TIMES", "/": "OVER", "+": "PLUS",
    "-": "MINUS", "−": "MINUS", "·": "DOT", ".": "DOT", "!": "BANG", ",": "COMMA", "(": "OPEN", ")": "CLOSE",
    "[": "SQUARE_OPEN", "]": "SQUARE_CLOSE", "<": "ANGLE_OPEN", "⟨": "ANGLE_OPEN", ">": "ANGLE_CLOSE",
    "⟩": "ANGLE_CLOSE", "√": "ROOT", "=": "EQUALS",
}  # fmt: skip
TWINS = dict(zip("аеорсхуіјѕАВЕКМНОРСТХ", "aeopcxyijsABEKMHOPCTX", strict=True))  # Cyrillic letters that look Latin
ENDS_OPERAND = {"NUMBER", "NAME", "CLOSE", "SQUARE_CLOSE", "PRIME", "BANG", "SUPERSCRIPT", "ANGLE_CLOSE",
                "ANGLE_CONNECTED", "BAR_CLOSE"}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Lexeme:
    """A token before it meets the parser. `start` and `end` are offsets in the whole text."""

    kind: str
    value: str
    start: int
    end: int


@dataclass(frozen=True)
class Source:
    """The whole text of a cell, and how an offset becomes a place."""

    text: str

    def span(self, start: int, end: int) -> Span:
        before = self.text[:start]
        line = before.count("\n") + 1
        column = start - (before.rfind("\n") + 1) + 1
        inner = self.text[start:end]
        end_line = line + inner.count("\n")
        end_column = column + len(inner) if end_line == line else len(inner) - inner.rfind("\n")
        return Span(line, column, end_line, max(end_column, column + 1) if end_line == line else end_column)

    def error(self, message: str, start: int, end: int, repair: str | None = None) -> NotationError:
        return NotationError(message, span=self.span(start, end), text=self.text, repair=repair)


def lexemes(source: Source, start: int, end: int, is_call: Callable[[str, str], bool]) -> list[Lexeme]:
    """Tokens of source.text[start:end]; `is_call(name, rest)` says whether a name followed by "(" is called.

    Raises NotationError for a letter that the notation does not have.
    """
    found: list[Lexeme] = []
    position, bars = start, 0
    while position < end:
        match = PATTERN.match(source.text, position, end)
        if match is None or match.lastgroup is None:
            raise source.error(_strange(source.text[position]), position, position + 1)
        kind, value, stop = match.lastgroup, match.group(), match.end()
        if kind == "SPACE":
            position = stop
            continue
        if kind == "NUMBER" and len(value) > LONGEST_NUMBER:
            raise source.error(f"a number of more than {LONGEST_NUMBER} digits", position, stop)
        if kind == "DOTTED":
            found += [Lexeme("NAME", DOTTED[value], position, stop), Lexeme("PRIME", "'", position, stop)]
            position = stop
            continue
        if kind == "STARS":
            kind = "CARET"
        elif kind == "NAME":
            value = canonical_name(value)
            kind = "MEAN" if value == "mean" else "NAME"
        elif kind == "SIGN":
            kind, value, bars = _sign(value, found, bars)
        if (
            kind == "OPEN"
            and found
            and found[-1].kind == "NAME"
            and is_call(found[-1].value, source.text[position:end])
        ):
            kind = "CALL_OPEN"
        elif kind == "OPEN" and (path := _derived(found)) and is_call(path, source.text[position:end]):
            words = f"a velocity has no bracket: {path}' is taken at the time t; write {path}'"
            raise source.error(words, position, source.text.find(")", position, end) + 1 or end, f"{path}'")
        elif kind == "OPEN" and _is_component(found) and is_call(found[-4].value, source.text[position:end]):
            kind = "AT_OPEN"
        found.append(Lexeme(kind, value, position, stop))
        position = stop
    return found


def _is_component(found: list[Lexeme]) -> bool:
    """Whether what was read last is a component such as r[2]."""
    return [lexeme.kind for lexeme in found[-4:]] == ["NAME", "SQUARE_OPEN", "NUMBER", "SQUARE_CLOSE"]


def _derived(found: list[Lexeme]) -> str:
    """The name of which a derivative was read last, such as q in q', or nothing."""
    return found[-2].value if [lexeme.kind for lexeme in found[-2:]] == ["NAME", "PRIME"] else ""


def _sign(value: str, found: list[Lexeme], bars: int) -> tuple[str, str, int]:
    if value in SUPERSCRIPTS:
        return "SUPERSCRIPT", SUPERSCRIPTS[value], bars
    if value in FRACTIONS:
        top, bottom = FRACTIONS[value]
        return "NUMBER", f"{top}/{bottom}", bars
    if value == "|":
        after_operand = bool(found) and found[-1].kind in ENDS_OPERAND
        if bars and after_operand:
            return "BAR_CLOSE", value, bars - 1
        return "BAR_OPEN", value, bars + 1
    return KINDS[value], value, bars


def _strange(letter: str) -> str:
    name = unicodedata.name(letter, "")
    if unicodedata.category(letter).startswith("C"):
        return f"a control character (U+{ord(letter):04X}) has no place in an action"
    plain = TWINS.get(letter, unicodedata.normalize("NFKD", letter))
    if letter.isalpha() and name:
        twin = f"; did you mean the Latin letter {plain}?" if plain.isascii() and plain != letter else ""
        return f"the letter {letter} ({name.lower()}) is not one of the notation{twin}"
    return f"{letter!r} has no meaning in the notation"


def evaluation_of_path(rest: str, coordinates: Collection[str]) -> bool:
    """Whether a bracket after a path holds times only, as in q(t), q(0), q(1.5), q(beta); otherwise it multiplies."""
    match = re.match(r"\(([^()]*)\)", rest)
    if match is None:
        return False
    words = re.findall(r"[A-Za-z_]\w*|[^\s\d.+\-/,*]", match.group(1))
    return bool(match.group(1).strip()) and all(word in coordinates or word == "beta" for word in words)
