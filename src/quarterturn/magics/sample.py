"""`%sample`: Monte Carlo of a declared action."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.numbers import duration, target, whole
from quarterturn.magics.progress import watching
from quarterturn.magics.registry import session
from quarterturn.magics.request import Reader, keywords, placed
from quarterturn.magics.words import read

if TYPE_CHECKING:
    from quarterturn.runs.run import Run

OPTIONS: dict[str, Reader] = {
    "error": target,
    "time": duration,
    "draws": whole,
    "chains": whole,
    "seed": whole,
}


@magics_class
class SampleMagic(Magics):
    """The line magic `%sample`."""

    @line_magic
    def sample(self, line: str) -> Run:
        """Sample a declared action by Monte Carlo: values with error bars, the exact column, warnings.

            %sample NAME [COUPLING=VALUE ...] [OPTION=VALUE ...] [as VARIABLE]

        The run ends at the first met of error, time and draws; without any of them, at 1 % or after a
        minute. Ctrl-C or the stop button ends it at the next safe point and keeps what there is, marked
        as cut short; a second one gives up. The result is kept: see %record.

        COUPLING=VALUE     a coupling of the action: 0.2, 1e-3, 1/4, pi/2; {x} takes the Python variable x
        a= beta= sites=    the lattice: spacing, inverse temperature, sites; any two, or one and the
                           declared rest
        temperature=300K   in the place of beta, where the action names its units; a shrinks to fit
        error=1%           target error of every number, relative; error=0.01 is absolute
        error[LABEL]=2%    target for one number, such as error[gap(q)]=2%
        time=60s           longest duration, warm-up included: 60s, 2min, 1h
        draws=1000         draws per chain; the same seed and draws give the same bits again
        chains=64          number of Markov chains
        seed=1             seed of their random numbers
        as VARIABLE        also put the result into a Python variable, and show it;
                           VARIABLE = %sample ... doesn't show it

        Example
        -------
            %sample quartic lam=0.2 error=0.5% as run
            run["<q^2>"].value, run["<q^2>"].error
        """
        words = read("%sample", line)
        action = session.action(words)
        settings = keywords(words, action, OPTIONS)
        from quarterturn.runs.sampling import sample

        with placed(words), watching(self.shell, action.name) as watcher:
            run = sample(action, progress=watcher, **settings)
        session.keep(run, words, self.shell)
        return run
