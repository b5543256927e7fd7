"""Spellings of other notations that would be read as something else here: refused, with the spelling that is meant.

dq/dt is a quotient of two names to the grammar, phi_a a name, e^q a power of a coupling e. Each is looked for only
where none of its names was declared, so that a coupling called e or dt goes on working.
"""

from __future__ import annotations

import re
from collections.abc import Callable

from quarterturn.errors import NotationError
from quarterturn.notation.source import Source, Vocabulary
from quarterturn.notation.symbols import FUNCTIONS, INDEX, NAME, canonical_name

ENDS = "(?![A-Za-z0-9_])"
STARTS = "(?<![A-Za-z0-9_])"
GAP = "[ ]{0,3}"
LEIBNIZ = re.compile(
    rf"{STARTS}(?P<above>[d∂])(?P<order>\^2|²)?{GAP}(?P<field>{NAME})?{GAP}/{GAP}[d∂]{GAP}(?P<along>[txyz]){ENDS}"
    rf"(?(order)(?:\^2|²)?)(?:{GAP}\(?{GAP}(?P<behind>{NAME}))?"
)
BARE_INDEX = re.compile(rf"∂(?P<index>{INDEX}){ENDS}[ ]*(?P<field>{NAME})")
NUMBERED = re.compile(rf"{STARTS}[d∂]_(?P<index>[0-3]){ENDS}")
LOW_INDEX = re.compile(rf"{STARTS}(?P<name>{NAME})")
HIGH_INDEX = re.compile(rf"{STARTS}(?P<name>{NAME})\^(?P<index>[A-Za-z])(?![A-Za-z0-9_(\[])")
TIME_IN_SQUARES = re.compile(rf"{STARTS}(?P<name>{NAME})\[\s*(?P<inside>t(?:\s*,\s*[xyz])*)\s*\]")
FUNCTIONAL = re.compile(rf"{STARTS}log[ ]{{1,3}}Z{ENDS}(?!\s*\[)")
EXPONENTIAL = re.compile(rf"{STARTS}e(?:\^|\*\*)")
STAR = re.compile(rf"{STARTS}(?P<name>{NAME})\*(?=\s|\)|$)")
BRACES = re.compile(rf"(?:{STARTS}(?P<base>[A-Za-z][A-Za-z0-9]*))?(?P<sign>[_^])\{{(?P<inside>[^{{}}]*)\}}?")
DECIMAL_COMMA = re.compile(r"(?<![A-Za-z0-9_.\[,(])(?P<whole>[0-9]+),(?P<part>[0-9]+)(?![0-9.,])")
FUNCTION_POWER = re.compile(
    rf"{STARTS}(?P<name>{'|'.join(FUNCTIONS)})(?:\^|\*\*)(?P<power>-?[0-9]+)\s*(?P<behind>\(|{NAME})?"
)

Finder = Callable[[Source, int, int, Vocabulary], NotationError | None]


def refuse_oddities(source: Source, start: int, end: int, names: Vocabulary) -> None:
    """Raises NotationError for the first spelling in source.text[start:end] that is not of this notation."""
    for finder in FINDERS:
        complaint = finder(source, start, end, names)
        if complaint is not None:
            raise complaint


