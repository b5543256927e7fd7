"""Tokens of a formula, each with its place; letters of every accepted spelling, and a clear word about the others."""

from __future__ import annotations

import re

from quarterturn.notation.brackets import closing_brace, opening
from quarterturn.notation.source import Lexeme as Lexeme
from quarterturn.notation.source import Source as Source
from quarterturn.notation.source import Vocabulary as Vocabulary
from quarterturn.notation.strange import strange
from quarterturn.notation.symbols import (
    COMPLEX,
    FRACTIONS,
    GREEK,
    INDEX,
    NAME,
    PIECES,
    SUBSCRIPTS,
    SUPERSCRIPTS,
    canonical_name,
)

LONGEST_NUMBER = 60  # digits
SIGNS = {
    "PRIME": "'′’\u0307", "PRIMES": "″\u0308", "CARET": "^", "TIMES": "*×∗", "OVER": "/∕⁄", "PLUS": "+",
    "MINUS": "-−–", "DOT": ".·⋅∙", "BANG": "!", "COMMA": ",", "OPEN": "(", "CLOSE": ")", "SQUARE_OPEN": "[",
    "SQUARE_CLOSE": "]", "ANGLE_OPEN": "<⟨〈", "ANGLE_CLOSE": ">⟩〉", "ROOT": "√", "EQUALS": "=", "GRADIENT": "∂",
    "BRACE_OPEN": "{", "BRACE_CLOSE": "}", "BAR": "|∣",
}  # fmt: skip
KINDS = {letter: kind for kind, letters in SIGNS.items() for letter in letters}
DOTTED = dict(zip("ȧḃċḋėḟġḣṁṅȯṗṙṡṫẇẋẏż", "abcdefghmnoprstwxyz", strict=True))
ENDS = "(?![A-Za-z0-9_])"  # an index is over; a Greek letter may follow, as in ∂_xφ
PATTERN = re.compile(
    rf"""(?P<SPACE>[ \t\n\u00a0\u2000-\u200a\u202f\u205f\u3000]+)
    |(?P<NUMBER>[0-9]+(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?|[0-9]+\.(?![A-Za-z{GREEK}(])|\.[0-9]+(?:[eE][+-]?[0-9]+)?)
    |(?P<TEXT>"[^"\n]*")
    |(?P<FUNCTIONAL>log[ ]*Z(?=\s*\[))
    |(?P<SUM_OVER>(?:sum|[Σ∑])_(?P<summed>{INDEX}){ENDS})
    |(?P<DERIVATIVE>[d∂][_^](?P<along>{INDEX}){ENDS}|[d∂](?P<below>[ₜₓ]))
    |(?P<CONJUGATE>\^\*(?![0-9])|\^?†|[\u0304\u0305])
    |(?P<NAME>{NAME})
    |(?P<DOTTED>[{"".join(DOTTED)}])
    |(?P<STARS>\*\*)
    |(?P<ANGLE_CONNECTED>[>⟩〉]_c(?![A-Za-z0-9_]))
    |(?P<SUPERSCRIPT>⁻?[{"".join(SUPERSCRIPTS)}]+)
    |(?P<SIGN>[{re.escape("".join(KINDS))}{"".join(FRACTIONS)}])""",
    re.VERBOSE,
)
KINDS_OF_PATTERN = tuple(name for name in PATTERN.groupindex if name.isupper())
WHOLE_NAME = re.compile(NAME)
ENDS_OPERAND = {"NUMBER", "NAME", "CLOSE", "SQUARE_CLOSE", "PRIME", "BANG", "SUPERSCRIPT", "ANGLE_CLOSE",
                "ANGLE_CONNECTED", "BAR_CLOSE", "CONJUGATE", "NEIGHBOUR", "CASES"}  # fmt: skip


