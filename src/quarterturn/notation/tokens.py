"""Tokens of a formula, each with its place; letters of every accepted spelling, and a clear word about the others."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Collection
from dataclasses import dataclass
from typing import Protocol

from quarterturn.errors import NotationError, Span
from quarterturn.notation.symbols import COMPLEX, FRACTIONS, LETTERS, SUPERSCRIPTS, canonical_name

LONGEST_NUMBER = 60  # digits
GREEK = "".join(LETTERS)
INDEX = "(?:" + "|".join(sorted((*LETTERS.values(), "lambda"), key=len, reverse=True)) + f"|[A-Za-z{GREEK}])"
ENDS = f"(?![A-Za-z0-9_{GREEK}])"  # a name is over
DOTTED = {"ẋ": "x", "ẏ": "y", "ż": "z", "ṙ": "r", "ṗ": "p", "ė": "e", "ḟ": "f", "ġ": "g", "ḣ": "h", "ṡ": "s"}
PATTERN = re.compile(
    rf"""(?P<SPACE>[ \t\u00a0\n]+)
    |(?P<NUMBER>\d+(?:\.\d+)?(?:[eE][+-]?\d+)?|\d+\.(?![A-Za-z{GREEK}(])|\.\d+(?:[eE][+-]?\d+)?)
    |(?P<TEXT>"[^"\n]*")
    |(?P<FUNCTIONAL>log[ ]*Z(?=\s*\[))
    |(?P<SUM_OVER>(?:sum|[Σ∑])_(?P<summed>{INDEX}){ENDS})
    |(?P<DERIVATIVE>(?:[d∂][_^](?P<along>{INDEX})|∂ₜ){ENDS})
    |(?P<CONJUGATE>\^\*|†)
    |(?P<NAME>[A-Za-z{GREEK}][A-Za-z0-9_{GREEK}]*)
    |(?P<DOTTED>[{"".join(DOTTED)}])
    |(?P<STARS>\*\*)
    |(?P<ANGLE_CONNECTED>[>⟩]_c(?![A-Za-z0-9_]))
    |(?P<SIGN>['′\u0307^*/+\-−·.×!,()\[\]|<>⟨⟩√∂{{}}{"".join(SUPERSCRIPTS)}{"".join(FRACTIONS)}=])""",
    re.VERBOSE,
)
KINDS_OF_PATTERN = tuple(name for name in PATTERN.groupindex if name.isupper())
KINDS = {
    "'": "PRIME", "′": "PRIME", "\u0307": "PRIME", "^": "CARET", "*": "TIMES", "×": "TIMES", "/": "OVER", "+": "PLUS",
    "-": "MINUS", "−": "MINUS", "·": "DOT", ".": "DOT", "!": "BANG", ",": "COMMA", "(": "OPEN", ")": "CLOSE",
    "[": "SQUARE_OPEN", "]": "SQUARE_CLOSE", "<": "ANGLE_OPEN", "⟨": "ANGLE_OPEN", ">": "ANGLE_CLOSE",
    "⟩": "ANGLE_CLOSE", "√": "ROOT", "=": "EQUALS", "∂": "GRADIENT", "{": "BRACE_OPEN", "}": "BRACE_CLOSE",
}  # fmt: skip
TWINS = dict(zip("аеорсхуіјѕАВЕКМНОРСТХ", "aeopcxyijsABEKMHOPCTX", strict=True))  # Cyrillic letters that look Latin
ENDS_OPERAND = {"NUMBER", "NAME", "CLOSE", "SQUARE_CLOSE", "PRIME", "BANG", "SUPERSCRIPT", "ANGLE_CLOSE",
                "ANGLE_CONNECTED", "BAR_CLOSE", "CONJUGATE", "NEIGHBOUR", "CASES"}  # fmt: skip
NEIGHBOUR = re.compile(rf"\(\s*([+\-−])\s*({INDEX})\s*\)")


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


class Vocabulary(Protocol):
    """What a reader knows about names beforehand."""

    def is_call(self, name: str, rest: str) -> bool:
        """Whether a name followed by the bracket that `rest` begins with is called."""

    def is_field(self, name: str) -> bool:
        """Whether a name is a path or a field."""

    def is_given(self, name: str) -> bool:
        """Whether a name has a value or a definition in this cell."""


def lexemes(source: Source, start: int, end: int, names: Vocabulary) -> list[Lexeme]:
    """Tokens of source.text[start:end].

    Raises NotationError for a letter that the notation does not have.
    """
    found: list[Lexeme] = []
    position, bars = start, 0
    while position < end:
        match = PATTERN.match(source.text, position, end)
        if match is None or match.lastgroup is None:
            raise source.error(_strange(source.text[position]), position, position + 1)
        kind, value, stop = _kind(match), match.group(), match.end()
        if kind == "SPACE":
            position = stop
            continue
        if kind == "NUMBER" and len(value) > LONGEST_NUMBER:
            raise source.error(f"a number of more than {LONGEST_NUMBER} digits", position, stop)
        if kind == "DOTTED":
            found += [Lexeme("NAME", DOTTED[value], position, stop), Lexeme("PRIME", "'", position, stop)]
            position = stop
            continue
        if kind in ("SUM_OVER", "DERIVATIVE") and names.is_given(canonical_name(value)):
            kind = "NAME"  # a coupling that is called d_a
        if kind in ("SUM_OVER", "DERIVATIVE"):
            value = _indexed(kind, match)
        elif kind == "TEXT":
            value = value[1:-1]
        elif kind == "STARS":
            kind = "CARET"
        elif kind == "NAME":
            value = canonical_name(value)
            kind = "MEAN" if value == "mean" else _name_kind(source, value, stop, end, names)
        elif kind == "SIGN":
            kind, value, bars = _sign(value, found, bars)
        if kind == "OPEN":
            kind, value, stop = _bracket(source, found, position, end, names)
        elif kind == "SQUARE_OPEN" and not (found and found[-1].kind in (*ENDS_OPERAND, "FUNCTIONAL")):
            kind = "ARRAY_OPEN"
        elif kind == "BRACE_OPEN":
            kind, stop = "CASES", _closing_brace(source, position, end)
            value = source.text[position:stop]
        found.append(Lexeme(kind, value, position, stop))
        position = stop
    return found


def _kind(match: re.Match[str]) -> str:
    return next(name for name in KINDS_OF_PATTERN if match.group(name) is not None)


def _indexed(kind: str, match: re.Match[str]) -> str:
    """The index of a sum, or of a derivative with its height in front: _mu, ^mu."""
    if kind == "SUM_OVER":
        return canonical_name(match.group("summed"))
    along = match.group("along")
    return "_t" if along is None else match.group()[1] + canonical_name(along)


def _name_kind(source: Source, name: str, stop: int, end: int, names: Vocabulary) -> str:
    """NAME, or GRADIENT for the d of d phi."""
    if name != "d" or names.is_given("d"):
        return "NAME"
    follows = re.match(rf"\s*([A-Za-z{GREEK}][A-Za-z0-9_{GREEK}]*)", source.text[stop:end])
    word = canonical_name(follows.group(1)) if follows else ""
    return "GRADIENT" if names.is_field(word) or word in COMPLEX else "NAME"


def _bracket(source: Source, found: list[Lexeme], position: int, end: int, names: Vocabulary) -> tuple[str, str, int]:
    """What an opening bracket is: of a product, of a call, of a time, or a whole neighbour (+mu)."""
    owner, rest = _owner(found), source.text[position:end]
    step = NEIGHBOUR.match(source.text, position, end)
    if owner and step and names.is_field(owner):
        sign = "-" if step.group(1) in "-−" else "+"
        return "NEIGHBOUR", sign + canonical_name(step.group(2)), step.end()
    if found and found[-1].kind == "NAME" and names.is_call(found[-1].value, rest):
        return "CALL_OPEN", "(", position + 1
    path = _derived(found)
    if path and names.is_call(path, rest):
        words = f"a velocity has no bracket: {path}' is taken at the time t; write {path}'"
        raise source.error(words, position, source.text.find(")", position, end) + 1 or end, f"{path}'")
    conjugated = _owner(found[:-1]) if found and found[-1].kind == "CONJUGATE" else ""
    if (owner and found[-1].kind == "SQUARE_CLOSE" and names.is_call(owner, rest)) or (
        conjugated and names.is_call(conjugated, rest)
    ):
        return "AT_OPEN", "(", position + 1
    return "OPEN", "(", position + 1


def _owner(found: list[Lexeme]) -> str:
    """The name that was read last, alone or with indices such as r[2], or nothing."""
    place = len(found) - 1
    if place >= 0 and found[place].kind == "SQUARE_CLOSE":
        while place >= 0 and found[place].kind != "SQUARE_OPEN":
            place -= 1
        place -= 1
    return found[place].value if place >= 0 and found[place].kind == "NAME" else ""


def _closing_brace(source: Source, position: int, end: int) -> int:
    depth = 0
    for i in range(position, end):
        depth += (source.text[i] == "{") - (source.text[i] == "}")
        if depth == 0:
            return i + 1
    raise source.error("this brace is never closed: } is missing", position, position + 1)


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
