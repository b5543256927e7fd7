"""The magics in a real kernel: progress is updated in place, and the stop button keeps what there is."""

import os
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from jupyter_client.manager import KernelManager

import quarterturn
from quarterturn.notebooks.demonstration import this_interpreter

Message = dict[str, Any]
PATIENCE = 60  # seconds for one message


class Kernel:
    """A kernel with the extension, and what it sends."""

    def __init__(self, manager: KernelManager) -> None:
        self.manager = manager
        self.client = manager.blocking_client()
        self.client.start_channels()
        self.client.wait_for_ready(timeout=PATIENCE)

    def types(self, code: str, on_message: Callable[[Message], None] = lambda message: None) -> list[Message]:
        """All messages of a cell, in order, each with the time of its arrival."""
        request, messages = self.client.execute(code), []
        while True:
            message = self.client.get_iopub_msg(timeout=PATIENCE)
            if message["parent_header"].get("msg_id") != request:
                continue
            message["arrived"] = time.monotonic()
            messages.append(message)
            on_message(message)
            if message["msg_type"] == "status" and message["content"]["execution_state"] == "idle":
                return messages


@pytest.fixture(scope="module")
def kernel(tmp_path_factory: pytest.TempPathFactory, well: str) -> Iterator[Kernel]:
    source = str(Path(quarterturn.__file__).parent.parent)
    folder = str(tmp_path_factory.mktemp("ipython"))
    environment = {**os.environ, "PYTHONPATH": source, "IPYTHONDIR": folder}
    manager = KernelManager(kernel_spec_manager=this_interpreter())
    manager.start_kernel(env=environment, extra_arguments=["--HistoryManager.enabled=False"])
    kernel = Kernel(manager)
    kernel.types("%load_ext quarterturn")
    kernel.types(well)
    kernel.types("compiled = %sample well draws=16")
    yield kernel
    kernel.client.stop_channels()
    manager.shutdown_kernel(now=True)


def of_kind(messages: list[Message], *kinds: str) -> list[Message]:
    return [message for message in messages if message["msg_type"] in kinds]


def test_progress_is_one_display_updated_and_only_the_result_remains(kernel: Kernel) -> None:
    messages = kernel.types("%sample well error=1e-9 time=3s seed=2")
    shown = of_kind(messages, "display_data", "update_display_data")
    assert [m["msg_type"] for m in shown] == ["display_data"] + ["update_display_data"] * (len(shown) - 1)
    assert len({m["content"]["transient"]["display_id"] for m in shown}) == 1
    drawing = [m for m in shown if "drawing" in m["content"]["data"]["text/plain"]]
    assert len(drawing) >= 3
    assert "&lt;q^2&gt;" in drawing[-1]["content"]["data"]["text/html"]
    assert (drawing[-1]["arrived"] - drawing[0]["arrived"]) / (len(drawing) - 1) > 0.24
    assert shown[-1]["content"]["data"] == {"text/plain": ""}
    (result,) = of_kind(messages, "execute_result")
    assert messages.index(result) > messages.index(shown[-1])
    assert result["content"]["metadata"]["quarterturn"]["record"]["stop"] == "time"
    assert not of_kind(messages, "comm_open", "comm_msg", "stream", "error")


@pytest.mark.parametrize(
    ("cell", "cleared"),
    [
        ("# first\n\n%sample well draws=64", 1),
        ("run = %sample well draws=64", 1),
        ("print('mine')\n%sample well draws=64", 0),
        ("%sample well draws=64\nprint('mine')\n%sample well draws=64", 1),
    ],
)
def test_the_empty_output_goes_only_where_there_can_be_no_other(kernel: Kernel, cell: str, cleared: int) -> None:
    messages = kernel.types(cell)
    clears = of_kind(messages, "clear_output")
    assert len(clears) == cleared and all(message["content"]["wait"] for message in clears)
    assert not cleared or messages.index(clears[0]) < min(
        (messages.index(m) for m in of_kind(messages, "stream", "execute_result")), default=len(messages)
    )


def test_the_stop_button_ends_the_cell_with_a_run_that_is_cut_short(kernel: Kernel) -> None:
    pressed: list[float] = []

    def press(message: Message) -> None:
        data = message["content"].get("data", {})
        if not pressed and "drawing" in data.get("text/plain", ""):
            pressed.append(time.monotonic())
            kernel.manager.interrupt_kernel()

    messages = kernel.types("%sample well error=1e-9 time=50s as run", press)
    assert pressed and time.monotonic() - pressed[0] < 20
    assert not of_kind(messages, "error", "stream")
    (result,) = of_kind(messages, "execute_result")
    assert "cut short" in result["content"]["data"]["text/plain"]
    (answer,) = of_kind(kernel.types("run.stop, run['<q^2>'].error > 0"), "execute_result")
    assert answer["content"]["data"]["text/plain"] == "('interrupted', True)"
