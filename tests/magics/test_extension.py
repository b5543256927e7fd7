"""Loading and unloading: quick, light, repeatable; and the help texts."""

import subprocess
import sys
from collections.abc import Iterator
from typing import Any

import pytest
from IPython.core.interactiveshell import InteractiveShell
from IPython.utils.capture import capture_output

HEAVY = ("jax", "scipy", "matplotlib", "lark", "numpy", "nbformat", "jsonschema")
MAGICS = ("sample", "levels", "saddle", "record", "verify")


@pytest.fixture
def loaded(shell: InteractiveShell) -> Iterator[InteractiveShell]:
    yield shell
    shell.run_line_magic("reload_ext", "quarterturn")


def lines_of(shell: InteractiveShell) -> list[str]:
    return sorted(name for name in shell.magics_manager.magics["line"] if name in MAGICS)


def test_loading_takes_less_than_a_second_and_imports_nothing_heavy() -> None:
    code = (
        "import sys, time\nfrom IPython.core.interactiveshell import InteractiveShell\n"
        "shell = InteractiveShell.instance()\nbefore, began = set(sys.modules), time.perf_counter()\n"
        "shell.run_line_magic('load_ext', 'quarterturn')\n"
        "print(time.perf_counter() - began, *set(sys.modules) - before)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    seconds, *modules = done.stdout.split()
    assert float(seconds) < 1
    assert "quarterturn.magics.sample" in modules
    assert not {name.partition(".")[0] for name in modules} & set(HEAVY)


def test_loading_again_is_harmless(loaded: InteractiveShell) -> None:
    from quarterturn import load_ipython_extension

    matchers, parts = len(loaded.Completer.custom_matchers), len(loaded.configurables)
    load_ipython_extension(loaded)
    loaded.run_line_magic("reload_ext", "quarterturn")
    assert (len(loaded.Completer.custom_matchers), len(loaded.configurables)) == (matchers, parts)
    assert lines_of(loaded) == sorted(MAGICS)


def test_unloading_takes_everything_out_and_keeps_the_session(
    loaded: InteractiveShell, person: Any, registry: Any
) -> None:
    loaded.run_line_magic("unload_ext", "quarterturn")
    assert lines_of(loaded) == [] and "action" not in loaded.magics_manager.magics["cell"]
    assert not [m for m in loaded.Completer.custom_matchers if m.__module__.startswith("quarterturn")]
    from quarterturn import unload_ipython_extension

    unload_ipython_extension(loaded)
    loaded.run_line_magic("load_ext", "quarterturn")
    assert list(registry.actions) == ["well", "oscillator"]


def test_unloading_leaves_a_magic_of_the_same_name_that_is_not_ours(loaded: InteractiveShell) -> None:
    loaded.register_magic_function(lambda line: "theirs", "line", "record")
    loaded.run_line_magic("unload_ext", "quarterturn")
    assert loaded.run_line_magic("record", "") == "theirs"
    del loaded.magics_manager.magics["line"]["record"]


@pytest.mark.parametrize("magic", ["%%action", *(f"%{name}" for name in MAGICS)])
def test_help_shows_usage_options_and_an_example_within_a_terminal(shell: InteractiveShell, magic: str) -> None:
    with capture_output() as captured:
        shell.run_cell(f"{magic}?")
    lines = captured.stdout.splitlines()
    assert any(line.strip().startswith(f"{magic} ") for line in lines)
    assert "Example" in lines or "Example" in captured.stdout
    assert max(map(len, lines[:-1])) <= 110
