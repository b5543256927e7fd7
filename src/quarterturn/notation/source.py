"""The text of a cell, offsets as places in it, and what its readers share: tokens, and what is known about names."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from quarterturn.errors import NotationError, Span


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

    def is_vector(self, name: str) -> bool:
        """Whether a name is a path or a field with components."""

    def is_complex(self, name: str) -> bool:
        """Whether a name is a complex path or field."""
