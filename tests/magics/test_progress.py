"""Progress: at most four updates a second, one line in a terminal, nothing left behind."""

import io
import os
from typing import Any

import pytest

from quarterturn.magics.progress import NotebookDisplay, TerminalLine, Watch, one_line, page, watching
from quarterturn.runs.progress import Progress


class Recorder:
    """A surface, or the publisher of a kernel, that remembers."""

    def __init__(self) -> None:
        self.shown: list[Any] = []

    def show(self, text: str, html: str) -> None:
        self.shown.append(text)

    def clear(self) -> None:
        self.shown.append(None)

    def clear_output(self, wait: bool) -> None:
        self.shown.append({"cleared": wait})

    def publish(self, **message: Any) -> None:
        self.shown.append(message)


def snapshot(seconds: float, stage: str = "drawing") -> Progress:
    return Progress(stage, seconds, 640, 64, (("<q^2>", "0.31(2)", 0.25), ("<a|b>", "1(1)", None)), 7.0)


def test_at_most_four_updates_a_second_but_every_stage() -> None:
    now = 0.0
    surface = Recorder()
    watch = Watch(surface, "well", clock=lambda: now)
    watch(snapshot(0, "compiling"))
    for step in range(1, 101):
        now = step / 50
        watch(snapshot(now))
    assert len(surface.shown) == 1 + 8
    assert surface.shown[0].startswith("well: compiling")


def test_a_terminal_line_is_rewritten_in_place_and_wiped(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("shutil.get_terminal_size", lambda: os.terminal_size((40, 24)))
    stream = io.StringIO()
    line = TerminalLine(stream)
    line.show("x" * 100, "")
    line.show("λ short\nof it", "")
    line.clear()
    first, second, last, end = stream.getvalue().split("\r")[1:]
    assert first == "x" * 39
    assert second.rstrip() == "λ short of it" and len(second) == 39
    assert last.strip() == "" and len(last) == 13 and end == ""
    assert "\n" not in stream.getvalue()


def test_a_display_is_made_once_updated_and_emptied() -> None:
    publisher = Recorder()
    display = NotebookDisplay(type("Shell", (), {"display_pub": publisher})())
    display.clear()
    assert publisher.shown == []
    display.show("a", "<b>a</b>")
    display.show("b", "<b>b</b>")
    display.clear()
    assert [message["update"] for message in publisher.shown] == [False, True, True]
    assert len({message["transient"]["display_id"] for message in publisher.shown}) == 1
    assert publisher.shown[-1]["data"] == {"text/plain": ""}


def test_an_output_that_is_alone_is_taken_away_when_the_next_one_comes() -> None:
    publisher = Recorder()
    display = NotebookDisplay(type("Shell", (), {"display_pub": publisher})(), alone=True)
    display.show("a", "<b>a</b>")
    display.clear()
    assert publisher.shown[-1] == {"cleared": True}


def test_the_page_is_escaped_and_says_how_far_it_is() -> None:
    shown = page("<well>", snapshot(3.2))
    assert "&lt;well&gt;" in shown and "<well>" not in shown and "&lt;q^2&gt;" in shown
    for words in ("drawing, 3 s", "640 draws of 64 chains", "about 7 s to go", "0.31(2)", "25%"):
        assert words in shown
    assert "<script" not in shown


def test_a_line_has_the_numbers_before_the_details() -> None:
    line = "well: drawing, 3 s, 7 s to go; <q^2> = 0.31(2); <a|b> = 1(1); 640 draws of 64 chains"
    assert one_line("well", snapshot(3.2)) == line


def test_nothing_is_shown_where_the_output_is_no_terminal(shell: Any) -> None:
    with watching(shell, "well") as watcher:
        assert watcher is None


def test_the_surface_is_cleared_when_a_run_fails(monkeypatch: pytest.MonkeyPatch, shell: Any) -> None:
    surface = Recorder()
    monkeypatch.setattr("quarterturn.magics.progress._surface", lambda shell: surface)
    with pytest.raises(ZeroDivisionError), watching(shell, "well") as watcher:
        assert watcher is not None
        watcher(snapshot(1))
        raise ZeroDivisionError
    assert surface.shown[-1] is None
