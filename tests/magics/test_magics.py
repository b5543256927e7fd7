"""The magics end to end: what they return, keep and show."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest


def test_a_declaration_shows_its_card_and_can_be_put_into_a_variable(person: Any, registry: Any) -> None:
    action = person.gets("%%action spring as spring_action\nq(t)\nL = 1/2 q'^2 - 1/2 k q^2\nk = 2\nlattice 20, a = 0.1")
    assert registry.actions["spring"] is action is person.gets("spring_action")
    assert "action spring" in person.types("spring_action").written
    assert "text/html" in action._repr_mimebundle_()[0]


def test_declaring_again_replaces_the_action_and_keeps_results(person: Any, registry: Any) -> None:
    spectrum = person.gets("%levels well count=2")
    again = person.gets("%%action well\nq(t)\nL = 1/2 q'^2 - 1/2 k q^2\nk = 2\nlattice 20, a = 0.1\nmeasure <q^2>")
    assert registry.actions["well"] is again and list(again.couplings) == ["k"]
    assert registry.results[0].result is spectrum


def test_a_run_is_shown_once_returned_and_kept(person: Any, registry: Any) -> None:
    done = person.types("%sample well lam = 1/4, draws=32 seed=3 chains=8 as run")
    assert done.error is None and done.written.count("well, sampled") == 1
    run = done.value
    assert run is person.gets("run") is registry.results[0].result
    assert run.couplings == {"lam": 0.25, "v2": 1.0}
    request = run.record["request"]
    assert (request["draws"], request["seed"], request["chains"]) == (32, 3, 8)


def test_an_assigned_run_is_not_shown_but_kept(person: Any, registry: Any) -> None:
    done = person.types("quiet = %sample well draws=16")
    assert done.error is None and done.written == "" and done.value is None
    assert person.gets("quiet") is registry.results[0].result


def test_the_magic_gives_the_numbers_of_the_call(person: Any) -> None:
    import quarterturn as qt

    run = person.gets("%sample well lam=0.5 sites=20 draws=32 seed=7")
    action = qt.action(
        "q(t)\nL = 1/2 q'^2 - lam (q^2 - v2)^2\nlam = 0.3, v2 = 1\nlattice 24, a = 0.25\nmeasure <q^2>, gap(q)"
    )
    same = qt.sample(action, lam=0.5, sites=20, draws=32, seed=7)
    assert run.record["results"] == same.record["results"]


def test_python_variables_are_filled_in(person: Any) -> None:
    person.gets("strength = 0.7")
    assert person.gets("%levels well lam={strength} v2=$strength count=2").couplings == {"lam": 0.7, "v2": 0.7}


def test_saddles_take_their_options(person: Any) -> None:
    found = person.gets("%saddle well lam=1 as tunnel")
    assert found.kind == "instanton" and person.shell.user_ns["tunnel"] is found
    assert found["S"] == pytest.approx(32**0.5 / 3, rel=1e-10)
    assert person.gets("%saddle well vacuum=-1 kind=instanton")["S"] > 0
    assert "kind is instanton or bounce" in person.types("%saddle well kind=kink").written
    assert "nothing decays" in person.types("%saddle well beta=4").written


def test_a_saddle_in_a_notebook_is_verified(person: Any, notebook_of: Callable[..., Path]) -> None:
    path = notebook_of(person.gets("%saddle well lam=1"))
    assert person.gets(f"%verify {path}").answer == "identical"


def test_a_series_takes_its_options_and_is_kept(person: Any, registry: Any) -> None:
    person.gets("%%action quartic\nq(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1")
    series = person.gets("%series quartic lam=1/4 order=12 level=1 coupling=lam as aho")
    assert (series.order, series.level, series.couplings["lam"]) == (12, 1, 0.25)
    assert series is person.gets("aho") is registry.results[0].result
    assert "series of quartic" in repr(person.gets("%record aho"))
    refused = person.types("%series quartic beta=2")
    assert "beta has no meaning for a series" in str(refused.error)


def test_a_series_in_a_notebook_is_verified(person: Any, notebook_of: Callable[..., Path]) -> None:
    person.gets("%%action cubic\nq(t)\nL = 1/2 q'^2 - 1/2 q^2 (1 - sqrt(g) q)^2\ng = 0.02")
    person.gets("%%action quartic\nq(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1")
    for name in ("cubic", "quartic"):  # one withheld and unresolved, one with errors
        path = notebook_of(person.gets(f"%series {name} order=30"))
        assert person.gets(f"%verify {path}").answer == "identical"


def test_levels_take_their_options(person: Any) -> None:
    assert len(person.gets("%levels well count=3").energies) == 3
    assert person.gets("%levels well beta=2").beta == 2
    on_lattice = person.gets("%levels well spacing=lattice count=2 lam=1")
    assert on_lattice.record["lattice"] == {"sites": 24, "spacing": 0.25, "boundary": "periodic"}


def test_a_target_for_one_number_ends_the_run(person: Any) -> None:
    run = person.gets("%sample well error[<q^2>]=3% time=30s seed=2")
    assert run.stop == "satisfied" and run["<q^2>"].error <= 0.03 * run["<q^2>"].value


def test_results_are_found_by_variable_action_and_record(person: Any, registry: Any) -> None:
    first = person.gets("%levels well count=2 as first")
    second = person.gets("%levels oscillator count=2")
    third = person.gets("%levels well count=3")
    for name, result in {
        "": third,
        "last": third,
        "first": first,
        "oscillator": second,
        "well": third,
        first.record_name[:8]: first,
    }.items():
        assert person.gets(f"%record {name} result") is result, name
    listed = repr(person.gets("%record all"))
    places = [listed.index(r.record_name[:12]) for r in (third, second, first)]
    assert places == sorted(places)


def test_a_variable_means_what_it_holds_now(person: Any) -> None:
    person.gets("%levels well count=2 as spectrum")
    made = person.gets("import quarterturn as qt; spectrum = qt.levels(spectrum.action, count=3); spectrum")
    assert person.gets("%record spectrum result") is made
    assert "a call in Python" in repr(person.gets("%record spectrum"))


def test_a_record_is_shown_in_words_and_as_json(person: Any) -> None:
    run = person.gets("%sample well lam=0.2 draws=16 as run")
    sheet = person.gets("%record run")
    for words in (run.record_name, "%sample well lam=0.2 draws=16 as run", "lam 0.2", "seed 1", "jax", "<q^2>, gap(q)"):
        assert words in repr(sheet)
    assert "&lt;q^2&gt;" in sheet._repr_html_() and "<q^2>" not in sheet._repr_html_()
    assert json.loads(repr(person.gets("%record json"))) == json.loads(json.dumps(run.record))


def test_what_record_shows_is_not_taken_for_a_result(person: Any, notebook_of: Callable[..., Path]) -> None:
    from IPython.core.formatters import DisplayFormatter

    from quarterturn.records.notebook import embedded

    class Shown:
        def __init__(self, result: Any) -> None:
            self.result = result

        def _repr_mimebundle_(self) -> Any:
            return DisplayFormatter().format(self.result)

    person.gets("%levels well count=2")
    views = [Shown(person.gets(line)) for line in ("%record", "%record json", "%record all")]
    assert embedded(notebook_of(*views)) == []


@pytest.mark.parametrize("quote", ["", '"', "'"])
def test_a_notebook_is_verified(person: Any, notebook_of: Callable[..., Path], quote: str) -> None:
    path = notebook_of(person.gets("%levels well count=2"))
    verdict = person.gets(f"%verify {quote}{path}{quote}")
    assert verdict.answer == "identical"
    assert "identical" in person.types(f"%verify {path}").written
