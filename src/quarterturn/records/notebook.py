"""Records that a notebook carries: found, and checked against their names and against the numbers shown beside them.

Nothing of the notebook is executed, and nothing in it is trusted: the file is read as JSON within bounds on size and
depth, ambiguous JSON (a key twice in one object) is refused, and what looks like a record is validated before use.
A NaN, which some programs write into notebooks, is let pass elsewhere and refused in records.
"""

import html
import json
import math
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from quarterturn.errors import RecordError
from quarterturn.estimates.printing import format_unresolved, format_value_error
from quarterturn.records.canonical import record_name, short_name
from quarterturn.records.schema import validate

Status = Literal["intact", "altered", "malformed", "no record"]

LARGEST_FILE = 200_000_000  # bytes
MOST_OUTPUTS = 100_000
LARGEST_SAFE_INTEGER = 2**53 - 1  # beyond, JSON numbers are floats (RFC 8785, section 3.2.2.3)
KEY = "quarterturn"
RESULT_MIME = "application/vnd.quarterturn.result+json"
SHOWN_TEXTS = ("text/plain", "text/html")


@dataclass(frozen=True, slots=True)
class Found:
    """A result in a notebook, and the record beside it."""

    cell: int  # counts from 1, as people do
    output: int  # counts from 1
    execution_count: int | None
    name: str  # as written beside the record; empty where there is none
    record: dict[str, Any] | None  # a valid record, or None
    status: Status
    reasons: tuple[str, ...] = ()  # what is wrong

    @property
    def place(self) -> str:
        """Where it is, in words."""
        number = f" [{self.execution_count}]" if self.execution_count is not None else ""
        return f"cell {self.cell}{number}, output {self.output}"

    def __str__(self) -> str:
        name = f"record {short_name(self.name)}" if self.name else "a result"
        return "\n    ".join([f"{self.place}: {name}: {self.status}", *self.reasons])


def embedded(path: str | Path) -> list[Found]:
    """All results of quarterturn in the notebook at `path`, in order, with what is known of their records.

    Raises
    ------
    RecordError
        The file can't be read, is too large, is not JSON, or is no notebook of format 4.
    """
    return [
        _examined(cell, index, count, output)
        for cell, count, outputs in _cells(_read(Path(path)))
        for index, output in enumerate(outputs, 1)
        if _is_ours(output)
    ]


def _read(path: Path) -> Any:
    try:
        if not path.is_file():
            raise RecordError(f"there is no file {path}")
        with path.open("rb") as source:
            content = source.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as reason:
        raise RecordError(f"{path} can't be read: {reason}") from None
    if len(content) > LARGEST_FILE:
        raise RecordError(f"{path} is larger than {LARGEST_FILE // 1_000_000} MB")
    return parsed(content, str(path))


def parsed(content: bytes, name: str) -> Any:
    """`content` as JSON in which every key stands once; numbers too large for a float are refused.

    Raises
    ------
    RecordError
        Names the file and what is wrong.
    """
    try:
        return json.loads(content.decode("utf-8"), object_pairs_hook=_unique, parse_int=_number, parse_float=_number)
    except RecordError as reason:
        raise RecordError(f"{name}: {reason.message}") from None
    except UnicodeDecodeError as reason:
        raise RecordError(f"{name} is not UTF-8: {reason}") from None
    except json.JSONDecodeError as reason:
        raise RecordError(f"{name} is not JSON: {reason}") from None
    except (RecursionError, MemoryError):
        raise RecordError(f"{name} is nested too deeply") from None


