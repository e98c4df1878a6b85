"""What all figures share: axes in a designer's units, and curves with their intervals.

Spread of transistors is a hatched band or a bar; uncertainty of a number is a thin line with caps. The legends say which.
"""

import numpy as np
from matplotlib.ticker import FixedFormatter, FixedLocator, FuncFormatter, NullFormatter, NullLocator

from studies.palette import BAND_HATCH, NUMBER, REFERENCE, SPREAD

LEAST_YIELD, LEAST_LOSS = 1e-3, 1e-12  # where an axis of yields ends
MOST_TICKS = 9


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
    axes.set_xlabel("drawn width (µm)")
    return axes


def plain_log_axis(axes):
    """Logarithmic vertical axis with plain numbers at 1, 2, 3 and 5; linear when all that is drawn is zero."""
    if all(np.max(line.get_ydata(), initial=0) <= 0 for line in axes.get_lines()):
        return axes
    axes.set_yscale("log")
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(FuncFormatter(lambda value, _: f"{value:g}" if f"{value:e}"[0] in "235" else ""))
    return axes


def with_interval(axes, table, name: str, unit: str, *, label: str, color=NUMBER, scale=1.0, marker="o", ls="-"):
    """A curve of a number against width with its 95 % interval as caps."""
    value, low, high = (table[f"{name}{part}{unit}"] * scale for part in ("", "_low", "_high"))
    finite = np.isfinite(low) & np.isfinite(high)
    bars = [np.where(finite, value - low, 0), np.where(finite, high - value, 0)]
    curve = axes.errorbar(
        table.width_um, value, yerr=bars, color=color, marker=marker, ms=4, lw=1.2, ls=ls, capsize=4, label=label
    )
    curve.lines[0].set_zorder(3)
    return axes


def spread_band(axes, widths, low, high, *, label: str):
    """The spread of transistors, or of chips: a light, dotted band."""
    axes.fill_between(widths, low, high, facecolor="none", edgecolor=SPREAD, hatch=BAND_HATCH, lw=0, alpha=0.45)
    axes.fill_between(widths, low, high, color=SPREAD, alpha=0.16, lw=0, label=label)
    for edge in (low, high):
        axes.plot(widths, edge, color=SPREAD, lw=0.8, alpha=0.8)
    return axes


def reference_level(axes, value: float, label: str):
    """A dashed line across the axes at what was asked for."""
    axes.axhline(value, color=REFERENCE, ls="--", lw=1.4, label=label)
    return axes


def yield_limits(values, lows, target: float | None = None) -> tuple[float, float]:
    """Ends of an axis of yields: below the lowest one shown, and a tenth of the smallest loss that is excluded."""
    losses = 1 - np.asarray(lows, float)
    losses = np.append(losses, [] if target is None else 1 - target)
    losses = losses[np.isfinite(losses) & (losses > 0)]
    shown = np.asarray(values, float)
    shown = shown[np.isfinite(shown) & (shown > LEAST_YIELD)]
    lowest = min([*shown, 0.5 if target is None else target])
    bottom = np.clip(0.6 * lowest if lowest < 0.5 else 1 - 1.7 * (1 - lowest), LEAST_YIELD, 0.9)
    top = 1 - np.clip(min(losses, default=0.01) / 10, LEAST_LOSS, (1 - bottom) / 10)
    return float(bottom), float(top)


def yield_axis(axes, limits: tuple[float, float]):
    """Vertical axis of a share of chips in percent, stretched towards 0 and 100 so that the last digits show."""
    axes.set_yscale("logit", nonpositive="clip")
    nines = [1 - 10.0**-power for power in range(1, 13)]
    places = [place for place in (0.001, 0.01, 0.1, 0.3, 0.5, 0.7, *nines) if limits[0] <= place <= limits[1]]
    if len(places) > MOST_TICKS:
        places = [place for place in places if place not in (0.3, 0.7)]
        places = places[:: -(-len(places) // MOST_TICKS)]
    axes.yaxis.set_major_locator(FixedLocator(places))
    axes.yaxis.set_major_formatter(FixedFormatter([yield_words(place) for place in places]))
    axes.yaxis.set_minor_locator(NullLocator())
    axes.set_ylim(*limits)
    return axes


def yield_words(share: float) -> str:
    """A yield in percent with as many nines as it has."""
    loss = 1 - share
    digits = max(0, int(np.ceil(-np.log10(loss) - 1e-6)) - 2) if loss < 0.09 else 1 if share < 0.009 else 0
    return f"{100 * share:.{digits}f}"


def yields_with_interval(axes, table, name: str, *, label: str, limits: tuple[float, float]):
    """Yields against width on a `yield_axis`; those beyond its ends stand at the end as open triangles."""
    bottom, top = limits
    inside = [np.clip(table[f"{name}{part}"].to_numpy(float), bottom, top) for part in ("", "_low", "_high")]
    value, low, high = inside
    widths, real = table.width_um.to_numpy(float), table[name].to_numpy(float)
    within = (real > bottom) & (real < top)
    axes.plot(widths, value, color=NUMBER, lw=1.2, zorder=3)
    axes.errorbar(
        widths[within], value[within], yerr=[(value - low)[within], (high - value)[within]],
        color=NUMBER, marker="o", ms=4, lw=0, elinewidth=1.2, capsize=4, label=label,
    )  # fmt: skip
    for beyond, marker, end, where in ((real >= top, "^", low, "above"), (real <= bottom, "v", high, "below")):
        if beyond.any():
            axes.vlines(widths[beyond], end[beyond], value[beyond], color=NUMBER, lw=1.2)
            axes.plot(
                widths[beyond], value[beyond], marker, color=NUMBER, mfc="none", mec=NUMBER, ms=7, clip_on=False,
                label=f"{where} the axis; line: interval",
            )  # fmt: skip
    return axes
