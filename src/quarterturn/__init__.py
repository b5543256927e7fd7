"""quarterturn: from an action on the blackboard to a number with a defended error bar.

The calls a person makes are here; everything heavy is imported when it is first used.
"""

from typing import TYPE_CHECKING, Any

from quarterturn.errors import (
    ActionError,
    EstimateError,
    NotationError,
    QuarterturnError,
    RecordError,
    RequestError,
    SaddleError,
    SpectrumError,
)

if TYPE_CHECKING:
    from quarterturn.notation.reference import reference
    from quarterturn.runs.declaration import action
    from quarterturn.runs.propagation import propagate
    from quarterturn.runs.saddle import saddle
    from quarterturn.runs.sampling import sample
    from quarterturn.runs.series import series
    from quarterturn.runs.spectrum import levels
    from quarterturn.runs.verification import verify

__version__ = "0.1.0"
__all__ = [
    "ActionError",
    "EstimateError",
    "NotationError",
    "QuarterturnError",
    "RecordError",
    "RequestError",
    "SaddleError",
    "SpectrumError",
    "action",
    "levels",
    "propagate",
    "reference",
    "saddle",
    "sample",
    "series",
    "verify",
]

_ROOMS = {
    "reference": "quarterturn.notation.reference",
    "action": "quarterturn.runs.declaration",
    "sample": "quarterturn.runs.sampling",
    "levels": "quarterturn.runs.spectrum",
    "propagate": "quarterturn.runs.propagation",
    "saddle": "quarterturn.runs.saddle",
    "series": "quarterturn.runs.series",
    "verify": "quarterturn.runs.verification",
}


def __getattr__(name: str) -> Any:
    if name in _ROOMS:
        from importlib import import_module

        found = getattr(import_module(_ROOMS[name]), name)
        globals()[name] = found
        return found
    raise AttributeError(f"module 'quarterturn' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*globals(), *_ROOMS])


def load_ipython_extension(ipython: Any) -> None:
    """Called by `%load_ext quarterturn`."""
    from quarterturn.magics.extension import load

    load(ipython)


def unload_ipython_extension(ipython: Any) -> None:
    """Called by `%unload_ext quarterturn`."""
    from quarterturn.magics.extension import unload

    unload(ipython)
