"""`%turn`: the quarter turn of a declared action, step by step."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.registry import session
from quarterturn.magics.words import read

if TYPE_CHECKING:
    from quarterturn.reports.turn_steps import TurnSteps


@magics_class
class TurnMagic(Magics):
    """The line magic `%turn`."""

    @line_magic
    def turn(self, line: str) -> TurnSteps:
        """Show the quarter turn of an action step by step: every sign and every i.

            %turn NAME

        %%action shows the Lagrangian and the Euclidean one; this shows what lies between: the contraction with the
        declared metric, t = -i tau, and what drops out.

        Example
        -------
            %turn quartic
        """
        words = read("%turn", line)
        action = session.action(words)
        if words.settings:
            raise words.line.at(words.settings[0], "the turn is symbolic: couplings have no values in it")
        return action.steps