def lexemes(source: Source, start: int, end: int, names: Vocabulary) -> list[Lexeme]:
    """Tokens of source.text[start:end].

    Raises NotationError for a letter that the notation does not have.
    """
    found: list[Lexeme] = []
    position, bars = start, 0
    while position < end:
        match = PATTERN.match(source.text, position, end)
        if match is None:
            raise strange(source, position, end)
        kind, value, stop = _kind(match), match.group(), match.end()
        if kind == "SPACE":
            position = stop
            continue
        if kind in ("SUM_OVER", "DERIVATIVE") and (whole := _given(source, position, end, names)):
            kind, value, stop = "NAME", whole, position + len(whole)  # a coupling that is called d_a
        if kind in ("NUMBER", "SUPERSCRIPT") and len(value) > LONGEST_NUMBER:
            raise source.error(f"a number of more than {LONGEST_NUMBER} digits", position, stop)
        if kind == "SIGN" and KINDS.get(value) == "BAR":
            closes = bars > 0 and bool(found) and found[-1].kind in ENDS_OPERAND
            kind, value, bars = ("BAR_CLOSE", "|", bars - 1) if closes else ("BAR_OPEN", "|", bars + 1)
        elif kind == "SIGN":
            kind, value = _sign(value)
        if kind in ("DOTTED", "PRIMES"):
            first = Lexeme("NAME", DOTTED[value], position, stop) if kind == "DOTTED" else None
            found += [first or Lexeme("PRIME", "'", position, stop), Lexeme("PRIME", "'", position, stop)]
            position = stop
            continue
        if kind == "OPEN":
            kind, value, stop = opening(source, found, position, end, names)
        elif kind == "SQUARE_OPEN" and not (found and found[-1].kind in (*ENDS_OPERAND, "FUNCTIONAL")):
            kind = "ARRAY_OPEN"
        elif kind == "BRACE_OPEN":
            kind, stop = "CASES", closing_brace(source, position, end)
            value = source.text[position:stop]
        else:
            kind, value = _read(source, kind, value, match, found, stop, end, names)
        found.append(Lexeme(kind, value, position, stop))
        position = stop
    return found


def _kind(match: re.Match[str]) -> str:
    return next(name for name in KINDS_OF_PATTERN if match.group(name) is not None)


def _given(source: Source, position: int, end: int, names: Vocabulary) -> str:
    """The name that begins here, where it has a value."""
    match = WHOLE_NAME.match(source.text, position, end)
    return match.group() if match and names.is_given(canonical_name(match.group())) else ""


def _read(
    source: Source,
    kind: str,
    value: str,
    match: re.Match[str],
    found: list[Lexeme],
    stop: int,
    end: int,
    names: Vocabulary,
) -> tuple[str, str]:
    """Kind and value of a token that is read by itself."""
    match kind:
        case "SUM_OVER":
            return kind, canonical_name(match.group("summed"))
        case "DERIVATIVE":
            along = match.group("along")
            return kind, value[1] + canonical_name(along) if along else "_" + SUBSCRIPTS[match.group("below")]
        case "TEXT":
            if [lexeme.kind for lexeme in found[-1:]] != ["CALL_OPEN"] or found[-2].value not in PIECES:
                words = 'a text names the file of a table, as in table("well.csv", q, linear); it has no place here'
                raise source.error(words, match.start(), stop)
            return kind, value[1:-1]
        case "STARS":
            return "CARET", value
        case "SUPERSCRIPT":
            return kind, "".join(SUPERSCRIPTS.get(letter, "-") for letter in value)
        case "NAME":
            name = canonical_name(value)
            return "MEAN" if name == "mean" else _name_kind(source, name, stop, end, names), name
    return kind, value


def _name_kind(source: Source, name: str, stop: int, end: int, names: Vocabulary) -> str:
    """NAME, or GRADIENT for the d of d phi and d(phi)."""
    if name != "d" or names.is_given("d") or names.is_field("d"):
        return "NAME"
    follows = re.compile(rf"\s*\(?\s*({NAME})").match(source.text, stop, end)
    word = canonical_name(follows.group(1)) if follows else ""
    return "GRADIENT" if names.is_field(word) or word in COMPLEX else "NAME"


def _sign(value: str) -> tuple[str, str]:
    if value in FRACTIONS:
        top, bottom = FRACTIONS[value]
        return "NUMBER", f"{top}/{bottom}"
    return KINDS[value], value
