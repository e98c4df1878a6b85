"""What the questions' figures draw, each on one Axes, which it returns."""

import numpy as np

from studies.figure_axes import (
    plain_log_axis,
    reference_level,
    spread_band,
    width_axis,
    with_interval,
    yield_axis,
    yield_limits,
    yields_with_interval,
)
from studies.palette import INK, LINE_STYLES, LINES, MARKERS, OTHERS, REFERENCE, SPREAD, fill_of

LEAST_SHARE = 0.02  # causes below it at every width are gathered
MOST_CAUSES = 8


def threshold_against_width(axes, table):
    """Mean threshold, the band that holds 99.8 % of transistors, and the nominal curves."""
    spread_band(
        axes,
        table.width_um,
        1e3 * table.vth_p0_1_v,
        1e3 * table.vth_p99_9_v,
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
            axes, table, "vth_device_sigma", "_mv", label="neighbours, 95 % interval", color=SPREAD, marker="s", ls=":"
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
    """Stacked shares of the variance; small causes are gathered."""
    wide = shares[shares.part.isin(causes)].pivot(index="width_um", columns="part", values="share")
    largest = wide.max().sort_values(ascending=False)
    kept = [part for part in largest.index[:MOST_CAUSES] if largest[part] >= LEAST_SHARE]
    stack = wide[kept].copy()
    if len(kept) < wide.shape[1]:
        stack["others"] = wide.drop(columns=kept).sum(axis=1)
    places, bottom = np.arange(len(stack)), np.zeros(len(stack))
    for part in stack:
        fill = OTHERS if part == "others" else fill_of(part)
        axes.bar(
            places,
            100 * stack[part],
            bottom=bottom,
            width=0.8,
            color=fill.color,
            hatch=fill.hatch,
            edgecolor=INK,
            lw=0.7,
            label=part.replace("_", " "),
        )
        bottom += 100 * stack[part].to_numpy()
    axes.set_xticks(places, [f"{width:g}" for width in stack.index], rotation=90 if len(places) > 7 else 0)
    axes.set_xlabel("drawn width (µm)")
    axes.set_ylabel("share of the variance (%)")
    axes.axhline(100, color=INK, lw=0.8)
    handles, labels = axes.get_legend_handles_labels()
    below = -0.3 if len(places) > 7 else -0.2
    axes.legend(
        handles, labels, frameon=False, bbox_to_anchor=(0.5, below), loc="upper center", ncols=3, fontsize="small"
    )
    return axes


def yield_against_width(axes, table, target: float):
    """Timing yield at the period with its interval, and the target."""
    limits = yield_limits(table["yield"], table.yield_low, target)
    yields_with_interval(axes, table, "yield", label="timing yield, 95 % interval", limits=limits)
    reference_level(axes, target, f"target {100 * target:.12g} %")
    width_axis(axes, table.width_um)
    yield_axis(axes, limits)
    axes.set_ylabel(f"chips within {table.period_ps.iloc[0]:g} ps (%)")
    axes.legend(frameon=False, loc="lower right")
    return axes


def period_against_width(axes, table, target: float):
    """Slowest path of the chips, and the period that meets the target."""
    mean, sigma = table.slowest_mean_ps, table.slowest_sigma_ps
    spread_band(axes, table.width_um, mean - sigma, mean + sigma, label="spread: slowest path, one sigma")
    target = 100 * target
    with_interval(axes, table, "period_at_target", "_ps", label=f"period for {target:.12g} %, 95 % interval")
    reference_level(axes, table.period_ps.iloc[0], "period asked for")
    width_axis(axes, table.width_um)
    axes.set_ylabel("period (ps)")
    axes.legend(frameon=False)
    return axes


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
    limits = yield_limits(curve.chip_yield, curve.chip_yield_low, target)
    yields_with_interval(axes, curve, "chip_yield", label="chips inside, 95 % interval", limits=limits)
    reference_level(axes, target, f"target {100 * target:.12g} %")
    for row in curve[curve.is_minimum].itertuples():
        axes.axvline(row.width_um, color=SPREAD, lw=1.2, ls=":", label=f"the answer, W = {row.width_um:g} µm")
    width_axis(axes, curve.width_um)
    yield_axis(axes, limits)
    axes.set_ylabel("chips with all pairs inside (%)")
    axes.legend(frameon=False, loc="lower right")
    return axes


def failures_against_width(axes, table):
    """Failure share on a scale of normal scores: the estimator's interval, and counted points where counting can."""
    with_interval(axes, table, "device_failure", "", label="all reasons, 95 % interval")
    reasons = [name for name in table if name.startswith("failure_") and f"{name}_high" in table]
    for number, reason in enumerate(reasons):
        axes.plot(
            table.width_um,
            table[reason],
            ls=LINE_STYLES[number % 4],
            marker=MARKERS[number % 4],
            ms=3.5,
            lw=1.3,
            color=LINES[number % 4],
            label=reason.removeprefix("failure_").replace("vth_", "threshold ").replace("_", " "),
        )
    seen = table[table.counted_failure > 2e-5]
    if len(seen):
        axes.plot(
            seen.width_um, seen.counted_failure, "o", ms=10, mfc="none", color=SPREAD, label="counted, as a check"
        )
    width_axis(axes, table.width_um)
    axes.set_yscale("log")
    axes.set_ylabel("share of devices outside their limits")
    axes.legend(frameon=False)
    return axes


def working_chips_against_width(axes, table):
    """Share of chips that work."""
    limits = yield_limits(table.chip_yield, table.chip_yield_low)
    yields_with_interval(axes, table, "chip_yield", label="chips working, 95 % interval", limits=limits)
    width_axis(axes, table.width_um)
    yield_axis(axes, limits)
    axes.set_ylabel("chips working (%)")
    axes.legend(frameon=False, loc="lower right")
    return axes


def good_chips_against_width(axes, table):
    """Good chips per wafer area, and the width that gives most."""
    with_interval(axes, table, "good_chips", "_per_cm2", label="good chips, 95 % interval", marker="s")
    best = table.loc[table.good_chips_per_cm2.idxmax()]
    axes.axvline(best.width_um, color=SPREAD, lw=1.2, ls=":", label=f"most, at W = {best.width_um:g} µm")
    width_axis(axes, table.width_um)
    axes.set_ylabel("good chips per cm²")
    axes.legend(frameon=False)
    return axes
