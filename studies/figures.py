"""Figures. A function takes an Axes, draws, and returns it.

Spread of transistors is a filled band or a bar; uncertainty of a number is a thin line with caps. The legends say which.
"""

from io import BytesIO
from typing import Any

import matplotlib

matplotlib.use("Agg")

import matplotlib.pyplot as plt
import numpy as np
import seaborn as sns
from matplotlib.ticker import FuncFormatter, NullFormatter

from studies.answer import Answer
from studies.errors import inert
from studies.job import Job
from studies.variation import CAUSES

PALETTE = sns.color_palette("colorblind", 10)
SPREAD, NUMBER, REFERENCE = PALETTE[0], "black", PALETTE[1]
SHOWN = ("dopants", "remainder", "doping", "oxide_thickness", "length", "width", "oxide_roughness", "gate_edges")
SHOWN += (
    "active_edges",
    "grains",
    *(cause for cause in CAUSES if cause in ("flat_band", "mobility", "current_factor")),
)
HATCHES = ["", "//", "..", "\\\\", "xx", "--", "++", "oo", "**", "||"]


def width_axis(axes, widths):
    """Logarithmic width axis with the asked widths as ticks, thinned where they would touch."""
    axes.set_xscale("log")
    widths = [float(f"{width:.3g}") for width in widths]
    apart = (widths[-1] / widths[0]) ** 0.12  # labels need about an eighth of the axis
    ticks = widths[:1]
    for width in widths:
        if width > apart * ticks[-1]:
            ticks.append(width)
    axes.set_xticks(ticks)
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.minorticks_off()
    axes.set_xlabel("drawn width (um)")
    return axes


def plain_log_axis(axes):
    """Logarithmic vertical axis with plain numbers at 1, 2, 3 and 5; linear when all that is drawn is zero."""
    if all(np.max(line.get_ydata(), initial=0) <= 0 for line in axes.get_lines()):
        return axes
    axes.set_yscale("log")
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(FuncFormatter(lambda value, _: f"{value:g}" if f"{value:e}"[0] in "235" else ""))
    return axes


def with_interval(axes, table, name: str, unit: str, *, label: str, color=NUMBER, scale=1.0, marker="o"):
    """A curve of a number against width with its 95 % interval as caps."""
    value, low, high = (table[f"{name}{part}{unit}"] * scale for part in ("", "_low", "_high"))
    finite = np.isfinite(low) & np.isfinite(high)
    bars = [np.where(finite, value - low, 0), np.where(finite, high - value, 0)]
    axes.errorbar(table.width_um, value, yerr=bars, color=color, marker=marker, ms=4, lw=1.2, capsize=4, label=label)
    return axes


def threshold_against_width(axes, table):
    """Mean threshold, the band that holds 99.8 % of transistors, and the nominal curves."""
    axes.fill_between(
        table.width_um,
        1e3 * table.vth_p0_1_v,
        1e3 * table.vth_p99_9_v,
        color=SPREAD,
        alpha=0.25,
        lw=0,
        label="spread: 99.8 % of transistors",
    )
    with_interval(axes, table, "vth_mean", "_v", label="mean, 95 % interval", scale=1e3)
    axes.plot(
        table.width_um,
        1e3 * table.vth_nominal_without_edges_v,
        color=REFERENCE,
        ls="--",
        label="nominal without edges",
    )
    width_axis(axes, table.width_um)
    axes.set_ylabel("threshold voltage (mV)")
    axes.legend(frameon=False)
    return axes


def sigma_against_width(axes, table):
    """Sigma of all transistors and of neighbours, and the straight 1/sqrt(W L) line."""
    with_interval(axes, table, "vth_sigma", "_mv", label="all transistors, 95 % interval")
    if "vth_device_sigma_mv" in table:
        with_interval(
            axes, table, "vth_device_sigma", "_mv", label="neighbours, 95 % interval", color=SPREAD, marker="s"
        )
        axes.plot(
            table.width_um,
            table.vth_device_sigma_area_law_mv,
            color=REFERENCE,
            ls="--",
            zorder=5,
            label="1/sqrt(electrical W L) from the widest",
        )
    width_axis(axes, table.width_um)
    plain_log_axis(axes)
    axes.set_ylabel("sigma of the threshold (mV)")
    axes.set_ylim(bottom=0.45 * axes.get_ylim()[0])  # room for the legend below falling curves
    axes.legend(frameon=False, loc="lower left", fontsize="small")
    return axes


