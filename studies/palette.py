"""Colours, hatches and line styles of the figures, on white paper and on a dark screen.

No colour carries a meaning alone: beside each stands a line style, a marker or a hatch. tests/studies/test_figures_colours.py
holds the contrast of every line and the difference of every two colours, for usual and for colour-blind eyes.
"""

from dataclasses import dataclass

LIGHT = {"ink": "#1b1c1e", "paper": "#ffffff", "hatch": "#1b1c1e"}
DARK = {"ink": "#e8e6e1", "paper": "#17191c", "hatch": "#17191c"}
HUES = {  # name: (on white, on dark); the first four can be lines
    "blue": ("#1f5fbf", "#87c8fd"),
    "rust": ("#c8441a", "#d58600"),
    "green": ("#349e79", "#699c92"),
    "plum": ("#8a1c6b", "#a577f6"),
    "amber": ("#eea82c", "#ffcc90"),
    "sky": ("#a9d6f5", "#1d4f8f"),
    "grey": ("#8e8ba8", "#6b6b7c"),
    "rose": ("#f7ddd4", "#7d2c44"),
    "brown": ("#5a3b10", "#897457"),
}
LIGHT |= {name: pair[0] for name, pair in HUES.items()}
DARK |= {name: pair[1] for name, pair in HUES.items()}
INK, PAPER = LIGHT["ink"], LIGHT["paper"]
LINES = tuple(LIGHT[name] for name in ("rust", "green", "plum", "blue"))
LINE_STYLES = ((0, (6, 2)), (0, (1, 1.6)), (0, (7, 2, 1, 2)), (0, (3, 1, 1, 1, 1, 1)))
MARKERS = ("^", "v", "D", "s")
SPREAD, NUMBER, REFERENCE = LIGHT["blue"], INK, LIGHT["rust"]
BAND_HATCH = "//"


@dataclass(frozen=True, kw_only=True)
class Fill:
    """How an area is filled: a colour and a hatch that together belong to one meaning."""

    color: str
    hatch: str


def _fills() -> dict[str, Fill]:
    """The same fill for a cause in every figure; the last ones repeat a colour, never a colour and a hatch."""
    colors = ["blue", "amber", "sky", "plum", "green", "rose", "rust", "brown"]
    hatches = ["", "//", "--", "\\\\", "xx", "||", "++", "////"]
    causes = (
        ("dopants", "remainder", "doping", "oxide_thickness", "length", "width", "oxide_roughness", "gate_edges")
        + ("active_edges", "grains", "flat_band", "mobility", "current_factor", "distance", "gradient")
    )  # fmt: skip
    return {
        cause: Fill(color=LIGHT[colors[number % 8]], hatch=hatches[(number + 3 * (number // 8)) % 8])
        for number, cause in enumerate(causes)
    }


FILLS = _fills()
OTHERS = Fill(color=LIGHT["grey"], hatch="o")


def fill_of(part: str) -> Fill:
    """Fill of a cause; grey for what is gathered or has none of its own."""
    return FILLS.get(part, OTHERS)
