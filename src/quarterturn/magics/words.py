"""Words of a magic line: a name, then settings `key=value`, then perhaps `as VARIABLE`; each keeps its place.

The line is taken apart here and nowhere evaluated. Blanks around `=` and commas between settings are allowed, as they
are in the notation; `error[gap(q)]=2%` is a setting with a label.
"""

from __future__ import annotations

import keyword
import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from quarterturn.errors import RequestError, Span, underline

Kind = Literal["word", "label", "="]
NAME = re.compile(r"[^\W\d][\w.-]*")
NOT_NAMES = frozenset({"all", "as", "json", "last", "result"})  # words of the magics themselves


class LineError(RequestError):
    """A complaint about a magic line: names the column, since the line may stand anywhere in its cell."""

    def __str__(self) -> str:
        assert self.span is not None and self.text is not None
        parts = [f"{self.kind}, column {self.span.column}", f"{underline(self.text, self.span)} {self.message}"]
        if self.repair:
            parts.append(f"    perhaps: {self.repair}")
        return "\n".join(parts)


@dataclass(frozen=True, slots=True)
class Token:
    """A piece of the line; `start` and `end` count code points from 0 in the line as shown."""

    kind: Kind
    text: str
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Setting:
    """`key=value` or `key[label]=value`, as written."""

    key: str
    label: str | None
    value: str
    start: int
    value_start: int
    end: int


@dataclass(frozen=True, slots=True)
class Line:
    """A magic line as it was written, with its magic in front."""

    text: str

    def complaint(self, message: str, start: int, end: int, repair: str | None = None) -> LineError:
        """An error that underlines columns start to end (from 0, end exclusive)."""
        return LineError(message, span=Span(1, start + 1, 1, end + 1), text=self.text, repair=repair)

    def at(self, place: Token | Setting, message: str, repair: str | None = None) -> LineError:
        """An error that underlines a word or a whole setting."""
        return self.complaint(message, place.start, place.end, repair)

    def at_value(self, setting: Setting, message: str, repair: str | None = None) -> LineError:
        """An error that underlines the value of a setting."""
        return self.complaint(message, setting.value_start, setting.end, repair)

    def at_end(self, message: str, repair: str | None = None) -> LineError:
        """An error that points behind the last word."""
        end = len(self.text.rstrip()) + 1
        return self.complaint(message, end, end + 1, repair)


@dataclass(frozen=True, slots=True)
class Words:
    """A line taken apart."""

    line: Line
    name: Token | None  # the first word, where it is not a setting
    settings: tuple[Setting, ...]
    variable: str | None  # of `as VARIABLE`


def read(magic: str, rest: str) -> Words:
    """Take a magic line apart.

    Parameters
    ----------
    magic
        With its percent signs, such as %sample.
    rest
        What stands behind it.

    Raises
    ------
    LineError
        A word that stands alone, a value or a key that is missing, a setting given twice, a bad variable.
    """
    line = Line(f"{magic} {rest.strip()}".rstrip())
    tokens = list(_tokens(line, len(magic)))
    tokens, variable = _variable(line, tokens)
    name = None
    if tokens and tokens[0].kind == "word" and (len(tokens) == 1 or tokens[1].kind == "word"):
        name = tokens.pop(0)
    settings: list[Setting] = []
    while tokens:
        settings.append(_setting(line, tokens, settings))
    return Words(line, name, tuple(settings), variable)


def plain_words(magic: str, rest: str) -> tuple[Line, list[Token]]:
    """A line of names alone, parted by blanks."""
    line = Line(f"{magic} {rest.strip()}".rstrip())
    found = re.finditer(r"\S+", line.text[len(magic) :])
    return line, [Token("word", m.group(), len(magic) + m.start(), len(magic) + m.end()) for m in found]


def required_name(words: Words, what: str, there: str) -> Token:
    """The name that a line begins with. Raises LineError, with `there` saying what could stand there."""
    if words.name is not None:
        return words.name
    if words.settings:
        first = words.settings[0]
        raise words.line.complaint(f"{what} comes first; {there}", first.start, first.start + 1)
    raise words.line.at_end(f"{what} is missing; {there}")