def _leibniz(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    for match in LEIBNIZ.finditer(source.text, start, end):
        written, along = canonical_name(match["field"] or ""), match["along"]
        if match["above"] == "d" and (names.is_given(f"d{written}") or names.is_given(f"d{along}")):
            continue
        field = written or canonical_name(match["behind"] or "")
        if not names.is_field(field):
            continue
        twice = match["order"] is not None
        stop = match.end("behind") if not written else match.start("behind") if match["behind"] else match.end()
        stop = match.start() + len(source.text[match.start() : stop].rstrip(" ("))
        if along == "t":
            plain = f"{field}''" if twice else f"{field}'"
            return source.error(f"a derivative in time is written {plain}, or with d_t", match.start(), stop, plain)
        plain = f"d_{along} d_{along} {field}" if twice else f"d_{along} {field}"
        return source.error(f"a derivative in space is written {plain}", match.start(), stop, plain)
    return None


def _bare_index(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    for match in BARE_INDEX.finditer(source.text, start, end):
        index, field = canonical_name(match["index"]), canonical_name(match["field"])
        if not names.is_field(index) and (names.is_field(field) or index in ("mu", "nu")):
            words = "the index of a derivative stands low or high: ∂_μ φ ∂^μ φ, or d_mu phi d^mu phi"
            return source.error(words, match.start(), match.end("index"), f"∂_{match['index']}")
    return None


def _numbered(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    for match in NUMBERED.finditer(source.text, start, end):
        if match.group()[0] == "∂" or not names.is_given(match.group()):
            plain = f"d_{'txyz'[int(match['index'])]}"
            words = f"directions have letters here, t, x, y, z: {match.group()} is {plain}"
            return source.error(words, match.start(), match.end(), plain)
    return None


def _low_index(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    """phi_a of a vector phi."""
    for match in LOW_INDEX.finditer(source.text, start, end):
        name, _, index = canonical_name(match["name"]).rpartition("_")
        if name and index and names.is_vector(name) and not names.is_given(f"{name}_{index}"):
            if names.is_field(f"{name}_{index}") or len(index) > 6:
                continue
            plain = f"{name}[{index}]"
            words = f"an index of a vector stands in square brackets: {plain}"
            return source.error(words, match.start(), match.end(), plain)
    return None


def _high_index(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    """phi^a of a vector phi."""
    for match in HIGH_INDEX.finditer(source.text, start, end):
        name = canonical_name(match["name"])
        if names.is_vector(name) and not names.is_given(match["index"]):
            plain = f"{name}[{match['index']}]"
            words = f"an index of a vector stands in square brackets, not as a power: {plain}"
            return source.error(words, match.start(), match.end(), plain)
    return None


def _time_in_squares(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    for match in TIME_IN_SQUARES.finditer(source.text, start, end):
        if names.is_field(canonical_name(match["name"])):
            plain = f"{match['name']}({match['inside']})"
            words = "square brackets hold indices; a time or a place stands in round ones"
            return source.error(words, match.start(), match.end(), plain)
    return None


def _exponential(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    if names.is_given("e") or names.is_field("e"):
        return None
    match = EXPONENTIAL.search(source.text, start, end)
    return (
        source.error("the exponential is a function: exp(…)", match.start(), match.end(), "exp(…)") if match else None
    )


def _functional(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    if names.is_given("Z") or names.is_field("Z"):
        return None
    match = FUNCTIONAL.search(source.text, start, end)
    words = "the generating functional names its source"
    return source.error(words, match.start(), match.end(), "log Z[J]") if match else None


def _star(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    """psi* psi of a complex psi: the conjugate, or a product?"""
    for match in STAR.finditer(source.text, start, end):
        if names.is_complex(canonical_name(match["name"])):
            words = f"{match.group()} can be read as a conjugate and as a product: the conjugate is {match['name']}^*"
            return source.error(words, match.start(), match.end(), f"{match['name']}^*")
    return None


def _braces(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    match = BRACES.search(source.text, start, end)
    if match is None:
        return None
    base, inside = match["base"] or "", match["inside"].strip()
    if match["sign"] == "_":
        words = "braces hold cases; a name or an index has none: m_0, sum_a, d_mu"
        return source.error(words, match.start(), match.end(), f"{base}_{inside}" if inside.isalnum() else None)
    words = "braces hold cases; an exponent has none: q^2, q^(1/2)"
    plain = inside if re.fullmatch(r"[A-Za-z0-9]+", inside) else f"({inside})"
    return source.error(words, match.start(), match.end(), f"{base}^{plain}" if inside else None)


def _decimal_comma(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    """1,5 q: only where the comma ends the formula anyway."""
    match = DECIMAL_COMMA.search(source.text, start, end)
    if match is None or _inside_brackets(source.text[start : match.start()]):
        return None
    plain = f"{match['whole']}.{match['part']}"
    return source.error("a decimal number has a point", match.start(), match.end(), plain)


def _inside_brackets(before: str) -> bool:
    return any(before.count(opened) > before.count(closed) for opened, closed in ("()", "[]", "{}"))


def _function_power(source: Source, start: int, end: int, names: Vocabulary) -> NotationError | None:
    for match in FUNCTION_POWER.finditer(source.text, start, end):
        name, power, behind = match["name"], match["power"], match["behind"]
        if power == "-1":
            words = f"{name}^-1 can be read as an inverse function and as 1/{name}: write 1/{name}(…)"
            return source.error(words, match.start(), match.end("power"), f"1/{name}(…)")
        inside = f"({behind})" if behind and behind != "(" else "(…)"
        words = f"a power stands behind the whole function, as in {name}(x)^{power}"
        return source.error(words, match.start(), match.end("power"), f"{name}{inside}^{power}")
    return None


FINDERS: tuple[Finder, ...] = (
    _braces, _leibniz, _bare_index, _numbered, _time_in_squares, _low_index, _high_index, _exponential, _functional,
    _star, _function_power, _decimal_comma,
)  # fmt: skip
