"""Curves and bars of a comparison. A function takes an Axes, draws and returns it."""

import numpy as np

from studies.figure_axes import width_axis
from studies.palette import FILLS, NUMBER, REFERENCE

UNIT_WORDS = {"mv": "mV", "ps": "ps", "percent": "%", "cm2": "per cm²"}
BARS = (FILLS["dopants"], FILLS["remainder"])  # the narrowest width and the widest


def difference_against_width(axes, rows, names: tuple[str, str]):
    """Difference of one quantity with its interval, and zero, where the options are equal.

    rows : of compare.csv, one quantity; names : of the options
    """
    quantity, _, unit = rows.quantity.iloc[0].rpartition("_")
    if unit not in UNIT_WORDS:
        quantity, unit = rows.quantity.iloc[0], ""
    quantity = quantity.removesuffix("_per").replace("_", " ").replace("vth", "threshold")
    bars = [rows.difference - rows.difference_low, rows.difference_high - rows.difference]
    axes.errorbar(
        rows.width_um,
        rows.difference,
        yerr=np.array(bars),
        color=NUMBER,
        marker="o",
        ms=4,
        lw=1.2,
        capsize=4,
        label="difference, 95 % interval",
    )
    axes.axhline(0, color=REFERENCE, ls="--", lw=1.4, label="no difference")
    width_axis(axes, list(rows.width_um))
    words = f" ({UNIT_WORDS[unit]})" if unit else ""
    axes.set_ylabel(f"{quantity}: {names[1]} less {names[0]}{words}".replace("$", r"\$"), fontsize="small")
    axes.legend(frameon=False)
    return axes


def shares_of_change(axes, shares, part: str, words: str):
    """Bars of every ingredient's share of a change, at the narrowest and at the widest width; caps are intervals.

    shares : rows of compare_shares.csv; part : "vth_mean{}_mv" or "vth_variance{}_mv2"; words : of the axis
    """
    widths = sorted(shares.width_um.unique())[:: max(1, shares.width_um.nunique() - 1)]
    ingredients = list(dict.fromkeys(shares.ingredient))[::-1]
    height = 0.8 / len(widths)
    for number, (width, fill) in enumerate(zip(widths, BARS)):
        rows = shares[shares.width_um == width].set_index("ingredient").loc[ingredients]
        value, low, high = (rows[part.format(end)] for end in ("", "_low", "_high"))
        places = np.arange(len(ingredients)) + 0.4 - height * (number + 0.5)
        axes.barh(
            places,
            value,
            height=height,
            xerr=np.array([value - low, high - value]),
            color=fill.color,
            hatch=fill.hatch,
            edgecolor="white",
            lw=0.4,
            error_kw={"elinewidth": 1.2, "capsize": 3, "ecolor": NUMBER},
            label=f"W = {width:g} µm",
        )
    axes.axvline(0, color=NUMBER, lw=0.8)
    axes.set_yticks(np.arange(len(ingredients)), ingredients)
    axes.set_xlabel(words)
    axes.legend(frameon=False, fontsize="small")
    return axes
