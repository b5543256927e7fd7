"""Outside values by their name: `value("gamma-det-A")` is the entry of checks.json, with its convention and source."""

import json
from functools import cache
from pathlib import Path
from typing import Any


@cache
def _entries() -> dict[str, dict[str, Any]]:
    entries = json.loads((Path(__file__).parent / "checks.json").read_text(encoding="utf-8"))
    return {entry["id"]: entry for entry in entries}


def value(name: str) -> dict[str, Any]:
    """The entry called `name`: parameters, value, convention, tolerance, source."""
    return _entries()[name]
