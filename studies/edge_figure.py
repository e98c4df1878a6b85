"""The edge's figure: three maps of the narrowest width's section, and the shift against width by solution and closed form."""

import matplotlib.pyplot as plt
import numpy as np

from studies.answer import Answer
from studies.figure_axes import width_axis, with_interval
from studies.palette import REFERENCE, SPREAD

DEEPEST = 1.6  # depletion widths shown below the surface
BESIDE = 1.5  # depletion widths shown beyond the channel's edge
DECADES = 5  # of the inversion charge shown below its largest


def section_map(axes, drawn, values, label: str, **scale):
    """A quantity of half a section as a map, the silicon alone; the channel's edge is marked.

    drawn : arrays of the answer; values : of the mesh's nodes, shape (depth, lateral)
    """
    lateral, depth = np.asarray(drawn["lateral_nm"]), np.asarray(drawn["depth_nm"])
    half, deepest = drawn["half_width_nm"], DEEPEST * drawn["depletion_nm"]
    right = half + BESIDE * drawn["depletion_nm"]
    columns, rows = lateral <= right * 1.2, (depth <= deepest * 1.2) & (depth >= 0)
    shown = np.where(drawn["is_silicon"], values, np.nan)[np.ix_(rows, columns)]
    drawing = axes.pcolormesh(
        lateral[columns], depth[rows], shown, shading="nearest", cmap="cividis", rasterized=True, **scale
    )
    axes.axvline(half, color=REFERENCE, ls="--", lw=1)
    axes.set_xlim(0, right)
    axes.set_ylim(deepest, 0)
    axes.set_xlabel("from the channel's middle (nm)")
    axes.set_ylabel("depth (nm)")
    axes.set_title(label, fontsize="medium")
    # an inset belongs to its axes, so that the report keeps both in one panel
    axes.figure.colorbar(drawing, cax=axes.inset_axes((1.03, 0.05, 0.05, 0.9)))
    return axes


def shift_against_width(axes, table):
    """Shift of the threshold by the edges: solved with its numerical error, and by closed form."""
    with_interval(axes, table, "edge_shift", "_mv", label="solved, caps: numerical error")
    axes.plot(table.width_um, table.closed_form_shift_mv, color=REFERENCE, ls="--", label="closed form")
    if "table_shift_mv" in table:
        axes.plot(
            table.width_um, table.table_shift_mv, "s", mfc="none", ms=8, color=SPREAD, label="table of the studies"
        )
    axes.axhline(0, color="0.6", lw=0.8)
    width_axis(axes, table.width_um)
    axes.set_ylabel("shift of the threshold by the edges (mV)")
    axes.legend(frameon=False)
    return axes


def draw_edge(answer: Answer):
    """Figure and title of an edge answer."""
    figure, axes = plt.subplots(1, 4, figsize=(20, 4.6))
    drawn, question = answer.drawn, answer.question
    shift_against_width(axes[0], answer.table)
    section_map(axes[1], drawn, drawn["potential_v"], "potential (V)")
    with np.errstate(divide="ignore"):
        inversion = np.log10(drawn["inversion_per_cm3"])
    top = float(inversion.max())
    section_map(axes[2], drawn, inversion, "log10 of electrons per cm³", vmin=top - DECADES, vmax=top)
    section_map(axes[3], drawn, drawn["dopant_weight"], "weight of one dopant", vmin=0.0)
    return figure, (
        f"{answer.process}, device {question['device']}: edges solved; section at threshold, W = {question['width_um'][0]:g} µm"
    )
