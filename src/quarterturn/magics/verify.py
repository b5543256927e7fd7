"""`%verify`: check the records in a notebook."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.progress import telling
from quarterturn.magics.words import plain_words

if TYPE_CHECKING:
    from quarterturn.runs.verification import Verification


@magics_class
class VerifyMagic(Magics):
    """The line magic `%verify`."""

    @line_magic
    def verify(self, line: str) -> Verification:
        """Make every recorded number in a notebook again, and compare.

            %verify FILE

        Each result carries a record of what made it. It is checked against what the notebook shows, and
        run again from the record alone; the notebook's own code is never executed. The notebook must be
        saved. For each record the answer is

        identical          the same bits
        consistent         the same within errors
        different          which number, and by how many sigma
        altered            the record, or the numbers shown, are not what was written
        cannot be rerun    and why

        Example
        -------
            %verify paper.ipynb
        """
        path = line.strip()
        if len(path) > 1 and path[0] == path[-1] and path[0] in "'\"":
            path = path[1:-1]
        if not path:
            raise plain_words("%verify", "")[0].at_end("the name of a notebook is missing", "%verify notebook.ipynb")
        from quarterturn.runs.verification import verify

        with telling(self.shell) as tell:
            return verify(path, progress=tell)
