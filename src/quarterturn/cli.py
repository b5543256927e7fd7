"""The command line: the demonstration, verification of notebooks, and a list of the records that they hold.

Exit status: 0 all is well, 1 a number is different or was altered, 2 something could not be read or made again.
"""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import quarterturn
from quarterturn.errors import QuarterturnError

FINE, WRONG, UNDECIDED = 0, 1, 2
STATUS = {"identical": FINE, "consistent": FINE, "different": WRONG, "altered": WRONG}  # all else: UNDECIDED
STOPPED = 130  # as a shell has it after Ctrl-C
SHORT_NAME = 12


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    parser = _parser()
    asked = parser.parse_args(arguments)
    if asked.command is None:
        parser.print_help()
        return UNDECIDED
    try:
        return int(asked.run(asked))
    except QuarterturnError as complaint:
        print(complaint, file=sys.stderr)
        return UNDECIDED
    except OSError as reason:
        print(f"{reason.filename or 'file'}: {reason.strerror or reason}", file=sys.stderr)
        return UNDECIDED
    except KeyboardInterrupt:
        print("stopped", file=sys.stderr)
        return STOPPED


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="quarterturn", description=(quarterturn.__doc__ or "").split("\n")[0])
    parser.add_argument("--version", action="version", version=f"quarterturn {quarterturn.__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", title="commands")

    demo = commands.add_parser(
        "demo",
        help="put the demonstration notebook here and execute it",
        description="Copy the demonstration notebook, execute it with this Python, and say what it found. "
        "A file of yours is never overwritten.",
    )
    demo.add_argument("--into", metavar="DIR", type=Path, default=Path(), help="folder to put it in (default: here)")
    demo.add_argument("--no-run", action="store_true", help="copy it only")
    demo.set_defaults(run=_demo)

    verify = commands.add_parser(
        "verify",
        help="make every recorded number in notebooks again, and compare",
        description="Run each record in the notebooks again, from the record alone: no code of a notebook is executed. "
        "Answers identical or consistent (exit status 0), different or altered (1), or why it can't be told (2).",
    )
    verify.add_argument("files", metavar="FILE", nargs="+", help="a notebook")
    verify.add_argument("--json", action="store_true", help="the answers as JSON")
    verify.set_defaults(run=_verify)

    records = commands.add_parser(
        "records",
        help="list the records in a notebook",
        description="List what a notebook records: names, actions, couplings and results. Nothing is run.",
    )
    records.add_argument("file", metavar="FILE", help="a notebook")
    records.set_defaults(run=_records)
    return parser


def _demo(asked: argparse.Namespace) -> int:
    from quarterturn.notebooks.demonstration import copied, execute, findings

    path = copied(asked.into)
    print(f"the demonstration is in {path}", flush=True)
    if not asked.no_run:
        execute(path, sys.stdout)
        print("\n" + "\n".join(findings(path)))
        print(f"\ncheck its numbers:  quarterturn verify {_quoted(path)}")
    print(f"open it:            jupyter lab {_quoted(path)}")
    return FINE


def _quoted(path: Path) -> str:
    import shlex

    return shlex.quote(str(path))


def _verify(asked: argparse.Namespace) -> int:
    from quarterturn.runs.verification import verify

    answers, shown = [], []
    for file in asked.files:
        try:
            found = verify(file, progress=lambda words: print(words, file=sys.stderr, flush=True))
        except QuarterturnError as complaint:
            print(complaint, file=sys.stderr)
            answers.append("cannot be read")
            continue
        answers.append(found.answer)
        shown.append(found.to_json())
        if not asked.json:
            print(found, flush=True)
    if asked.json:
        print(json.dumps(shown, indent=2, ensure_ascii=False))
    statuses = {STATUS.get(answer, UNDECIDED) for answer in answers}
    return next(status for status in (WRONG, UNDECIDED, FINE) if status in statuses)


def _records(asked: argparse.Namespace) -> int:
    from quarterturn.records.notebook import embedded

    found = embedded(asked.file)
    if not found:
        print(f"{asked.file} holds no records")
        return FINE
    for item in found:
        print(f"{item.name[:SHORT_NAME] or 'no record'}  {item.place}" + _marked(item.status))
        lines = [*item.reasons, *(_described(item.record) if item.record else ())]
        print("\n".join(f"    {line}" for line in lines))
    return FINE if all(item.status == "intact" for item in found) else WRONG


def _marked(status: str) -> str:
    return "" if status == "intact" else f": {status}"


def _described(record: dict[str, Any]) -> list[str]:
    """What was run, and the numbers it gave."""
    from quarterturn.estimates.printing import format_unresolved, format_value_error

    couplings = ", ".join(f"{name} = {value:g}" for name, value in record["couplings"].items())
    lines = [f"{record['kind']} of {record['action']['name']}" + (f" at {couplings}" if couplings else "")]
    for result in record["results"]:
        if result["kind"] == "curve":
            lines.append(f"{result['label']}: a curve of {len(result['t'])} points")
        elif result["state"] == "good":
            lines.append(f"{result['label']} = {format_value_error(result['value'], result['error'])}")
        elif result["state"] == "unresolved":
            lines.append(f"{result['label']} = {format_unresolved(result['value'], 'unresolved')}")
        else:
            lines.append(f"{result['label']} {result['state']}")
    lines += [f"warning: {words}" for words in record["warnings"]]
    return lines
