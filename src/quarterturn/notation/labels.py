"""One spelling for a formula, whatever its spacing and letters: how a measurement is called in results."""

from __future__ import annotations

import re
from collections.abc import Iterator
from fractions import Fraction

from quarterturn.notation.tokens import Lexeme, Source, lexemes


class _AnyName:
    """For spelling alone: every name with a bracket at once behind it is called."""

    def is_call(self, name: str, rest: str) -> bool:
        return True

    def is_field(self, name: str) -> bool:
        return True

    def is_given(self, name: str) -> bool:
        return False

    def is_vector(self, name: str) -> bool:
        return False

    def is_complex(self, name: str) -> bool:
        return False


def label_of(text: str) -> str:
    """The canonical spelling of a measurement's text: how it is called in results."""
    source = Source(text)
    tokens = lexemes(source, 0, len(text), _AnyName())
    return "".join(_spaced(tokens))


SPELT = {"TIMES": "*", "MINUS": "-", "DOT": ".", "ANGLE_OPEN": "<", "ANGLE_CLOSE": ">", "ANGLE_CONNECTED": ">_c",
         "PRIME": "'", "CARET": "^", "CONJUGATE": "^*", "GRADIENT": "d"}  # fmt: skip
TIGHT_BEFORE = {"CLOSE", "SQUARE_CLOSE", "ANGLE_CLOSE", "ANGLE_CONNECTED", "BAR_CLOSE", "PRIME", "BANG", "COMMA",
                "CARET", "OVER", "DOT", "CALL_OPEN", "AT_OPEN", "SQUARE_OPEN", "SUPERSCRIPT", "NEIGHBOUR",
                "CONJUGATE"}  # fmt: skip
TIGHT_AFTER = {
    "OPEN",
    "CALL_OPEN",
    "AT_OPEN",
    "SQUARE_OPEN",
    "ANGLE_OPEN",
    "BAR_OPEN",
    "CARET",
    "OVER",
    "DOT",
    "ROOT",
    "ARRAY_OPEN",
}


def _spaced(tokens: list[Lexeme]) -> Iterator[str]:
    for i, token in enumerate(tokens):
        value = _spelt(token)
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


def _spelt(token: Lexeme) -> str:
    match token.kind:
        case "SUM_OVER":
            return f"sum_{token.value}"
        case "DERIVATIVE":
            return f"d{token.value}"
        case "NEIGHBOUR":
            return f"({token.value})"
        case "FUNCTIONAL":
            return "log Z"
        case "TEXT":
            return f'"{token.value}"'
        case "CASES":
            return re.sub(r"\s+", " ", token.value)
    return SPELT.get(token.kind, token.value)


def _number(text: str) -> str:
    value = Fraction(text) if "e" not in text.lower() else None
    if value is None:
        return text.lower()
    return f"{float(value):.15g}"
