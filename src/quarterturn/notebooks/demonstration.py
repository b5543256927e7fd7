"""The demonstration: copied beside the user's files, executed by the Python that runs this, and summed up.

The kernel is this interpreter whatever kernel specification is installed, so that what was installed is what is shown.
"""

from __future__ import annotations

import sys
import time
from contextlib import suppress
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

from quarterturn.errors import QuarterturnError

if TYPE_CHECKING:
    from jupyter_client.kernelspec import KernelSpecManager

NAME = "tunnelling_ion.ipynb"
LONGEST_CELL = 600  # seconds
MOST_SHOWN = 3  # numbers of a record


class DemonstrationError(QuarterturnError):
    """The demonstration could not be executed to its end."""

    kind = "demonstration error"


def copied(into: Path) -> Path:
    """Put the notebook into a folder, under the first free name; nothing is ever overwritten.

    Raises
    ------
    DemonstrationError
        There is no such folder.
    OSError
        It can't be written to.
    """
    if not into.is_dir():
        raise DemonstrationError(f"there is no folder {into}")
    content = files("quarterturn.notebooks").joinpath(NAME).read_bytes()
    stem, suffix = NAME.rsplit(".", 1)
    number = 1
    while True:
        path = into / (NAME if number == 1 else f"{stem}-{number}.{suffix}")
        with suppress(FileExistsError), path.open("xb") as target:
            target.write(content)
            return path
        number += 1


def execute(path: Path, stream: TextIO) -> None:
    """Execute a notebook in place, with a line on `stream` for each cell; what was executed is saved in any case.

    Raises
    ------
    DemonstrationError
        A cell failed that should not, or the kernel died.
    """
    import nbformat
    from jupyter_client.manager import AsyncKernelManager
    from nbclient import NotebookClient
    from nbclient.exceptions import CellExecutionError, CellTimeoutError, DeadKernelError

    notebook = nbformat.read(path, as_version=4)
    teller = _Teller(stream, sum(cell.cell_type == "code" for cell in notebook.cells))
    client = NotebookClient(
        notebook,
        km=AsyncKernelManager(kernel_spec_manager=this_interpreter()),
        timeout=LONGEST_CELL,
        resources={"metadata": {"path": str(path.parent)}},
        on_cell_execute=teller.begins,
        on_cell_executed=teller.ends,
    )
    try:
        client.execute(cleanup_kc=True)
    except CellExecutionError as reason:
        raise DemonstrationError(f"cell {teller.count} failed: {reason.ename}: {reason.evalue}") from None
    except (CellTimeoutError, DeadKernelError) as reason:
        raise DemonstrationError(f"cell {teller.count} was not finished: {reason}") from None
    finally:
        nbformat.write(notebook, path)


def this_interpreter() -> KernelSpecManager:
    """Kernel specifications that all start the Python that runs this."""
    from jupyter_client.kernelspec import KernelSpec, KernelSpecManager

    class ThisInterpreter(KernelSpecManager):
        def get_kernel_spec(self, kernel_name: str) -> KernelSpec:
            argv = [sys.executable, "-m", "ipykernel_launcher", "-f", "{connection_file}", "--log-level=ERROR"]
            return KernelSpec(argv=argv, display_name="Python 3", language="python")

    return ThisInterpreter()


class _Teller:
    """Writes what is being executed, and how long it took."""

    def __init__(self, stream: TextIO, total: int) -> None:
        self.stream, self.total, self.count, self.began = stream, total, 0, 0.0

    def begins(self, cell: Any, cell_index: int) -> None:
        self.count += 1
        self.began = time.monotonic()
        first = next((line for line in cell.source.splitlines() if line.strip()), "")
        self.stream.write(f"  cell {self.count:2d} of {self.total}  {first[:60]:60s}")
        self.stream.flush()

    def ends(self, cell: Any, cell_index: int, execute_reply: Any) -> None:
        self.stream.write(f"  {time.monotonic() - self.began:5.1f} s\n")
        self.stream.flush()


def findings(path: Path) -> list[str]:
    """What a notebook found: a line for each intact record in its outputs."""
    from quarterturn.records.notebook import embedded

    return [_found(item.record) for item in embedded(path) if item.status == "intact" and item.record is not None]


def _found(record: dict[str, Any]) -> str:
    """Action, couplings and the first numbers of a record; of levels, what lies between them."""
    couplings = ", ".join(f"{name} = {value:g}" for name, value in record["couplings"].items())
    numbers = [result for result in record["results"] if result["kind"] == "number"]
    if record["kind"] == "levels":
        lowest, *excited = [n["value"] for n in numbers if n["label"].startswith("E_")]
        shown = ", ".join(f"E_{n} - E_0 = {e - lowest:.6g}" for n, e in enumerate(excited[:MOST_SHOWN], 1))
        return f"{record['action']['name']}, levels at {couplings}: {shown}"
    lattice = f"beta = {record['lattice']['sites'] * record['lattice']['spacing']:g}"
    shown = ", ".join(_printed(number) for number in numbers[:MOST_SHOWN])
    return f"{record['action']['name']}, sampled at {couplings}, {lattice}: {shown}"


def _printed(number: dict[str, Any]) -> str:
    from quarterturn.estimates.printing import format_unresolved, format_value_error

    if number["state"] == "withheld":
        return f"{number['label']} withheld"
    if number["state"] == "unresolved":
        return f"{number['label']} = {format_unresolved(number['value'], 'unresolved')}"
    return f"{number['label']} = {format_value_error(number['value'], number['error'])}"
