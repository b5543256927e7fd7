"""The colours of the pictures: four that hold on white and on a dark page, in grey, and with colour-vision deficiency.

A transparent picture does not know what it lies on, so each colour keeps a contrast of 3:1 (WCAG 2.1, criterion
1.4.11) against white and against the dark page #111111 alike; that leaves lightness L* between 41 and 61, which the
four share out in steps. Pairs were separated under the deficiency matrices of Machado, Oliveira and Fernandes,
IEEE Trans. Vis. Comput. Graph. 15 (2009) 1291; `tests/reports/test_palette.py` repeats the check. Colour is never the
only mark: points, lines, bands and labels differ too.
"""

DATA = "#3363b9"  # what was measured: indigo, L* 43
FIT = "#c38623"  # what was fitted to it: ochre, L* 60
SECOND = "#966ba1"  # a second thing of the same kind: mauve, L* 51
INK = "#767676"  # axes, words, and what is known exactly; on a page of unknown colour
PRINT_INK = "#1a1a1a"  # the same, on white paper

SERIES = (DATA, FIT, SECOND)