def _unique(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    unique = dict(pairs)
    if len(unique) < len(pairs):
        seen: set[str] = set()
        twice = next(key for key, _ in pairs if key in seen or seen.add(key))  # type: ignore[func-returns-value]
        raise RecordError(f"the key {twice[:100]!r} stands twice in one object")
    return unique


def _number(text: str) -> int | float:
    """A number of JSON as every reader has it: what a browser saved without an exponent may be a large float."""
    if text.lstrip("-").isdigit() and len(text) <= len(str(LARGEST_SAFE_INTEGER)) + 1:
        number = int(text)
        if abs(number) <= LARGEST_SAFE_INTEGER:
            return number
    value = float(text)
    if not math.isfinite(value):
        raise RecordError(f"the number {text[:40]} is too large")
    return value


def _cells(notebook: Any) -> Iterator[tuple[int, int | None, list[Any]]]:
    """Number, execution count and outputs of the code cells."""
    if not isinstance(notebook, Mapping) or not isinstance(notebook.get("cells"), list):
        raise RecordError("this is no notebook of format 4: there is no list of cells")
    total = 0
    for number, cell in enumerate(notebook["cells"], 1):
        if not isinstance(cell, Mapping) or cell.get("cell_type") != "code":
            continue
        outputs, count = cell.get("outputs"), cell.get("execution_count")
        outputs = outputs if isinstance(outputs, list) else []
        total += len(outputs)
        if total > MOST_OUTPUTS:
            raise RecordError(f"the notebook has more than {MOST_OUTPUTS} outputs")
        yield number, count if isinstance(count, int) and not isinstance(count, bool) else None, outputs


def _is_ours(output: Any) -> bool:
    return isinstance(output, Mapping) and (KEY in _part(output, "metadata") or RESULT_MIME in _part(output, "data"))


def _part(holder: Mapping[str, Any], key: str) -> Mapping[str, Any]:
    part = holder.get(key)
    return part if isinstance(part, Mapping) else {}


def _examined(cell: int, index: int, count: int | None, output: Mapping[str, Any]) -> Found:
    data, beside = _part(output, "data"), _part(output, "metadata").get(KEY)
    if beside is None:
        return Found(cell, index, count, "", None, "no record", ("the numbers shown have no record with them",))
    record = beside.get("record") if isinstance(beside, Mapping) else None
    name = beside.get("name") if isinstance(beside, Mapping) else None
    name = name if isinstance(name, str) else ""
    try:
        if not isinstance(record, dict):
            raise RecordError("the record is no JSON object")
        validate(record)
    except RecordError as reason:
        return Found(cell, index, count, name, None, "malformed", (reason.message,))
    reasons = []
    if record_name(record) != name:
        reasons.append(f"the record's SHA-256 is {short_name(record_name(record))}, not its name {short_name(name)!r}")
    reasons += _payload_faults(record, data.get(RESULT_MIME), name)
    reasons += _text_faults(record, data)
    return Found(cell, index, count, name, record, "altered" if reasons else "intact", tuple(reasons))


def _payload_faults(record: Mapping[str, Any], payload: Any, name: str) -> list[str]:
    """Where the numbers shown differ from those recorded."""
    if payload is None:
        return []
    if not isinstance(payload, Mapping) or not isinstance(payload.get("rows"), list):
        return ["the result shown is malformed"]
    faults = []
    if payload.get("record_name", name) != name:
        faults.append("the result shown names another record")
    shown: set[str] = set()
    recorded = {result["label"]: result for result in record["results"] if result["kind"] == "number"}
    for row in payload["rows"]:
        label = row.get("label") if isinstance(row, Mapping) else None
        if not isinstance(label, str) or label not in recorded or label in shown:
            faults.append(f"shown, but not recorded: {str(label)[:100]}")
            continue
        shown.add(label)
        faults += _row_faults(label, row, recorded[label])
    faults += [f"recorded, but not shown: {label}" for label in recorded if label not in shown]
    return faults + _curve_faults(record, payload.get("curves"))


def _row_faults(label: str, row: Mapping[str, Any], result: Mapping[str, Any]) -> list[str]:
    """The columns of a row that differ. The error of an unresolved number is recorded, and rightly not shown."""
    expected = {key: result[key] for key in ("value", "error", "state")}
    if result["state"] == "withheld":
        expected["value"] = expected["error"] = None
    elif result["state"] == "unresolved" and row.get("error") is None:
        del expected["error"]
    return [
        f"{label}: {column} shown as {repr(row.get(column))[:60]}, recorded as {value!r}"
        for column, value in expected.items()
        if not _same(row.get(column), value)
    ]


def _curve_faults(record: Mapping[str, Any], curves: Any) -> list[str]:
    """Curves under a recorded label must show recorded points. Others (histories, effective gaps) are not recorded."""
    if curves is None:
        return []
    if not isinstance(curves, list) or not all(isinstance(curve, Mapping) for curve in curves):
        return ["the curves shown are malformed"]
    recorded = {result["label"]: result for result in record["results"] if result["kind"] == "curve"}
    faults = []
    for curve in curves:
        label = curve.get("label")
        result = recorded.get(label) if isinstance(label, str) and curve.get("style") == "correlator" else None
        if result is None:
            continue
        points = dict(zip(result["t"], zip(result["value"], result["error"], strict=True), strict=True))
        x, y, error = (curve.get(key) if isinstance(curve.get(key), list) else [] for key in ("x", "y", "error"))
        if len(x) != len(y) or (error and len(error) != len(x)):
            faults.append(f"{label}: the curve shown is malformed")
            continue
        errors = error or [None] * len(x)
        different = sum(
            not isinstance(t, (int, float))
            or t not in points
            or not _same(value, points[t][0])
            or (bool(error) and not _same(sigma, points[t][1]))
            for t, value, sigma in zip(x, y, errors, strict=True)
        )
        if different:
            faults.append(f"{label}: {different} points of the curve shown are not the recorded ones")
    return faults


def _text_faults(record: Mapping[str, Any], data: Mapping[str, Any]) -> list[str]:
    """Numbers whose printed form does not occur in the text shown. What else the text says can't be checked."""
    faults = []
    for mime in SHOWN_TEXTS:
        if mime not in data:
            continue
        text = _plain(data[mime])
        for result in record["results"]:
            printed = _printed(result)
            if printed and printed not in text:
                faults.append(f"{result['label']}: {printed} is recorded, but does not occur in the {mime} shown")
    return faults


def _plain(shown: Any) -> str:
    """The words of a text or a page, with minus signs as in numbers."""
    lines = shown if isinstance(shown, list) else [shown]
    text = "".join(line for line in lines if isinstance(line, str))
    without_data = re.sub(r'"data:[^"]*"', "", text)
    return html.unescape(re.sub(r"<[a-z/][^<>]*>", "", without_data)).replace("−", "-")


def _printed(result: Mapping[str, Any]) -> str:
    """A number as it is shown, up to its exponent, which pages typeset in a form of their own."""
    if result["kind"] != "number" or result["state"] == "withheld":
        return ""
    if result["state"] == "unresolved":
        return format_unresolved(result["value"], "unresolved")
    return format_value_error(result["value"], result["error"]).partition("e")[0]


def _same(shown: Any, recorded: Any) -> bool:
    """Equal, and of a kind: JSON's true is not 1."""
    return not isinstance(shown, bool) and type(shown) in (int, float, str, type(None)) and bool(shown == recorded)
