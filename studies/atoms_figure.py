"""The figure of devices with single dopants: one device's surface, all thresholds, and sigma against width."""

import matplotlib.pyplot as plt
import numpy as np
from scipy import stats

from studies.answer import Answer
from studies.figure_axes import width_axis, with_interval
from studies.palette import INK, REFERENCE, SPREAD

SHALLOW = 3.0  # nm; dopants down to here are marked
LONGEST = 3.0  # ratio of a map's sides up to which it keeps its shape


def surface_map(axes, drawn):
    """Potential of one device's surface, its shallow dopants marked, the channel's edges where silicon lies beyond."""
    across, along = np.asarray(drawn["across_nm"]), np.asarray(drawn["along_nm"])
    silicon = np.isfinite(drawn["surface_potential_v"]).any(axis=1)
    across = across[silicon]
    drawing = axes.pcolormesh(
        along,
        across,
        np.asarray(drawn["surface_potential_v"])[silicon],
        shading="nearest",
        cmap="cividis",
        rasterized=True,
    )
    depth = np.asarray(drawn["dopant_depth_nm"])
    near = depth <= SHALLOW
    axes.plot(
        np.asarray(drawn["dopant_along_nm"])[near], np.asarray(drawn["dopant_across_nm"])[near], "+", color="white",
        ms=4, mew=0.7, rasterized=True,
    )  # fmt: skip
    half, step = drawn["half_width_nm"], across[1] - across[0]
    if across[-1] > half + step:
        for place in (-half, half):
            axes.axhline(place, color=REFERENCE, ls="--", lw=1)
    axes.set_xlabel("along the channel (nm)")
    axes.set_ylabel("across it (nm)")
    if 1 / LONGEST < np.ptp(across) / np.ptp(along) < LONGEST:
        axes.set_aspect("equal")
    axes.set_title(f"surface potential (V); +: dopants down to {SHALLOW:g} nm", fontsize="medium")
    axes.figure.colorbar(drawing, cax=axes.inset_axes((1.03, 0.05, 0.05, 0.9)))
    return axes


def thresholds_by_score(axes, drawn):
    """Every device's shift at its normal score; the fast model's law, and where 95 % of its devices would lie."""
    shifts = np.sort(drawn["shift_mv"])
    rank = np.arange(1, shifts.size + 1)
    axes.plot(
        stats.norm.ppf((rank - 0.5) / shifts.size), shifts, "o", color=SPREAD, ms=3.5, mfc="none", mew=0.8,
        label=f"{shifts.size} devices, dopants one by one",
    )  # fmt: skip
    normal, law = np.asarray(drawn["normal"]), np.asarray(drawn["fast_shift_mv"])
    order = 1 if law[-1] > law[0] else -1
    law = law[::order]
    furthest = stats.norm.ppf(1 - 0.5 / shifts.size) + 0.3
    inside = np.abs(normal) <= furthest
    axes.plot(normal[inside], law[inside], color=REFERENCE, ls="--", lw=1.4, label="fast model")
    scores = stats.norm.ppf((rank - 0.5) / shifts.size)
    for number, tail in enumerate((0.025, 0.975)):
        place = stats.norm.ppf(stats.beta.ppf(tail, rank, shifts.size + 1 - rank))
        axes.plot(
            scores, np.interp(place, normal, law), color=INK, lw=0.8, label=None if number else "95 % of its samples"
        )
    axes.axhline(0, color="0.6", lw=0.8)
    axes.set_xlabel("normal score")
    axes.set_ylabel("shift against continuous doping (mV)")
    axes.legend(frameon=False, fontsize="small")
    return axes


def sigma_by_width(axes, table):
    """Sigma against width, one by one with its interval, and by the fast model."""
    with_interval(axes, table, "vth_sigma", "_mv", label="one by one, 95 % interval")
    axes.plot(table.width_um, table.fast_sigma_mv, color=REFERENCE, ls="--", label="fast model")
    width_axis(axes, table.width_um)
    axes.set_ylabel("sigma of the threshold (mV)")
    axes.set_ylim(0, None)
    axes.legend(frameon=False)
    return axes


def draw_atoms(answer: Answer):
    """Figure and title of an atoms answer."""
    question, several = answer.question, len(answer.table) > 1
    figure, axes = plt.subplots(1, 2 + several, figsize=(10.5 + 5 * several, 4.6))
    surface_map(axes[0], answer.drawn)
    thresholds_by_score(axes[1], answer.drawn)
    if several:
        sigma_by_width(axes[2], answer.table)
    return figure, (
        f"{answer.process}, device {question['device']}: dopants one by one, W = {question['width_um'][0]:g} µm, "
        f"L = {question['length_um']:g} µm"
    )
