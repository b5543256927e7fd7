"""What this session holds: the actions by name, and every result, most recent first.

It outlives reloading of the extension. Nothing is removed but by declaring an action of the same name again, which
leaves the results of the earlier one as they are.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, TypeAlias

from quarterturn.errors import RequestError
from quarterturn.magics.request import nearest
from quarterturn.magics.words import Line, Token, Words, required_name

if TYPE_CHECKING:
    from quarterturn.runs.declaration import DeclaredAction
    from quarterturn.runs.run import Run
    from quarterturn.runs.saddle import Saddles
    from quarterturn.runs.series import Series
    from quarterturn.runs.spectrum import Levels

    Result: TypeAlias = Run | Levels | Saddles | Series

FEWEST_LETTERS = 4  # of a record's name, to count as a name
SHORT_NAME = 12  # letters of a record's name that are shown


@dataclass(frozen=True)
class Kept:
    """A result, and the line that made it; empty for one that a call in Python made."""

    result: Result
    line: str

    @property
    def short_name(self) -> str:
        return self.result.record_name[:SHORT_NAME]

    def answers_to(self, word: str) -> bool:
        """Whether `word` is its action or the beginning of its record's name."""
        begins = len(word) >= FEWEST_LETTERS and self.result.record_name.startswith(word)
        return begins or word == self.result.action.name


@dataclass
class Registry:
    """Actions and results of one session."""

    actions: dict[str, DeclaredAction] = field(default_factory=dict)
    results: list[Kept] = field(default_factory=list)

    def declare(self, action: DeclaredAction, words: Words, shell: Any) -> None:
        """Keep an action under its name, and give it to the variable that the line asks for."""
        self.actions[action.name] = action
        _assign(action, words, shell)

    def action(self, words: Words) -> DeclaredAction:
        """The action that a line begins with. Raises LineError, which lists what is declared."""
        name = required_name(words, "the name of an action", self._declared())
        if name.text not in self.actions:
            near = nearest(name.text, list(self.actions))
            raise words.line.at(name, f"no action is called {name.text}; {self._declared()}", near)
        return self.actions[name.text]

    def keep(self, result: Result, words: Words, shell: Any) -> None:
        """Keep a result, and give it to the variable that the line asks for."""
        self.results.insert(0, Kept(result, words.line.text))
        _assign(result, words, shell)

    def result(self, line: Line, name: Token | None, shell: Any) -> Kept:
        """The result that `name` stands for, a variable before an action; the latest of all for None or `last`.

        Raises RequestError, which lists what there is.
        """
        if name is not None and hasattr(shell.user_ns.get(name.text), "record_name"):
            value = shell.user_ns[name.text]
            return next((kept for kept in self.results if kept.result is value), Kept(value, ""))
        if not self.results:
            raise RequestError("there is no result in this session yet: run %sample or %levels first")
        if name is None or name.text == "last":
            return self.results[0]
        found = next((kept for kept in self.results if kept.answers_to(name.text)), None)
        if found is None:
            there = self.names(shell)
            near = nearest(name.text, there)
            raise line.at(name, f"no result is called {name.text}; there is {', '.join(there)}", near)
        return found

    def names(self, shell: Any) -> list[str]:
        """Everything that a result can be called by: last, variables, actions, short names of records."""
        values = shell.user_ns.items()
        variables = [name for name, value in values if name[0] != "_" and hasattr(value, "record_name")]
        actions = [kept.result.action.name for kept in self.results]
        return list(dict.fromkeys(["last", *variables, *actions, *(kept.short_name for kept in self.results)]))

    def _declared(self) -> str:
        if self.actions:
            return f"declared: {', '.join(self.actions)}"
        return "none is declared yet: declare one in a cell that begins with %%action NAME"


def _assign(value: Any, words: Words, shell: Any) -> None:
    if words.variable is not None:
        shell.user_ns[words.variable] = value


session = Registry()
