"""What a fit says of widths that were not measured: the mean threshold, and one further device."""

from copy import copy
from dataclasses import replace

import numpy as np
from scipy import stats

from studies.fit import LEVEL, Fit
from studies.fit_model import Start


def prediction(fitted: Fit, width_um, length_um: float) -> dict[str, np.ndarray]:
    """Mean threshold of drawn widths at a length [V], its interval, and the interval of one further device.

    At the first condition measured; a device of any lot. Keys: mean, mean_low, mean_high, low, high.
    """
    cells, width_um = fitted.start.cells, np.asarray(width_um, float)
    many = len(width_um)
    asked = replace(
        cells, width_um=width_um, length_um=np.full(many, length_um), of_row=np.arange(many),
        **{name: np.full(many, getattr(cells, name)[0]) for name in ("body_bias_v", "drain_v", "temperature_c")},
    )  # fmt: skip
    start, law, values = _at(fitted.start, asked), fitted.problem.law, fitted.problem.values
    mean = start.thresholds(law, values(fitted.inner))
    drawn = np.array([start.thresholds(law, values(inner)) for inner in fitted.ensemble.inner])
    tails = (1 - LEVEL) / 2, (1 + LEVEL) / 2
    mean_low, mean_high = np.quantile(drawn, tails, axis=0)
    computed, area = start.sigmas(law, values(fitted.inner))
    device = _local(fitted, computed, area) + fitted.scatter.between
    rows = int((fitted.weight > 0).sum())
    factor = stats.t.ppf(tails[1], max(min(rows - len(fitted.inner), _freedom(fitted)), 1))
    half = factor * np.sqrt(device + (drawn.std(axis=0)) ** 2)
    return {"mean": mean, "mean_low": mean_low, "mean_high": mean_high, "low": mean - half, "high": mean + half}


def _at(start: Start, cells) -> Start:
    """The start at other cells."""
    other = copy(start)
    other.cells = cells
    base = start._bases[0][1]
    other._bases = [(np.ones(len(cells), bool), base)]
    return other


def _local(fitted: Fit, computed, area):
    """Variance of one device [V^2] by the fitted scatter."""
    scatter = fitted.scatter
    if scatter.remainder is None and scatter.device is None:
        return np.full(len(area), float(np.mean(scatter.local)))
    remainder, device = (part.value if part else 0.0 for part in (scatter.remainder, scatter.device))
    return computed**2 + remainder / (2 * area) + device


def _freedom(fitted: Fit) -> float:
    """Degrees of freedom of a device's whole variance: of its largest part."""
    parts = fitted.scatter.levels
    if not parts or not fitted.measured.levels:
        return np.inf
    name = max(parts, key=lambda each: parts[each].value)
    if parts[name].value < 0.5 * (fitted.scatter.between + float(fitted.scatter.local.mean())):
        return np.inf
    codes = fitted.measured.levels.get(name)
    return np.inf if codes is None else float(codes.max())
