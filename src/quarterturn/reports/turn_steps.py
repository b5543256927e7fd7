"""The quarter turn of an action, shown step by step."""

from dataclasses import dataclass
from typing import Any

from quarterturn.reports.cells import one_line
from quarterturn.reports.latex import escaped
from quarterturn.reports.markup import definitions, formula, framed, words
from quarterturn.reports.text import WIDTH, wrapped


@dataclass(frozen=True, slots=True)
class TurnSteps:
    """Steps as plain data: (what is done, the result in notation, the result in LaTeX)."""

    name: str
    steps: tuple[tuple[str, str, str], ...]

    def __repr__(self) -> str:
        lines = [f"the quarter turn of {one_line(self.name)}"]
        for number, (said, result, _) in enumerate(self.steps, start=1):
            lines.append("\n   ".join(wrapped(f"{number}. {said}", WIDTH - 3)) + f"\n       {result}")
        return "\n\n".join(lines)

    def _repr_html_(self) -> str:
        rows = [(str(n), f"{words(said)}<br>{formula(tex, result)}")
                for n, (said, result, tex) in enumerate(self.steps, start=1)]  # fmt: skip
        title = f'<p class="qt-title"><strong>the quarter turn of {words(self.name)}</strong></p>'
        return framed(title, definitions(rows))

    def _repr_latex_(self) -> str:
        return "\n\n".join(f"\\noindent {escaped(said)}\n\\[ {tex} \\]" for said, _, tex in self.steps) + "\n"

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> dict[str, str]:
        return {"text/plain": repr(self), "text/html": self._repr_html_(), "text/latex": self._repr_latex_()}
