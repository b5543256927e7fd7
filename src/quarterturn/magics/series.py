"""`%series`: the perturbation series of a declared action."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.numbers import whole
from quarterturn.magics.registry import session
from quarterturn.magics.request import Reader, keywords, placed
from quarterturn.magics.words import Line, Setting, read

if TYPE_CHECKING:
    from quarterturn.runs.series import Series


def _name(line: Line, setting: Setting) -> str:
    return setting.value


OPTIONS: dict[str, Reader] = {"coupling": _name, "order": whole, "level": whole}


@magics_class
class SeriesMagic(Magics):
    """The line magic `%series`."""

    @line_magic
    def series(self, line: str) -> Series:
        """The perturbation series of an energy level in a coupling, exactly, and its sums.

            %series NAME [COUPLING=VALUE ...] [OPTION=VALUE ...] [as VARIABLE]

        For one path in a polynomial potential that is an oscillator where the coupling is zero. The
        coefficients are exact rational numbers; the sums (partial, Padé, Borel-Padé, conformally mapped
        Borel) carry error estimates and stand beside the level itself, which is solved for independently.

        COUPLING=VALUE     a coupling of the action: 0.2, 1e-3, 1/4; {x} takes the Python variable x. That of
                           the series is where the sums are taken
        coupling=lam       which coupling the series is in; may be left out where only one will do
        order=50           highest power of the coupling
        level=0            0 is the ground state
        as VARIABLE        also put the result into a Python variable

        Example
        -------
            %series quartic lam=0.5 order=100 as aho
            aho.coefficients[:4], aho["Borel-Padé"].value
        """
        words = read("%series", line)
        action = session.action(words)
        settings = keywords(words, action, OPTIONS)
        from quarterturn.runs.series import series

        with placed(words):
            result = series(action, **settings)
        session.keep(result, words, self.shell)
        return result
