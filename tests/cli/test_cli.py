"""The command line: what it prints, where, and its exit status."""

import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import quarterturn
from quarterturn.cli import main

HEAVY = ("jax", "scipy", "matplotlib", "lark", "numpy", "nbformat", "nbclient", "IPython", "jsonschema")


def test_the_module_is_the_command() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "quarterturn", "--version"], capture_output=True, text=True, timeout=60
    )
    assert (done.returncode, done.stdout) == (0, f"quarterturn {quarterturn.__version__}\n")


def test_help_is_there_before_anything_heavy_is_loaded() -> None:
    code = f"import sys\nfrom quarterturn.cli import main\nmain([])\nprint([m for m in {HEAVY} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert done.stdout.endswith("[]\n")
    for command in ("demo", "verify", "records"):
        assert f"\n    {command} " in done.stdout


@pytest.mark.parametrize("command", ["demo", "verify", "records"])
def test_each_command_explains_itself(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main([command, "--help"])
    assert ended.value.code == 0 and f"usage: quarterturn {command}" in capsys.readouterr().out


@pytest.mark.parametrize("arguments", [["sampel"], ["verify"], ["records"], ["demo", "--into"]])
def test_wrong_words_give_usage_and_status_2(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    assert ended.value.code == 2 and "usage: quarterturn" in capsys.readouterr().err


def test_verify_says_identical_with_status_0(
    levels: Any, run: Any, notebook_of: Callable[..., str], capsys: pytest.CaptureFixture[str]
) -> None:
    path = notebook_of(levels, run)
    assert main(["verify", path]) == 0
    said = capsys.readouterr()
    assert said.out.startswith(f"{path}: identical\n")
    assert f"record {run.record_name[:12]}, sample of well at lam = 0.5, v2 = 1" in said.out
    assert "record 2 of 2" in said.err


def test_an_altered_number_gives_status_1(
    levels: Any, run: Any, notebook_of: Callable[..., str], altered: Callable[..., str], capsys: Any
) -> None:
    shown = str(run["<q^2>"])
    path = altered(notebook_of(levels, run), shown, shown.replace("(", "1("))
    assert main(["verify", path]) == 1
    assert f"{path}: altered" in capsys.readouterr().out


@pytest.mark.parametrize("content", ["", "{}", "not a notebook", '{"cells": 3}'])
def test_what_is_no_notebook_gives_status_2_and_a_message(content: str, tmp_path: Path, capsys: Any) -> None:
    path = tmp_path / "other.ipynb"
    path.write_text(content)
    for command in ("verify", "records"):
        assert main([command, str(path)]) == 2
        said = capsys.readouterr()
        assert said.err.startswith("record error") and "Traceback" not in said.err and said.out == ""


def test_a_missing_file_does_not_keep_the_others_from_being_verified(
    levels: Any, notebook_of: Callable[..., str], capsys: pytest.CaptureFixture[str]
) -> None:
    path = notebook_of(levels)
    assert main(["verify", "missing.ipynb", path]) == 2
    said = capsys.readouterr()
    assert "there is no file missing.ipynb" in said.err and f"{path}: identical" in said.out


def test_a_wrong_number_outweighs_an_unreadable_file(
    levels: Any, notebook_of: Callable[..., str], altered: Callable[..., str]
) -> None:
    path = altered(notebook_of(levels), levels.record_name, "0" * 64)
    assert main(["verify", "missing.ipynb", path]) == 1


def test_a_notebook_without_records_is_not_called_verified(notebook_of: Callable[..., str], capsys: Any) -> None:
    assert main(["verify", notebook_of()]) == 2
    assert "holds no records" in capsys.readouterr().out


def test_answers_as_json(levels: Any, notebook_of: Callable[..., str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["verify", "--json", notebook_of(levels)]) == 0
    (answer,) = json.loads(capsys.readouterr().out)
    assert answer["answer"] == "identical" and answer["results"][0]["name"] == levels.record_name


def test_records_are_listed_with_their_results(
    levels: Any, run: Any, notebook_of: Callable[..., str], capsys: Any
) -> None:
    assert main(["records", notebook_of(levels, run)]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[0] == f"{levels.record_name[:12]}  cell 1 [1], output 1"
    assert lines[1] == "    levels of well at lam = 0.3, v2 = 1"
    start = lines.index(f"{run.record_name[:12]}  cell 2 [2], output 1")
    assert lines[start + 1] == "    sample of well at lam = 0.5, v2 = 1"
    assert f"    <q^2> = {run['<q^2>']}" in lines[start:]


def test_an_altered_record_is_marked_in_the_list(
    levels: Any, notebook_of: Callable[..., str], altered: Callable[..., str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["records", altered(notebook_of(levels), levels.record_name, "0" * 64)]) == 1
    assert capsys.readouterr().out.startswith("000000000000  cell 1 [1], output 1: altered\n")


def test_an_interrupt_ends_quietly(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    def interrupted(path: str) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("quarterturn.records.notebook.embedded", interrupted)
    assert main(["records", "any.ipynb"]) == 130
    assert capsys.readouterr().err == "stopped\n"


def test_the_demonstration_is_copied_without_running_it(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["demo", "--no-run", "--into", str(tmp_path)]) == 0
    path = tmp_path / "tunnelling_ion.ipynb"
    assert path.exists()
    said = capsys.readouterr().out
    assert f"the demonstration is in {path}" in said and f"jupyter lab {path}" in said


def test_a_folder_that_is_not_there_is_named(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["demo", "--into", str(tmp_path / "nowhere")]) == 2
    assert f"there is no folder {tmp_path / 'nowhere'}" in capsys.readouterr().err
