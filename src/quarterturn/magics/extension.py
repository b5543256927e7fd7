"""What `%load_ext quarterturn` does: the magics and their completion, and nothing heavy."""

from __future__ import annotations

from typing import Any

from quarterturn.magics.action import ActionMagic
from quarterturn.magics.completion import complete_line
from quarterturn.magics.levels import LevelsMagic
from quarterturn.magics.record import RecordMagic
from quarterturn.magics.saddle import SaddleMagic
from quarterturn.magics.sample import SampleMagic
from quarterturn.magics.series import SeriesMagic
from quarterturn.magics.turn import TurnMagic
from quarterturn.magics.verify import VerifyMagic

MAGICS = (
    ActionMagic,
    TurnMagic,
    SampleMagic,
    LevelsMagic,
    SaddleMagic,
    SeriesMagic,
    RecordMagic,
    VerifyMagic,
)


def load(ip: Any) -> None:
    """Add the magics to a shell. Harmless if they are there already."""
    unload(ip)
    ip.register_magics(*MAGICS)
    ip.Completer.custom_matchers.append(complete_line)


def unload(ip: Any) -> None:
    """Take the magics out of a shell again; magics of the same name that somebody else registered stay.

    Actions and results stay in the session and are there again after loading.
    """
    manager = ip.magics_manager
    for table in (*manager.magics.values(), manager.registry):
        for name, magic in list(table.items()):
            if isinstance(getattr(magic, "__self__", magic), MAGICS):
                del table[name]
    ip.configurables[:] = [part for part in ip.configurables if not isinstance(part, MAGICS)]
    ip.Completer.custom_matchers[:] = [m for m in ip.Completer.custom_matchers if m is not complete_line]
