"""`%%action`: declare an action."""

from __future__ import annotations

import inspect
from typing import TYPE_CHECKING

from IPython.core.magic import Magics, cell_magic, magics_class

from quarterturn.magics.registry import session
from quarterturn.magics.words import NAME, NOT_NAMES, read, required_name
from quarterturn.notation.reference import reference

if TYPE_CHECKING:
    from quarterturn.runs.declaration import DeclaredAction


@magics_class
class ActionMagic(Magics):
    """The cell magic `%%action`."""

    @cell_magic
    def action(self, line: str, cell: str) -> DeclaredAction:
        """Declare an action, as it stands on paper.

            %%action NAME [as VARIABLE]
            ... body ...

        The body is notation, not Python: a path, a Lagrangian in real time, the couplings with their
        defaults, a lattice in imaginary time, and what to measure. One statement a line; # starts a
        comment. The cell shows the action as read, the Euclidean action after t = -i tau, and what was
        found about it. Declaring a name again replaces the action; results made before stay.

        NAME          what %sample, %levels and %saddle know the action by
        as VARIABLE   also put the action into a Python variable, for qt.sample(VARIABLE, ...)

        Example
        -------
            %%action quartic
            q(t)
            L = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4
            w = 1, lam = 0.1
            lattice 200, a = 0.1
            measure <q^2>, <q(t) q(0)>, gap(q)

        The notation on one page, which qt.reference() shows as a table
        """
        words = read("%%action", line)
        name = required_name(words, "the name of the action", "the cell begins with %%action NAME")
        if not NAME.fullmatch(name.text) or name.text in NOT_NAMES:
            reason = "it is a word of the magics" if name.text in NOT_NAMES else "letters, digits, _ - . make a name"
            raise words.line.at(name, f"{name.text} can't be the name of an action: {reason}")
        if words.settings:
            raise words.line.at(words.settings[0], "couplings are declared in the body, with their defaults: lam = 0.1")
        from quarterturn.runs.declaration import action

        declared = action(cell, name.text)
        session.declare(declared, words, self.shell)
        return declared


ActionMagic.action.__doc__ = f"{inspect.getdoc(ActionMagic.action)}\n\n{reference()}\n"
