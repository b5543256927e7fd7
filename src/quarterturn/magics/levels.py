"""`%levels`: the imaginary-time solution of a declared action."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.numbers import whole
from quarterturn.magics.registry import session
from quarterturn.magics.request import Reader, keywords, placed
from quarterturn.magics.words import Line, Setting, read

if TYPE_CHECKING:
    from quarterturn.runs.spectrum import Levels


def _spacing(line: Line, setting: Setting) -> str:
    if setting.value != "lattice":
        raise line.at_value(setting, "spacing is lattice, or is left out for the continuum", "spacing=lattice")
    return setting.value


OPTIONS: dict[str, Reader] = {"count": whole, "spacing": _spacing}


@magics_class
class LevelsMagic(Magics):
    """The line magic `%levels`."""

    @line_magic
    def levels(self, line: str) -> Levels:
        """Energy levels and measured quantities of one, two or three paths, without sampling.

            %levels NAME [COUPLING=VALUE ...] [OPTION=VALUE ...] [as VARIABLE]

        In the continuum, unless spacing=lattice asks for the transfer matrix at the action's own spacing.
        Each energy comes with an estimate of its numerical error.

        COUPLING=VALUE     a coupling of the action: 0.2, 1e-3, 1/4, pi/2; {x} takes the Python variable x
        count=6            number of levels
        spacing=lattice    on the lattice: what a Monte Carlo run at this spacing must reproduce
        beta=2             thermal averages at this inverse temperature, in the place of the vacuum
        temperature=300K   the same by the temperature, where the action names its units
        a= beta= sites=    with spacing=lattice: the lattice
        as VARIABLE        also put the result into a Python variable

        Example
        -------
            %levels quartic lam=0.2 count=8 as spectrum
            spectrum.energies[1] - spectrum.energies[0]
        """
        words = read("%levels", line)
        action = session.action(words)
        settings = keywords(words, action, OPTIONS)
        from quarterturn.runs.spectrum import levels

        with placed(words):
            result = levels(action, **settings)
        session.keep(result, words, self.shell)
        return result
