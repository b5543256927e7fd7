"""The colours hold on white, on a dark page, in grey and with colour-vision deficiency.

Matrices: G. M. Machado, M. M. Oliveira and L. A. F. Fernandes, IEEE Trans. Vis. Comput. Graph. 15 (2009) 1291, severity
1.0, linear RGB. Contrast and relative luminance: WCAG 2.1. Lightness and distances: CIE 1976 L*a*b*, white point D65.
"""

import itertools

import numpy as np
import pytest

from quarterturn.reports.palette import DATA, FIT, INK, PRINT_INK, SECOND

COLOURS = {"data": DATA, "fit": FIT, "second": SECOND, "ink": INK}
WHITE, DARK = "#ffffff", "#111111"
DEFICIENCIES = {
    "none": np.eye(3),
    "protanopia": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "deuteranopia": [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]],
    "tritanopia": [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]],
}
TO_XYZ = np.array(  # sRGB, IEC 61966-2-1
    [[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.0721750], [0.0193339, 0.1191920, 0.9503041]]
)


def linear(colour: str) -> np.ndarray:
    channels = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(channels <= 0.04045, channels / 12.92, ((channels + 0.055) / 1.055) ** 2.4)


def luminance(colour: str) -> float:
    return float(linear(colour) @ [0.2126, 0.7152, 0.0722])


def contrast(one: str, other: str) -> float:
    low, high = sorted([luminance(one), luminance(other)])
    return (high + 0.05) / (low + 0.05)


def lab(rgb: np.ndarray) -> np.ndarray:
    scaled = TO_XYZ @ rgb / (TO_XYZ @ np.ones(3))
    root = np.where(scaled > (6 / 29) ** 3, np.cbrt(scaled), scaled * (29 / 6) ** 2 / 3 + 4 / 29)
    return np.array([116 * root[1] - 16, 500 * (root[0] - root[1]), 200 * (root[1] - root[2])])


@pytest.mark.parametrize("name", COLOURS)
@pytest.mark.parametrize("page", [WHITE, DARK])
def test_contrast_on_light_and_dark_pages(name, page):
    assert contrast(COLOURS[name], page) >= 3  # WCAG 2.1, 1.4.11: graphics


def test_print_ink_is_for_text_on_paper():
    assert contrast(PRINT_INK, WHITE) >= 7  # WCAG 2.1, 1.4.6


@pytest.mark.parametrize("deficiency", DEFICIENCIES)
def test_pairs_stay_apart_with_colour_vision_deficiency(deficiency):
    matrix = np.array(DEFICIENCIES[deficiency])
    assert matrix.sum(axis=1) == pytest.approx(1, abs=2e-6)  # grey stays grey
    seen = {name: lab(np.clip(matrix @ linear(colour), 0, 1)) for name, colour in COLOURS.items()}
    for one, other in itertools.combinations(seen, 2):
        assert np.linalg.norm(seen[one] - seen[other]) > 15, (one, other)  # a just noticeable difference is 2.3


def test_series_differ_in_grey():
    greys = sorted(lab(np.full(3, luminance(COLOURS[name])))[0] for name in ("data", "second", "fit"))
    assert np.diff(greys).min() > 7
