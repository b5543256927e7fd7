"""What a record is, and the check that something is one.

The shape is `record.schema.json` beside this module (JSON Schema 2020-12). Records come out of notebooks of unknown
origin, so depth, size and finiteness are looked at before anything that could be slow.
"""

import json
import math
import os
import platform as machine
import re
import sys
from collections.abc import Mapping
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from importlib.resources import files
from typing import Any

from jsonschema import Draft202012Validator
from jsonschema.exceptions import ValidationError, best_match

import quarterturn
from quarterturn.errors import RecordError
from quarterturn.records.canonical import canonical_json

SCHEMA = "quarterturn-record/1"
LARGEST = 1_000_000  # bytes in canonical form
DEEPEST = 16  # levels of nesting
MOST_PARTS = 50_000  # values and keys
PACKAGES = ("jax", "jaxlib", "numpy", "scipy")
SAID = 200  # letters of a complaint; a hostile value must not fill the screen


def validate(record: Any) -> None:
    """Pass if `record` is a record: a bounded, finite value of the shape of `record.schema.json`.

    Raises
    ------
    RecordError
        Says where in the record, and what was expected there.
    """
    _check_bounds(record)
    if len(canonical_json(record)) > LARGEST:
        raise RecordError(f"a record has at most {LARGEST} bytes")
    fault = best_match(_validator().iter_errors(record))
    if fault is not None:
        raise RecordError(f"{place(fault.absolute_path)}: {_complaint(fault)}")
    _check_results(record["results"])


def place(path: Any) -> str:
    """A path in a record, such as results[2].error."""
    text = "".join(f"[{step}]" if isinstance(step, int) else f".{str(step)[:SAID]}" for step in path)
    return text.removeprefix(".") or "record"


def environment() -> tuple[dict[str, str], dict[str, str | int]]:
    """Versions of what computes, and the platform: enough to judge whether bits can agree, no name and no path."""
    versions = {"python": machine.python_version(), "quarterturn": quarterturn.__version__}
    for package in PACKAGES:
        try:
            versions[package] = version(package)
        except PackageNotFoundError:
            versions[package] = "not installed"
    return versions, {
        "system": machine.system(),
        "machine": machine.machine(),
        "implementation": machine.python_implementation(),
        "byte_order": sys.byteorder,
        "processors": os.cpu_count() or 1,
        "vector_instructions": _vector_instructions(),
    }


def _check_bounds(record: Any) -> None:
    """Depth, number of parts, kinds of values and finiteness, without recursion."""
    parts = 0
    waiting: list[tuple[tuple[str | int, ...], Any]] = [((), record)]
    while waiting:
        path, value = waiting.pop()
        parts += 1
        if parts > MOST_PARTS:
            raise RecordError(f"a record has at most {MOST_PARTS} parts")
        if len(path) > DEEPEST:
            raise RecordError(f"{place(path[:DEEPEST])}: nested deeper than {DEEPEST} levels")
        if isinstance(value, Mapping):
            for key, item in value.items():
                if not isinstance(key, str):
                    raise RecordError(f"{place(path)}: a key must be a string, not {_shortened(key)}")
                waiting.append(((*path, key), item))
        elif isinstance(value, (list, tuple)):
            waiting.extend(((*path, index), item) for index, item in enumerate(value))
        elif isinstance(value, float):
            if not math.isfinite(value):
                raise RecordError(f"{place(path)}: {value} is no finite number")
        elif not (value is None or isinstance(value, (str, int))):
            raise RecordError(f"{place(path)}: {type(value).__name__} is no JSON value")


def _check_results(results: list[dict[str, Any]]) -> None:
    """What JSON Schema can't say: labels differ, and the columns of a curve are equally long."""
    seen: dict[tuple[str, str], int] = {}
    for index, result in enumerate(results):
        key = (result["kind"], result["label"])
        if key in seen:
            raise RecordError(f"results[{index}].label: {_shortened(result['label'])} is results[{seen[key]}] already")
        seen[key] = index
        if result["kind"] == "curve":
            lengths = {name: len(result[name]) for name in ("t", "value", "error")}
            if len(set(lengths.values())) > 1:
                raise RecordError(f"results[{index}]: t, value and error differ in length: {lengths}")
            if len(set(result["t"])) < len(result["t"]):
                raise RecordError(f"results[{index}].t: a point repeats")
        elif result["state"] != "withheld" and result["value"] is None:
            raise RecordError(f"results[{index}].value: a number, unless the state is withheld")


def _complaint(fault: ValidationError) -> str:
    if fault.validator == "required":
        return fault.message
    if fault.validator == "additionalProperties" and isinstance(fault.instance, Mapping):
        known = fault.schema.get("properties", {}) if isinstance(fault.schema, Mapping) else {}
        strangers = [key for key in fault.instance if key not in known]
        return f"unknown: {', '.join(map(_shortened, strangers[:5]))}; there is {', '.join(known)}"
    expected = json.dumps({fault.validator: fault.validator_value}, ensure_ascii=False)
    return f"{_shortened(fault.instance)}, expected {expected[:SAID]}"


def _shortened(value: Any) -> str:
    text = repr(value)
    return text if len(text) <= SAID else f"{text[:SAID]}…"


@cache
def _validator() -> Draft202012Validator:
    text = files("quarterturn.records").joinpath("record.schema.json").read_text(encoding="utf-8")
    return Draft202012Validator(json.loads(text))


@cache
def _vector_instructions() -> str:
    """The widest vector instructions, where the system tells: they decide how sums are ordered."""
    try:
        with open("/proc/cpuinfo", encoding="utf-8", errors="replace") as source:
            text = source.read(20_000)
    except OSError:
        return "not known"
    flags = set(re.findall(r"\w+", text))
    return next((name for name in ("avx512f", "avx2", "avx", "sve", "asimd") if name in flags), "not known")
