"""The figures' colours by numbers: contrast of lines and texts, difference of every two colours, for all eyes.

Contrast: WCAG 2.2, relative luminance. Colour blindness: G. M. Machado, M. M. Oliveira, L. A. F. Fernandes, IEEE Trans.
Visualization and Computer Graphics 15, 1291 (2009), matrices of severity 1.0 (memory; each row sums to 1), on linear sRGB.
Difference: CIEDE2000, held to G. Sharma, W. Wu, E. N. Dalal, Color Research and Application 30, 21 (2005).
"""

from itertools import combinations

import numpy as np
import pytest

from studies.palette import DARK, FILLS, HUES, LIGHT, LINE_STYLES, LINES, MARKERS, OTHERS

EYES = {
    "usual": np.eye(3),
    "protanopia": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "deuteranopia": [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]],
    "tritanopia": [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]],
}
XYZ = np.array(
    [[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.0721750], [0.0193339, 0.1191920, 0.9503041]]
)
WHITE = XYZ.sum(axis=1)
LEAST_CONTRAST = 3.0  # WCAG 1.4.11, graphical objects
LEAST_DIFFERENCE = 12.0  # CIEDE2000; some 2 is just seen side by side
LEAST_OF_LINES = 14.0  # thin lines need more than areas


def linear(color):
    """Linear light of a hexadecimal sRGB colour."""
    value = np.array([int(color[place : place + 2], 16) for place in (1, 3, 5)]) / 255
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def contrast(one, other):
    """WCAG contrast of two colours."""
    light = [float(linear(color) @ [0.2126, 0.7152, 0.0722]) + 0.05 for color in (one, other)]
    return max(light) / min(light)


def lab(light):
    """CIE L*a*b* of linear sRGB, white D65."""
    ratio = XYZ @ np.clip(light, 0, 1) / WHITE
    root = np.where(ratio > 216 / 24389, np.cbrt(ratio), (24389 / 27 * ratio + 16) / 116)
    return 116 * root[1] - 16, 500 * (root[0] - root[1]), 200 * (root[1] - root[2])


def difference(one, other):
    """CIEDE2000 difference of two L*a*b* colours."""
    (l1, a1, b1), (l2, a2, b2) = one, other
    mean = (np.hypot(a1, b1) + np.hypot(a2, b2)) / 2
    grey = 1.5 - 0.5 * np.sqrt(mean**7 / (mean**7 + 25.0**7))
    c1, c2 = np.hypot(grey * a1, b1), np.hypot(grey * a2, b2)
    h1, h2 = (np.degrees(np.arctan2(b, grey * a)) % 360 for a, b in ((a1, b1), (a2, b2)))
    turn = (h2 - h1 + 180) % 360 - 180 if c1 * c2 else 0.0
    hue_step = 2 * np.sqrt(c1 * c2) * np.sin(np.radians(turn / 2))
    lightness, chroma = (l1 + l2) / 2, (c1 + c2) / 2
    hue = (h1 + turn / 2) % 360 if c1 * c2 else h1 + h2
    weight = 1 + sum(
        size * np.cos(np.radians(times * hue + shift))
        for size, times, shift in ((-0.17, 1, -30), (0.24, 2, 0), (0.32, 3, 6), (-0.20, 4, -63))
    )
    of_lightness = 1 + 0.015 * (lightness - 50) ** 2 / np.sqrt(20 + (lightness - 50) ** 2)
    of_chroma, of_hue = 1 + 0.045 * chroma, 1 + 0.015 * chroma * weight
    turned = np.sin(np.radians(60 * np.exp(-(((hue - 275) / 25) ** 2))))
    rotation = -2 * np.sqrt(chroma**7 / (chroma**7 + 25.0**7)) * turned
    steps = (l2 - l1) / of_lightness, (c2 - c1) / of_chroma, hue_step / of_hue
    return float(np.sqrt(sum(step * step for step in steps) + rotation * steps[1] * steps[2]))


@pytest.mark.parametrize(
    "one, other, printed",
    [  # Sharma 2005, table 1, pairs 1, 4, 7, 17, 25, 34
        ((50, 2.6772, -79.7751), (50, 0, -82.7485), 2.0425),
        ((50, -1.3802, -84.2814), (50, 0, -82.7485), 1.0000),
        ((50, 0, 0), (50, -1, 2), 2.3669),
        ((50, 2.5, 0), (73, 25, -18), 27.1492),
        ((60.2574, -34.0099, 36.2677), (60.4626, -34.1751, 39.4387), 1.2644),
        ((2.0776, 0.0795, -1.1350), (0.9033, -0.0636, -0.5514), 0.9082),
    ],
)
def test_the_difference_is_the_printed_one(one, other, printed):
    assert difference(one, other) == pytest.approx(printed, abs=1e-4)


def test_contrast_of_black_and_white():
    assert contrast("#000000", "#ffffff") == pytest.approx(21, abs=1e-9)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.005)


@pytest.mark.parametrize("rows", EYES.values(), ids=EYES)
def test_matrices_keep_greys(rows):
    assert np.sum(rows, axis=1) == pytest.approx([1, 1, 1], abs=2e-6)


def names_of(colors):
    return [name for name, color in LIGHT.items() if color in colors and name in HUES]


@pytest.mark.parametrize("page", (LIGHT, DARK), ids=("light", "dark"))
def test_lines_and_letters_stand_out(page):
    for name in names_of(LINES):
        assert contrast(page[name], page["paper"]) >= LEAST_CONTRAST, name
    assert contrast(page["ink"], page["paper"]) >= 7


@pytest.mark.parametrize("eyes", EYES)
@pytest.mark.parametrize("page", (LIGHT, DARK), ids=("light", "dark"))
def test_every_two_colours_differ(page, eyes):
    seen = {name: lab(np.array(EYES[eyes]) @ linear(page[name])) for name in ("ink", *HUES)}
    for one, other in combinations(seen, 2):
        lines = {one, other} <= {"ink", *names_of(LINES)}
        assert difference(seen[one], seen[other]) >= (LEAST_OF_LINES if lines else LEAST_DIFFERENCE), (one, other)


@pytest.mark.parametrize("page", (LIGHT, DARK), ids=("light", "dark"))
def test_hatches_show_on_their_areas(page):
    used = {fill.color for fill in FILLS.values() if fill.hatch}
    for name in names_of(used):
        assert contrast(page["hatch"], page[name]) >= 1.6, name


def test_no_two_causes_look_alike():
    looks = [(fill.color, fill.hatch) for fill in [*FILLS.values(), OTHERS]]
    assert len(set(looks)) == len(looks)
    assert len({fill.hatch for fill in list(FILLS.values())[:8]}) == 8  # told apart without any colour
    assert len(set(LINES)) == len(set(LINE_STYLES)) == len(set(MARKERS)) == 4
