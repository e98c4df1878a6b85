"""Rows and cells before anything is fitted: gross outliers, robust means of the cells, and a first sigma."""

import numpy as np
import pandas as pd
from scipy import stats

from studies.fit_edges import CellMeans
from studies.fit_read import Measured

GROSS = 5.0  # local sigmas beyond which a row is a gross outlier and has no weight
CENTERED = 4  # rows of a unit from which on its own median is taken off first
OWN_SPREAD = 12  # rows of a cell from which on its own spread is used
RESOLUTION = 5e-5  # [V]; a spread below it is the instrument's rounding
MAD = float(1 / stats.norm.ppf(0.75))


def finest(measured: Measured) -> np.ndarray | None:
    """Unit of the finest level of every row; None when no level is given."""
    return list(measured.levels.values())[-1] if measured.levels else None


def gross(residual, unit, of_row, local_sigma=None) -> np.ndarray:
    """Which rows are gross outliers: more than GROSS local sigmas from the middle of their die, or of everything.

    unit : finest unit of every row, or None; local_sigma : of every row [V], or None: from the rows' own median deviation
    """
    left = pd.Series(np.asarray(residual, float))
    if unit is not None:
        many = np.bincount(unit)[unit] >= CENTERED
        left = left - np.where(many, left.groupby(unit).transform("median"), left.median())
    else:
        left = left - left.median()
    size = left.abs()
    if local_sigma is None:
        usual = np.full(len(size), size.median())
        many = np.bincount(of_row)[of_row] >= OWN_SPREAD
        local_sigma = MAD * np.where(many, size.groupby(of_row).transform("median"), usual)
    return (size > GROSS * np.maximum(local_sigma, RESOLUTION)).to_numpy()


def cell_means(threshold, sigma, weight, of_row, computed) -> CellMeans:
    """Robust mean of every cell from its median on, and the scatter of rows about it.

    threshold, sigma [V], weight [1] : of every row; computed : sigma of one device of every cell [V]
    """
    count = len(computed)
    middle = (
        pd.Series(np.where(weight > 0, threshold, np.nan)).groupby(of_row).median().reindex(range(count)).to_numpy()
    )
    middle = np.where(np.isnan(middle), np.nanmedian(middle), middle)
    for _ in range(4):
        pull = weight / np.sqrt(1 + ((threshold - middle[of_row]) / sigma / 2) ** 2)
        total = np.bincount(of_row, pull / sigma**2, count)
        moved = np.bincount(of_row, pull / sigma**2 * threshold, count)
        middle = np.where(total > 0, moved / np.where(total > 0, total, 1), middle)
    rows = np.bincount(of_row, weight > 0, count)
    freedom = int(rows.sum() - (rows > 0).sum())
    pure = None
    if freedom > 0:
        left = (threshold - middle[of_row])[(weight > 0) & (rows[of_row] > 1)]
        spread = MAD * np.median(np.abs(left)) if freedom > 20 else np.sqrt((left**2).sum() / freedom)
        pure = max(float(spread), RESOLUTION), freedom
    usual = np.bincount(of_row, sigma, count) / np.maximum(np.bincount(of_row, minlength=count), 1)
    return CellMeans(
        mean=middle,
        weight=np.maximum(total, 1e-12),
        rows=np.maximum(rows, 1e-9),
        sigma=usual,
        computed=computed,
        pure=pure,
    )


def first_sigma(threshold, weight, measured: Measured, of_row, computed) -> np.ndarray:
    """Sigma of every row before anything is fitted [V]: from repeated rows, else from how widths and lengths disagree."""
    good = weight > 0
    means = cell_means(threshold, np.full(len(threshold), 0.02), weight, of_row, computed)
    if means.pure is not None and means.pure[1] >= 5:
        spread = means.pure[0]
    else:
        table = pd.DataFrame({"w": measured.width_um, "l": measured.length_um, "v": threshold})[good].sort_values(
            ["l", "w"]
        )
        steps = table.groupby("l").v.diff().dropna().abs()
        spread = MAD * float(steps.median()) / np.sqrt(2) if len(steps) else 0.02
    known = computed[of_row] ** 2
    return np.sqrt(np.maximum(known + max(spread**2 - known.mean(), 0.0), max(0.2 * spread, RESOLUTION) ** 2))