def shares_against_width(axes, shares, causes):
    """Stacked shares of the variance; causes below 2 % everywhere are gathered."""
    wide = shares[shares.part.isin(causes)].pivot(index="width_um", columns="part", values="share")
    small = [part for part in wide if wide[part].max() < 0.02]
    order = [cause for cause in SHOWN if cause in wide and cause not in small]
    stack = wide[list(order)].copy()
    if small:
        stack["others"] = wide[small].sum(axis=1)
    places, bottom = np.arange(len(stack)), np.zeros(len(stack))
    for part in stack:
        axes.bar(
            places,
            100 * stack[part],
            bottom=bottom,
            width=0.8,
            color=_cause_color(part),
            hatch=HATCHES[SHOWN.index(part) % 10] if part in SHOWN else "",
            edgecolor="white",
            lw=0.4,
            label=part.replace("_", " "),
        )
        bottom += 100 * stack[part].to_numpy()
    axes.set_xticks(places, [f"{width:g}" for width in stack.index], rotation=90 if len(places) > 7 else 0)
    axes.set_xlabel("drawn width (um)")
    axes.set_ylabel("share of the variance (%)")
    axes.axhline(100, color="black", lw=0.8)
    handles, labels = axes.get_legend_handles_labels()
    axes.legend(handles[::-1], labels[::-1], frameon=False, bbox_to_anchor=(1.0, 1.0), loc="upper left")
    return axes


def _cause_color(part: str):
    """The same colour for a cause in every figure; grey for what is gathered."""
    return PALETTE[SHOWN.index(part) % 10] if part in SHOWN else "0.7"


def yield_against_width(axes, table, target: float):
    """Timing yield at the period with its interval, and the target."""
    with_interval(axes, table, "yield", "", label="timing yield, 95 % interval", scale=100)
    target = 100 * target
    axes.axhline(target, color=REFERENCE, ls="--", label=f"target {target:g} %")
    width_axis(axes, table.width_um)
    axes.set_ylabel(f"chips within {table.period_ps.iloc[0]:g} ps (%)")
    axes.legend(frameon=False)
    return axes


def period_against_width(axes, table, target: float):
    """Slowest path of the chips, and the period that meets the target."""
    mean, sigma = table.slowest_mean_ps, table.slowest_sigma_ps
    axes.fill_between(
        table.width_um,
        mean - sigma,
        mean + sigma,
        color=SPREAD,
        alpha=0.25,
        lw=0,
        label="spread: slowest path, one sigma",
    )
    target = 100 * target
    with_interval(axes, table, "period_at_target", "_ps", label=f"period for {target:g} %, 95 % interval")
    axes.axhline(table.period_ps.iloc[0], color=REFERENCE, ls="--", label="period asked for")
    width_axis(axes, table.width_um)
    axes.set_ylabel("period (ps)")
    axes.legend(frameon=False)
    return axes


def _draw_spread(answer: Answer):
    figure, axes = plt.subplots(1, 3, figsize=(15, 4.6), width_ratios=(1, 1, 0.9))
    threshold_against_width(axes[0], answer.table)
    sigma_against_width(axes[1], answer.table)
    shares = answer.tables["spread_shares"]
    causes = [part for part in shares.part.unique() if not part.startswith("level_")]
    shares_against_width(axes[2], shares, causes)
    question = answer.question
    return figure, f"{answer.process}, device {question['device']}, L = {question['length_um']:g} um"


def _draw_timing(answer: Answer):
    figure, axes = plt.subplots(1, 2, figsize=(11, 4.6))
    question = answer.question
    yield_against_width(axes[0], answer.table, question["yield"])
    period_against_width(axes[1], answer.table, question["yield"])
    return figure, f"{answer.process}: {question['paths']} paths of {question['stages']} stages"


def error_against_width(axes, curve, error: str, unit: str):
    """Sigma of the pairs' error, and the straight 1/sqrt(W L) line laid from the widest device."""
    with_interval(axes, curve, f"{error}_sigma", f"_{unit}", label="drawn pairs, 95 % interval")
    widest = curve.iloc[-1]
    line = widest[f"{error}_sigma_{unit}"] * np.sqrt(widest.electrical_width_um / curve.electrical_width_um)
    axes.plot(curve.width_um, line, color=REFERENCE, ls="--", zorder=5, label="1/sqrt(electrical W L) from the widest")
    width_axis(axes, curve.width_um)
    plain_log_axis(axes)
    axes.set_ylabel(f"{error} sigma ({'mV' if unit == 'mv' else '%'})")
    axes.legend(frameon=False)
    return axes


