"""Outside values."""

import importlib.util
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest


@pytest.fixture(scope="session")
def outside() -> Callable[[str], dict[str, Any]]:
    """An entry of the outside values by its name."""
    place = Path(__file__).parents[1] / "outside" / "values.py"
    spec = importlib.util.spec_from_file_location("outside_values", place)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.value
