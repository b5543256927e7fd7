"""What a person sees while a run goes on: a table in a notebook, one line in a terminal, nothing in a file.

A notebook gets one display that is updated at most four times a second and emptied at the end; where the cell begins
with the magic, so that nothing else can have been written yet, the empty output goes too. Nothing is sent on comms:
that would hold up the messages of the front end until the cell ends.
"""

from __future__ import annotations

import re
import shutil
import sys
import time
import uuid
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Protocol, TextIO

from quarterturn.errors import display_width

if TYPE_CHECKING:
    from quarterturn.runs.progress import Progress

SHORTEST = 0.25  # seconds between updates
FIRST = re.compile(r"(?:[^\W\d]\w*\s*=\s*)?%(?:sample|verify)\b")
NARROWEST = 20  # terminal cells


class Surface(Protocol):
    """Something that shows one piece of text and HTML, and takes it away again."""

    def show(self, text: str, html: str) -> None: ...

    def clear(self) -> None: ...


@dataclass
class NotebookDisplay:
    """One output of the running cell, updated in place; `alone` if there can be no other yet."""

    shell: Any
    alone: bool = False
    name: str = field(default_factory=lambda: uuid.uuid4().hex)
    shown: bool = False

    def show(self, text: str, html: str) -> None:
        self._publish({"text/plain": text, "text/html": html})

    def clear(self) -> None:
        if self.shown:
            self._publish({"text/plain": ""})
            if self.alone:
                self.shell.display_pub.clear_output(wait=True)  # when the result comes: no flicker

    def _publish(self, data: dict[str, str]) -> None:
        self.shell.display_pub.publish(data=data, metadata={}, transient={"display_id": self.name}, update=self.shown)
        self.shown = True


@dataclass
class TerminalLine:
    """The line of the cursor, written again and again."""

    stream: TextIO
    width: int = 0  # terminal cells written

    def show(self, text: str, html: str) -> None:
        room = max(NARROWEST, shutil.get_terminal_size().columns - 1)
        shown = text.replace("\n", " ")
        while display_width(shown) > room:
            shown = shown[:-1]
        self._write(shown)

    def clear(self) -> None:
        if self.width:
            self._write("")
            self.stream.write("\r")
            self.stream.flush()

    def _write(self, text: str) -> None:
        width = display_width(text)
        self.stream.write("\r" + text + " " * (self.width - width))
        self.stream.flush()
        self.width = width


@dataclass
class Watch:
    """Passes snapshots of a run on to a surface, the first of each stage at once and the others not too often."""

    surface: Surface
    title: str
    clock: Callable[[], float] = time.monotonic
    stage: str = ""
    last: float = 0.0

    def __call__(self, progress: Progress) -> None:
        now = self.clock()
        if progress.stage == self.stage and now - self.last < SHORTEST:
            return
        self.stage, self.last = progress.stage, now
        self.surface.show(one_line(self.title, progress), page(self.title, progress))


@contextmanager
def watching(shell: Any, title: str) -> Iterator[Watch | None]:
    """A watcher for `sample` while a magic runs; None where nobody would see it."""
    surface = _surface(shell)
    if surface is None:
        yield None
        return
    try:
        yield Watch(surface, title)
    finally:
        surface.clear()


@contextmanager
def telling(shell: Any) -> Iterator[Callable[[str], None] | None]:
    """A place for sentences, each replacing the one before; None where nobody would see them."""
    surface = _surface(shell)
    if surface is None:
        yield None
        return
    from quarterturn.reports.markup import framed, words

    try:
        yield lambda text: surface.show(text, framed(f'<p class="qt-quiet">{words(text)}</p>'))
    finally:
        surface.clear()


def one_line(title: str, progress: Progress) -> str:
    """A snapshot as one line, the numbers before the details: a terminal cuts it off at its width."""
    parts = [f"{title}: {progress.stage}, {progress.seconds:.0f} s"]
    if progress.remaining is not None:
        parts[0] += f", {progress.remaining:.0f} s to go"
    parts += [f"{label} = {value}" for label, value, _ in progress.rows]
    if progress.draws:
        parts.append(f"{progress.draws} draws of {progress.chains} chains")
    return "; ".join(parts)


def page(title: str, progress: Progress) -> str:
    """A snapshot as HTML, in the manner of a report."""
    from quarterturn.reports.markup import framed, words

    facts = [progress.stage, f"{progress.seconds:.0f} s"]
    if progress.draws:
        facts.append(f"{progress.draws} draws of {progress.chains} chains")
    if progress.remaining is not None:
        facts.append(f"about {progress.remaining:.0f} s to go")
    rows = "".join(
        f'<tr><th scope="row"><code>{words(label)}</code></th><td>{words(value)}</td><td>{_share(share)}</td></tr>'
        for label, value, share in progress.rows
    )
    heading = '<th scope="col">observable</th><th scope="col">so far</th><th scope="col">of the draws needed</th>'
    table = f"<table><thead><tr>{heading}</tr></thead><tbody>{rows}</tbody></table>" if rows else ""
    beside = f'<span class="qt-quiet">{words(", ".join(facts))}</span>'
    return framed(f'<p class="qt-title"><strong>{words(title)}</strong> {beside}</p>', table)


def _share(share: float | None) -> str:
    return "" if share is None else f"{min(share, 1.0):.0%}"


_cells_begun: list[str] = []  # the message of the latest cell that began with a magic of ours


def _begins_cell(shell: Any) -> bool:
    """Whether the running magic is the first statement of its cell."""
    try:
        message = shell.kernel.get_parent("shell")
        cell, code = message["header"]["msg_id"], message["content"]["code"]
    except (AttributeError, KeyError, TypeError):  # a kernel of another make
        return False
    lines = (line.strip() for line in code.splitlines())
    first = next((line for line in lines if line and not line.startswith("#")), "")
    if not FIRST.match(first) or cell in _cells_begun:
        return False
    _cells_begun[:] = [cell]
    return True


def _surface(shell: Any) -> Surface | None:
    if getattr(shell, "kernel", None) is not None:
        return NotebookDisplay(shell, _begins_cell(shell))
    return TerminalLine(sys.stdout) if sys.stdout.isatty() else None
