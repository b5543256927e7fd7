"""What an opening bracket is: of a product, of a call, of a time, of a neighbour, of cases."""

from __future__ import annotations

import re
from collections.abc import Collection

from quarterturn.notation.source import Lexeme, Source, Vocabulary
from quarterturn.notation.symbols import INDEX, canonical_name

DEEPEST_BRACES = 10
NEIGHBOUR = re.compile(rf"\(\s*([+\-−–])\s*({INDEX})\s*\)")


def opening(source: Source, found: list[Lexeme], position: int, end: int, names: Vocabulary) -> tuple[str, str, int]:
    """Kind, value and end of the bracket that opens here, or of a whole neighbour (+mu)."""
    owner, rest = _owner(found), source.text[position:end]
    step = NEIGHBOUR.match(source.text, position, end)
    if owner and step and names.is_field(owner):
        sign = "+" if step.group(1) == "+" else "-"
        return "NEIGHBOUR", sign + canonical_name(step.group(2)), step.end()
    if found and found[-1].kind == "NAME" and names.is_call(found[-1].value, rest):
        _refuse_two_readings(source, found[-1], position, end, names)
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


def _refuse_two_readings(source: Source, name: Lexeme, position: int, end: int, names: Vocabulary) -> None:
    """q (1/2): a path at a time, or a factor? Raises NotationError."""
    numbers = re.compile(r"\([\s0-9.+\-−–/]*\)").match(source.text, position, end)
    if numbers and name.end < position and names.is_field(name.value):
        time = numbers.group()
        words = f"{name.value} {time} can be read as {name.value} at a time and as a product: leave no blank for a time"
        raise source.error(words, name.start, numbers.end(), f"{name.value}{time} or {time} {name.value}")


def _owner(found: list[Lexeme]) -> str:
    """The name that was read last, alone or with indices such as r[2], or nothing."""
    place = len(found) - 1
    if place >= 0 and found[place].kind == "SQUARE_CLOSE":
        while place >= 0 and found[place].kind != "SQUARE_OPEN":
            place -= 1
        place -= 1
    return found[place].value if place >= 0 and found[place].kind == "NAME" else ""


def _derived(found: list[Lexeme]) -> str:
    """The name of which a derivative was read last, such as q in q', or nothing."""
    return found[-2].value if [lexeme.kind for lexeme in found[-2:]] == ["NAME", "PRIME"] else ""


def closing_brace(source: Source, position: int, end: int) -> int:
    """Where the brace that opens here has been closed. Raises NotationError for one that never is."""
    depth = 0
    for brace in re.compile("[{}]").finditer(source.text, position, end):
        depth += 1 if brace.group() == "{" else -1
        if depth > DEEPEST_BRACES:
            raise source.error(f"cases inside cases deeper than {DEEPEST_BRACES}", brace.start(), brace.end())
        if depth == 0:
            return brace.end()
    raise source.error("this brace is never closed: } is missing", position, position + 1)


def evaluation_of_path(rest: str, coordinates: Collection[str]) -> bool:
    """Whether a bracket after a path holds times only, as in q(t), q(0), q(1.5), q(beta); otherwise it multiplies."""
    match = re.match(r"\(([^()]*)\)", rest)
    if match is None:
        return False
    words = re.findall(r"[A-Za-z_]\w*|[^\s\d.+\-−–/,*]", match.group(1))
    return bool(match.group(1).strip()) and all(word in coordinates or word in ("beta", "β") for word in words)
