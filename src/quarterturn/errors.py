"""One family of errors, and how a place in a text is drawn.

Every complaint that quarterturn raises on purpose derives from `QuarterturnError`; in a notebook it shows as a
message, not as a traceback. A complaint about a text carries the text and the span, and underlines it.
"""

import textwrap
import unicodedata
from dataclasses import dataclass

PAGE = 100  # columns


@dataclass(frozen=True, slots=True)
class Span:
    """A stretch of a text: lines and columns count from 1, in code points; the end column is exclusive."""

    line: int
    column: int
    end_line: int
    end_column: int


def display_width(text: str) -> int:
    """Number of terminal cells that `text` occupies: combining marks take none, wide letters two."""
    width = 0
    for letter in text:
        if unicodedata.combining(letter) or unicodedata.category(letter) in ("Mn", "Me", "Cf"):
            continue
        width += 2 if unicodedata.east_asian_width(letter) in ("W", "F") else 1
    return width


def underline(text: str, span: Span) -> str:
    """The line of `text` in which `span` begins, and below it carets under the span."""
    lines = text.split("\n")
    line = lines[span.line - 1] if span.line <= len(lines) else ""
    shown = "".join("\N{REPLACEMENT CHARACTER}" if ord(c) < 32 and c not in "\t\r" else c for c in line)
    shown = shown.replace("\t", " ").rstrip("\r")
    end = span.end_column if span.end_line == span.line else len(shown) + 1
    pad = display_width(shown[: span.column - 1])
    carets = max(1, display_width(shown[span.column - 1 : end - 1]))
    return f"    {shown}\n    {' ' * pad}{'^' * carets}"


def beside(marked: str, message: str) -> str:
    """A message behind the carets of an underlined line, or below them where it would run off a page."""
    if len(marked.split("\n")[-1]) + 1 + display_width(message) <= PAGE:
        return f"{marked} {message}"
    return "\n".join([marked, *textwrap.wrap(message, PAGE, initial_indent="    ", subsequent_indent="    ")])


class QuarterturnError(Exception):
    """A complaint for a person: what is wrong, where, and what would mend it.

    Parameters
    ----------
    message
        What is wrong and what was expected, in the trade's words.
    span, text
        The place, and the text that it is in; both or neither.
    repair
        A plausible repair, shown after the place.
    """

    kind = "error"

    def __init__(
        self, message: str, *, span: Span | None = None, text: str | None = None, repair: str | None = None
    ) -> None:
        super().__init__(message)
        self.message = message
        self.span = span
        self.text = text
        self.repair = repair

    def __str__(self) -> str:
        place = f", line {self.span.line}, column {self.span.column}" if self.span else ""
        parts = [f"{self.kind}{place}"]
        if self.span is not None and self.text is not None:
            parts.append(beside(underline(self.text, self.span), self.message))
        else:
            parts[0] += f": {self.message}"
        if self.repair:
            parts.append(f"    perhaps: {self.repair}")
        return "\n".join(parts)

    def _render_traceback_(self) -> list[str]:
        """What IPython shows in the place of a traceback."""
        return str(self).split("\n")


class NotationError(QuarterturnError):
    """The text of an action can't be read."""

    kind = "notation error"


class ActionError(QuarterturnError):
    """The text can be read, but it is no action that this call can work with."""

    kind = "action error"


class RequestError(QuarterturnError, ValueError):
    """A call asks for something that does not exist or makes no sense: an unknown coupling, a negative error."""

    kind = "request error"


class SpectrumError(QuarterturnError):
    """The imaginary-time solution does not exist or did not converge."""

    kind = "spectrum error"


class SaddleError(QuarterturnError):
    """There is no such stationary path, or it was not found."""

    kind = "saddle error"


class EstimateError(QuarterturnError):
    """The samples do not support the number asked for."""

    kind = "estimate error"


class RecordError(QuarterturnError):
    """A record is malformed, altered, or asks for what can't be done."""

    kind = "record error"