def chip_yield_against_width(axes, curve, target: float):
    """Share of chips whose pairs are all inside, with the target and the answer marked."""
    with_interval(axes, curve, "chip_yield", "", label="chips inside, 95 % interval", scale=100)
    axes.axhline(100 * target, color=REFERENCE, ls="--", label=f"target {100 * target:g} %")
    for row in curve[curve.is_minimum].itertuples():
        axes.axvline(row.width_um, color=SPREAD, lw=1)
        axes.annotate(
            f"W = {row.width_um:g} um", (row.width_um, 4), xytext=(5, 0), textcoords="offset points", color=SPREAD
        )
    width_axis(axes, curve.width_um)
    axes.set_ylim(-2, 104)
    axes.set_ylabel("chips with all pairs inside (%)")
    axes.legend(frameon=False)
    return axes


def _draw_pair(answer: Answer):
    question = answer.question
    error, unit = ("offset", "mv") if question["kind"] == "differential pair" else ("error", "percent")
    shown = answer.tables["pair_shares"].length_um.iloc[0]
    curve = answer.table[answer.table.length_um == shown]
    figure, axes = plt.subplots(1, 2, figsize=(11, 4.6))
    error_against_width(axes[0], curve, error, unit)
    chip_yield_against_width(axes[1], curve, question["yield"])
    return figure, f"{answer.process}: {question['kind']}, L = {shown:g} um, {question['pairs']} pairs a chip"


def failures_against_width(axes, table):
    """Failure share on a scale of normal scores: the estimator's interval, and counted points where counting can."""
    with_interval(axes, table, "device_failure", "", label="estimator, 95 % interval")
    reasons = [
        name.removeprefix("failure_") for name in table if name.startswith("failure_") and "_low" not in name[-4:]
    ]
    for number, reason in enumerate(name for name in reasons if not name.endswith("high") or name == "vth_high"):
        line = ("--", ":", "-.", (0, (1, 3)))[number % 4]
        axes.plot(table.width_um, table[f"failure_{reason}"], ls=line, color=PALETTE[number + 1], label=reason)
    seen = table[table.counted_failure > 2e-5]
    if len(seen):
        axes.plot(seen.width_um, seen.counted_failure, "o", ms=9, mfc="none", color=SPREAD, label="counted")
    width_axis(axes, table.width_um)
    axes.set_yscale("log")
    axes.set_ylabel("share of devices outside their limits")
    axes.legend(frameon=False)
    return axes


def good_chips_against_width(axes, table):
    """Chip yield, and good chips per wafer area on a second axis."""
    with_interval(axes, table, "chip_yield", "", label="chips working, 95 % interval", scale=100)
    axes.set_ylabel("chips working (%)")
    width_axis(axes, table.width_um)
    other = axes.twinx()
    with_interval(
        other, table, "good_chips", "_per_cm2", label="good chips, 95 % interval", color=REFERENCE, marker="s"
    )
    other.set_ylabel("good chips per cm2 (squares)")
    axes.legend(frameon=False, loc="center right")
    other.legend(frameon=False, loc="lower right")
    return axes


def _draw_loss(answer: Answer):
    figure, axes = plt.subplots(1, 2, figsize=(12, 4.6))
    failures_against_width(axes[0], answer.table)
    good_chips_against_width(axes[1], answer.table)
    question = answer.question
    return figure, f"{answer.process}, device {question['device']}: {question['devices']} devices a chip"


DRAWERS: dict[str, Any] = {"loss": _draw_loss, "spread": _draw_spread, "timing": _draw_timing, "pair": _draw_pair}


def draw_all(job: Job, answers: list[Answer]) -> dict[str, bytes]:
    """Every answer's figure as PNG and SVG, by file name."""
    sns.set_theme(style="ticks", context="notebook")
    files = {}
    # a fixed salt and no date, so that the same answers give the same bytes
    with matplotlib.rc_context({"svg.hashsalt": "widthwise", "svg.fonttype": "none"}):
        for asked, answer in zip(job.asked, answers):
            figure, title = DRAWERS[answer.kind](answer)
            figure.suptitle(inert(title).replace("$", r"\$"))
            sns.despine(figure)
            figure.tight_layout()
            for kind in ("png", "svg"):
                buffer = BytesIO()
                metadata = {"Date": None} if kind == "svg" else None
                figure.savefig(buffer, format=kind, dpi=110, metadata=metadata, bbox_inches="tight")
                files[f"{asked.name}.{kind}"] = buffer.getvalue()
            plt.close(figure)
    return files
