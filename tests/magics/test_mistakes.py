"""Mistakes on a magic line: the text a person gets, and that nothing is lost by any of them.

`mistakes.txt` holds, for each cell behind `>>>`, what is written; the two actions of conftest.py are declared.
"""

from pathlib import Path
from typing import Any

import pytest

GALLERY = Path(__file__).with_name("mistakes.txt").read_text(encoding="utf-8")
BROKEN = "%%action well\nq(t)\nL = 1/2 q'^2 - lam (q^2 - v2\nlam = 2"
UNBOUNDED = "%%action upside\nq(t)\nL = 1/2 q'^2 + lam q^4\nlam = 0.3\nlattice 24, a = 0.25\nmeasure <q^2>"


def cases() -> list[tuple[str, str]]:
    blocks = GALLERY.split(">>> ")[1:]
    return [(line, text.rstrip("\n")) for line, _, text in (block.partition("\n") for block in blocks)]


@pytest.mark.parametrize(("line", "text"), cases(), ids=[line for line, _ in cases()])
def test_a_mistake_is_explained_at_its_place(person: Any, line: str, text: str) -> None:
    done = person.types(line)
    assert done.error is not None
    assert done.written.rstrip("\n") == text


def test_no_mistake_loses_anything(person: Any, registry: Any) -> None:
    run = person.gets("%sample well draws=16 as run")
    spectrum = person.gets("%levels well count=2 as spectrum")
    actions, results = dict(registry.actions), list(registry.results)
    wrong = [line for line, _ in cases() if line not in ("%record", "%record json")]  # with results these are right
    for cell in [*wrong, BROKEN, "%%action last\nq(t)", "%sample well lam=nan as run", "%record nothing"]:
        assert person.types(cell).error is not None
    assert registry.actions == actions and registry.results == results
    assert person.gets("run") is run and person.gets("spectrum") is spectrum
    assert person.gets("%record run result") is run


def test_an_unknown_result_lists_what_there_is(person: Any) -> None:
    name = person.gets("%levels well count=2 as spectrum").record_name[:12]
    done = person.types("%record spectra")
    assert done.written.splitlines() == [
        "request error, column 9",
        "    %record spectra",
        f"            ^^^^^^^ no result is called spectra; there is last, spectrum, well, {name}",
        "    perhaps: spectrum",
    ]
    assert "after the name of a result stands nothing, json or result" in person.types("%record last now").written


def test_a_failed_declaration_leaves_the_earlier_action(person: Any, registry: Any) -> None:
    before = registry.actions["well"]
    done = person.types(BROKEN)
    assert "notation error, line 2" in done.written and "Traceback" not in done.written
    assert registry.actions["well"] is before


def test_an_action_that_diverges_is_declared_and_shown_but_not_sampled(person: Any, registry: Any) -> None:
    assert any(f.severity == "fatal" for f in person.gets(UNBOUNDED).findings)
    done = person.types("%sample upside")
    assert "action error" in done.written and "Traceback" not in done.written
    assert not registry.results


def test_a_fault_of_the_program_still_shows_its_traceback(person: Any, monkeypatch) -> None:
    import quarterturn.runs.sampling

    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("a fault of ours")

    monkeypatch.setattr(quarterturn.runs.sampling, "sample", broken)
    done = person.types("%sample well")
    assert "Traceback" in done.written and "a fault of ours" in done.written
