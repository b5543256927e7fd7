"""What is known about the names of a body before its formulas are read, and how statements are cut into parts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from quarterturn.notation.brackets import evaluation_of_path
from quarterturn.notation.source import Source
from quarterturn.notation.symbols import COMPLEX, FUNCTIONS, MEASURES, PIECES


@dataclass(frozen=True)
class Piece:
    start: int
    end: int


@dataclass(frozen=True)
class Names:
    """What a first look at the body finds: which names are paths, which are functions, which have a value."""

    paths: dict[str, tuple[str, ...]] = field(default_factory=dict)
    functions: set[str] = field(default_factory=set)
    given: set[str] = field(default_factory=set)
    vectors: set[str] = field(default_factory=set)
    complex: set[str] = field(default_factory=set)

    def is_call(self, name: str, rest: str) -> bool:
        if name in self.paths:
            return evaluation_of_path(rest, (*self.paths[name], "t"))
        return name in self.functions or any(name in table for table in (FUNCTIONS, MEASURES, COMPLEX, PIECES))

    def is_field(self, name: str) -> bool:
        return name in self.paths

    def is_given(self, name: str) -> bool:
        return name in self.given

    def is_vector(self, name: str) -> bool:
        return name in self.vectors and name in self.paths

    def is_complex(self, name: str) -> bool:
        return name in self.complex and name in self.paths

    def inside(self, parameters: tuple[str, ...]) -> Names:
        """In the body of a definition its parameters are neither paths nor functions: they have a value."""
        hidden = set(parameters)
        paths = {n: c for n, c in self.paths.items() if n not in hidden}
        return Names(paths, self.functions - hidden, self.given | hidden, self.vectors, self.complex)


def parts(source: Source, piece: Piece) -> Iterator[Piece]:
    """Split at commas outside all brackets."""
    depth, start, text = 0, piece.start, source.text
    for i in range(piece.start, piece.end):
        letter = text[i]
        depth += (letter in "([{<⟨〈") - (letter in ")]}>⟩〉")
        if letter == "," and depth <= 0:
            yield Piece(start, i)
            start = i + 1
    yield Piece(start, piece.end)
