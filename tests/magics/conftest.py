"""A shell with the extension, in this process, that keeps no history and reads no profile of the machine."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from IPython.core.interactiveshell import ExecutionResult, InteractiveShell
from IPython.utils.capture import capture_output
from traitlets.config import Config

from quarterturn.magics.registry import Registry, session

WELL = """%%action well
q(t)
L = 1/2 q'^2 - lam (q^2 - v2)^2
lam = 0.3, v2 = 1
lattice 24, a = 0.25
measure <q^2>, gap(q)
"""
OSCILLATOR = WELL.replace("well", "oscillator").replace("lam (q^2 - v2)^2", "lam q^2 + v2")


@dataclass(frozen=True)
class Done:
    """What a cell did: its value, its complaint, and what was written."""

    value: Any
    error: BaseException | None
    written: str


class Person:
    """Types cells and reads what they show."""

    def __init__(self, shell: InteractiveShell) -> None:
        self.shell = shell

    def types(self, cell: str) -> Done:
        with capture_output(display=False) as captured:
            result: ExecutionResult = self.shell.run_cell(cell, store_history=True)
        return Done(result.result, result.error_before_exec or result.error_in_exec, captured.stdout + captured.stderr)

    def gets(self, cell: str) -> Any:
        """The value of a cell that must succeed."""
        done = self.types(cell)
        assert done.error is None, done.written
        return done.value


@pytest.fixture(scope="session")
def shell(tmp_path_factory: pytest.TempPathFactory) -> Iterator[InteractiveShell]:
    settings = Config()
    settings.HistoryManager.enabled = False
    settings.InteractiveShell.colors = "nocolor"
    folder = str(tmp_path_factory.mktemp("ipython"))
    shell = InteractiveShell.instance(config=settings, ipython_dir=folder)
    shell.run_line_magic("load_ext", "quarterturn")
    yield shell
    InteractiveShell.clear_instance()


@pytest.fixture
def registry(shell: InteractiveShell) -> Iterator[Registry]:
    """The session's registry, empty; what a test leaves there or in variables is taken away."""
    before = set(shell.user_ns)
    yield session
    session.actions.clear()
    session.results.clear()
    for name in set(shell.user_ns) - before:
        del shell.user_ns[name]


@pytest.fixture(scope="session")
def well() -> str:
    """A cell that declares an action."""
    return WELL


@pytest.fixture
def person(shell: InteractiveShell, registry: Registry) -> Person:
    """Somebody at an empty session in which `well` and `oscillator` are declared."""
    someone = Person(shell)
    someone.gets(WELL)
    someone.gets(OSCILLATOR)
    return someone


@pytest.fixture
def notebook_of(tmp_path: Path) -> Callable[..., Path]:
    """Writes a notebook whose outputs show these results."""
    import nbformat
    from nbformat.v4 import new_code_cell, new_notebook, new_output

    def write(*results: Any) -> Path:
        cells = []
        for number, result in enumerate(results, 1):
            data, metadata = result._repr_mimebundle_()
            output = new_output("execute_result", data, metadata=metadata, execution_count=number)
            cells.append(new_code_cell("%sample", outputs=[output], execution_count=number))
        path = tmp_path / "a notebook.ipynb"
        nbformat.write(new_notebook(cells=cells), path)
        return path

    return write
