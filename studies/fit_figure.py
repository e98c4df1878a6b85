"""The fit's figure: measured and fitted Vth(W) with prediction bands, residuals, and local scatter against 1/sqrt(W L)."""

import matplotlib

matplotlib.use("Agg")

import matplotlib.pyplot as plt
import numpy as np
import seaborn as sns

from mc.intervals import sigma_chi_square
from studies.errors import inert
from studies.figure_axes import spread_band, width_axis
from studies.figures import DRAWING, as_file
from studies.fit import Fit
from studies.fit_scatter import pair_differences
from studies.palette import LINE_STYLES, LINES, MARKERS, NUMBER, REFERENCE

MOST_POINTS, MOST_LENGTHS = 2500, 4


def threshold_against_width(axes, fitted: Fit, predicted):
    """Measured cells, fitted curves with the band of single devices, and the interval of the mean."""
    sign, cells, of_row = fitted.measured.sign, fitted.start.cells, fitted.start.cells.of_row
    lengths = predicted.length_um.unique()[:MOST_LENGTHS]
    for place, length in enumerate(lengths):
        curve = predicted[predicted.length_um == length]
        color, marker = LINES[place % 4], MARKERS[place % 4]
        if place == 0:
            spread_band(
                axes, curve.width_um, curve.vth_device_low_mv, curve.vth_device_high_mv,
                label=f"single devices, L = {length:g} µm, 95 %",
            )  # fmt: skip
        axes.plot(
            curve.width_um, curve.vth_mv, color=color, ls=LINE_STYLES[place % 4], label=f"fitted, L = {length:g} µm"
        )
        for end in ("low", "high"):
            axes.plot(curve.width_um, curve[f"vth_mean_{end}_mv"], color=NUMBER, lw=0.7)
        mine = (cells.length_um == length) & (np.bincount(of_row, minlength=len(cells)) > 0)
        mine &= (cells.body_bias_v == cells.body_bias_v[0]) & (cells.temperature_c == cells.temperature_c[0])
        axes.plot(
            cells.width_um[mine], 1e3 * sign * fitted.means.mean[mine], marker, color=color, ms=5, ls="",
            label=f"measured, L = {length:g} µm",
        )  # fmt: skip
    axes.plot([], [], color=NUMBER, lw=0.7, label="95 % interval of the mean")
    width_axis(axes, list(np.unique(cells.width_um)) if len(np.unique(cells.width_um)) > 1 else [cells.width_um[0]])
    axes.set_ylabel("threshold voltage (mV)")
    axes.legend(frameon=False, fontsize="x-small")
    return axes


def residuals_against_width(axes, fitted: Fit):
    """Residuals of rows, every one or an even part of many; those without weight are crossed."""
    out = fitted.weight == 0
    kept = np.flatnonzero(~out)
    kept = kept[:: max(1, len(kept) // MOST_POINTS)]
    gone = np.flatnonzero(out)
    gone = gone[:: max(1, len(gone) // MOST_POINTS)]
    axes.axhline(0, color="0.6", lw=0.8)
    axes.plot(
        fitted.measured.width_um[kept],
        1e3 * fitted.residual[kept],
        ".",
        color=LINES[3],
        ms=3,
        alpha=0.6,
        label="rows",
        rasterized=True,
    )
    if len(gone):
        axes.plot(
            fitted.measured.width_um[gone],
            1e3 * fitted.residual[gone],
            "x",
            color=REFERENCE,
            ms=5,
            label="without weight: gross outliers",
            rasterized=True,
        )
    width_axis(axes, list(np.unique(fitted.measured.width_um)))
    axes.set_ylabel("residual, magnitude measured less fitted (mV)")
    axes.legend(frameon=False, fontsize="x-small")
    return axes


def pairs_against_size(axes, fitted: Fit):
    """Sigma of pair differences of every size with its interval, the dopants' computed part, and what was fitted."""
    of_row = fitted.start.cells.of_row
    computed, area = fitted.start.sigmas(fitted.problem.law, fitted.problem.values(fitted.inner))
    inverse = 1e-6 / np.sqrt(area)
    order = np.argsort(inverse)
    local = fitted.scatter.local
    axes.plot(
        inverse[order],
        1e3 * np.sqrt(2) * computed[order],
        color=LINES[1],
        ls=LINE_STYLES[1],
        label="computed part: dopants, edges, oxide",
    )
    axes.plot(inverse[order], 1e3 * np.sqrt(2 * local[order]), color=LINES[0], label="with the fitted remainder")
    first, difference = pair_differences(fitted.measured, fitted.residual, fitted.weight > 0)
    label = "pairs measured, 95 % interval"
    for cell in np.unique(of_row[first]):
        mine = (of_row[first] == cell) & (fitted.measured.count[first] == 1)
        if mine.sum() > 2:
            said = sigma_chi_square(float(np.mean(difference[mine] ** 2)), int(mine.sum()) + 1).scaled(1e3)
            axes.errorbar(
                inverse[cell],
                said.value,
                yerr=[[said.value - said.low], [said.high - said.value]],
                color=NUMBER,
                marker="o",
                ms=4,
                capsize=4,
                label=label,
            )
            label = None
    axes.set_xlim(left=0)
    axes.set_ylim(bottom=0)
    axes.set_xlabel("1/√(W L) (1/µm)")
    axes.set_ylabel("sigma of a pair's difference (mV)")
    axes.set_title("" if len(first) else "no matched pairs measured", fontsize="small")
    axes.legend(frameon=False, fontsize="x-small")
    return axes


def draw_fit(fitted: Fit, predicted) -> dict[str, bytes]:
    """The figure as PNG and SVG by file name."""
    with sns.axes_style("ticks"), sns.plotting_context("notebook"), matplotlib.rc_context(DRAWING):
        figure, axes = plt.subplots(1, 3, figsize=(16, 5))
        try:
            threshold_against_width(axes[0], fitted, predicted)
            residuals_against_width(axes[1], fitted)
            pairs_against_size(axes[2], fitted)
            title = f"{inert(fitted.measured.source.name)}, device {inert(fitted.device)}, edge: {fitted.choice.name}"
            title += "" if fitted.fits else " (no form of the edge fits)"
            figure.suptitle(title.replace("$", r"\$"), fontsize="medium")
            sns.despine(figure)
            figure.tight_layout()
            return {f"fit.{kind}": as_file(figure, kind) for kind in ("png", "svg")}
        finally:
            plt.close(figure)
