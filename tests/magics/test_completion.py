"""Tab on a magic line, through IPython's own completer."""

from typing import Any

import pytest
from IPython.core.completer import provisionalcompleter

COUPLINGS = ["lam=", "v2="]
LATTICE = ["a=", "beta=", "sites=", "temperature="]
SAMPLE = ["error=", "time=", "draws=", "chains=", "seed="]


def completed(person: Any, text: str) -> list[str]:
    """What stands in the line after each completion is taken."""
    with provisionalcompleter():
        found = list(person.shell.Completer.completions(text, len(text)))
    return [text[: c.start] + c.text for c in found]


@pytest.mark.parametrize(
    ("typed", "offers"),
    [
        ("%sample ", ["well", "oscillator"]),
        ("%levels w", ["well"]),
        ("run = %sample o", ["oscillator"]),
        ("x = 1\n%sample we", ["well"]),
        ("%sample well ", [*COUPLINGS, *LATTICE, *SAMPLE]),
        ("%sample well l", ["lam="]),
        ("%sample well lam=0.2 ", ["v2=", *LATTICE, *SAMPLE]),
        ("%sample well lam=0.2, e", ["error="]),
        ("%levels well ", [*COUPLINGS, *LATTICE, "count=", "spacing="]),
        ("%series well ", [*COUPLINGS, "coupling=", "order=", "level="]),
        ("%series well coupling=", ["lam", "v2"]),
        ("%series well coupling=v", ["v2"]),
        ("%levels well spacing=", ["lattice"]),
        ("%levels well spacing=l", ["lattice"]),
        ("%saddle well ", [*COUPLINGS, *LATTICE, "vacuum=", "kind="]),
        ("%saddle well kind=", ["instanton", "bounce"]),
        ("%saddle well kind=b", ["bounce"]),
    ],
)
def test_actions_then_couplings_lattice_and_options(person: Any, typed: str, offers: list[str]) -> None:
    start = max(typed.rfind(" "), typed.rfind("="), typed.rfind(",")) + 1
    assert completed(person, typed) == [typed[:start] + offer for offer in offers]


def test_an_unknown_action_has_no_couplings(person: Any) -> None:
    assert not any(c.endswith("lam=") for c in completed(person, "%sample nothing "))


def test_results_by_every_name(person: Any) -> None:
    result = person.gets("%levels well count=2 as spectrum")
    names = ["last", "spectrum", "well", result.record_name[:12], "all"]
    assert completed(person, "%record ") == [f"%record {name}" for name in names]
    assert completed(person, "%record spectrum ") == ["%record spectrum json", "%record spectrum result"]
    assert completed(person, "%record sp") == ["%record spectrum"]


def test_names_of_the_magics_and_python_are_left_to_ipython(person: Any) -> None:
    assert "%sample" in completed(person, "%sam")
    person.gets("wellington = 1")
    person.shell.Completer.use_jedi = False  # it gives up on a busy machine; that names are left alone is the point
    assert completed(person, "welli") == ["wellington"]