def _tokens(line: Line, start: int) -> Iterator[Token]:
    """Words, labels in square brackets, and equals signs; blanks and commas part them, a decimal comma doesn't."""
    text, i = line.text, start
    while i < len(text):
        if text[i].isspace() or text[i] == ",":
            i += 1
            continue
        if text[i] == "=":
            yield Token("=", "=", i, i + 1)
            i += 1
            continue
        end = _end_of_label(line, i) if text[i] == "[" else _end_of_word(text, i)
        yield Token("label" if text[i] == "[" else "word", text[i:end], i, end)
        i = end


def _end_of_word(text: str, start: int) -> int:
    i = start
    while i < len(text) and not text[i].isspace() and text[i] not in "=[":
        decimal = text[i - 1 : i].isdigit() and text[i + 1 : i + 2].isdigit()
        if text[i] == "," and not decimal:
            break
        i += 1
    return i


def _end_of_label(line: Line, start: int) -> int:
    depth = 0
    for i in range(start, len(line.text)):
        depth += {"[": 1, "]": -1}.get(line.text[i], 0)
        if depth == 0:
            return i + 1
    raise line.complaint("this bracket is never closed", start, start + 1)


def _variable(line: Line, tokens: list[Token]) -> tuple[list[Token], str | None]:
    """`as VARIABLE` at the end of the line, taken off."""
    place = next((i for i, t in enumerate(tokens) if t.text == "as" and not _is_key(tokens, i)), None)
    if place is None:
        return tokens, None
    after = tokens[place + 1 :]
    if not after:
        raise line.at_end("as needs the name of a Python variable", "as run")
    if not after[0].text.isidentifier() or keyword.iskeyword(after[0].text):
        raise line.at(after[0], f"{after[0].text} can't be the name of a Python variable")
    if len(after) > 1:
        raise line.at(after[1], "nothing may follow the variable: settings come before 'as'")
    return tokens[:place], after[0].text


def _is_key(tokens: list[Token], i: int) -> bool:
    return i + 1 < len(tokens) and tokens[i + 1].kind == "="


def _setting(line: Line, tokens: list[Token], earlier: list[Setting]) -> Setting:
    """Take one setting off the front of `tokens`."""
    key = tokens.pop(0)
    if key.kind != "word":
        raise line.at(key, "a name is missing before this; a setting is written key=value")
    label = tokens.pop(0) if tokens and tokens[0].kind == "label" else None
    if not tokens or tokens[0].kind != "=":
        raise _alone(line, key, tokens, earlier)
    equals = tokens.pop(0)
    if not tokens or tokens[0].kind != "word":
        raise line.complaint(f"a value is missing after {key.text}=", equals.start, equals.end)
    value = tokens.pop(0)
    inside = label.text[1:-1].strip() if label else None
    setting = Setting(key.text, inside, value.text, key.start, value.start, value.end)
    if (setting.key, setting.label) in [(s.key, s.label) for s in earlier]:
        raise line.at(setting, f"{key.text} is given twice")
    return setting


def _alone(line: Line, word: Token, tokens: list[Token], earlier: list[Setting]) -> LineError:
    """The complaint about a word without a value, with the repair that its neighbours suggest."""
    following = tokens[0].text if tokens and tokens[0].kind == "word" else ""
    if NAME.fullmatch(word.text) and re.match(r"[-+.\d]", following):
        return line.at(word, f"{word.text} needs an equals sign before its value", f"{word.text}={following}")
    if earlier and earlier[-1].key == "time" and word.text.isalpha():
        return line.at(word, "a value has no blanks in it", f"time={earlier[-1].value}{word.text}")
    if NAME.fullmatch(word.text):
        return line.at(word, f"{word.text} needs a value", f"{word.text}=…")
    return line.at(word, f"{word.text} stands alone; a setting is written key=value, without blanks in the value")
