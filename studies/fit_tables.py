"""What a fit hands back as tables: parameters, forms of the edge, residuals, predictions, and the ensemble by file keys."""

import numpy as np
import pandas as pd
from scipy import stats

from mc.intervals import Estimate
from studies.fit import LEVEL, Fit
from studies.fit_laws import table_widths
from studies.fit_prediction import prediction
from studies.fit_scatter import array_shift

MV_UM, MV = 1e9, 1e3  # a pair coefficient and a voltage from SI
GRID = 60  # widths of the prediction


def rooted(estimate: Estimate, scale: float, less: float = 0.0) -> Estimate:
    """A variance's estimate as a sigma in the file's unit. less : variance that something else explains"""
    value, low, high = (
        float(np.sqrt(max(each - less, 0.0)) * scale) for each in (estimate.value, estimate.low, estimate.high)
    )
    return Estimate(value=value, low=low, high=high, level=estimate.level, n=estimate.n, method=estimate.method)


def scatter_keys(fitted: Fit) -> dict[str, Estimate]:
    """Fitted scatter by process-file key, in the file's unit."""
    scatter, found = fitted.scatter, {}
    for level, estimate in scatter.levels.items():
        found[f"variation.flat_band.{level}_mv"] = rooted(estimate, MV, scatter.declared.get(level, 0.0))
    if scatter.device is not None:
        found["variation.flat_band.device_mv"] = rooted(scatter.device, MV)
    if scatter.remainder is not None:
        found["scatter.remainder_pair_mv_um"] = rooted(scatter.remainder, MV_UM)
    return found


def parameter_table(fitted: Fit) -> pd.DataFrame:
    """fit.csv: everything fitted, frozen or derived, with its interval."""
    rows = [(key, estimate, "fitted") for key, estimate in (fitted.parameters() | scatter_keys(fitted)).items()]
    scatter = fitted.scatter
    rows += [(f"vth_sigma_{level}_mv", rooted(estimate, MV), "derived") for level, estimate in scatter.levels.items()]
    if scatter.site is not None:
        rows.append(("vth_sigma_between_pairs_of_a_die_mv", rooted(scatter.site, MV), "derived"))
    if scatter.pairs is not None:
        rows.append(("remainder_of_pairs_alone_mv_um", rooted(scatter.pairs, MV_UM), "derived"))
    table = [
        {"parameter": key, "value": each.value, "low": each.low, "high": each.high, "level": each.level, "n": each.n,
         "method": each.method, "state": state}
        for key, each, state in rows
    ]  # fmt: skip
    table += [{"parameter": key, "value": value, "state": "frozen"} for key, value in fitted.problem.held.items()]
    return pd.DataFrame(table)


def form_table(fitted: Fit) -> pd.DataFrame:
    """fit_edges.csv: the forms of the edge compared."""
    return pd.DataFrame(
        {
            "edge": name,
            "parameters": " ".join(parameter.key for parameter in form.problem.free),
            "error_at_widths_left_out_mv": MV * form.error,
            "misfit_mv": MV * form.misfit,
            "chosen": name == fitted.choice.name,
        }
        for name, form in fitted.choice.forms.items()
    )


def residual_table(fitted: Fit) -> pd.DataFrame:
    """residuals.csv: every row of the file that was used, with its weight and what the fit without its width says of it.

    Thresholds have the sign that they have in the file.
    """
    measured, of_row, sign = fitted.measured, fitted.start.cells.of_row, fitted.measured.sign
    shift = array_shift(measured, fitted.scatter.local, fitted.start.weak_voltage, of_row)
    fitted_v = fitted.problem.cells(fitted.inner)[of_row] - shift
    table = {
        "row": measured.row, "width_um": measured.width_um, "length_um": measured.length_um,
        "body_bias_v": measured.body_bias_v, "temperature_c": measured.temperature_c, "count": measured.count.astype(int),
        "vth_mv": sign * MV * measured.threshold, "fitted_mv": sign * MV * fitted_v,
        "residual_mv": sign * MV * (measured.threshold - fitted_v), "sigma_mv": MV * fitted.sigma, "weight": fitted.weight,
    }  # fmt: skip
    left = fitted.choice.forms[fitted.choice.name].left
    if left is not None:
        half = stats.t.ppf((1 + LEVEL) / 2, left.freedom) * np.sqrt(
            left.error[of_row] ** 2
            + np.maximum(fitted.sigma, left.scatter * fitted.means.sigma[of_row] * bool(not measured.levels)) ** 2
        )
        middle = left.predicted[of_row] - shift
        ends = np.sort(np.stack([sign * (middle - half), sign * (middle + half)]), axis=0)
        table |= {"left_out_mv": sign * MV * middle, "left_out_low_mv": MV * ends[0], "left_out_high_mv": MV * ends[1]}
    return pd.DataFrame(table)


def prediction_table(fitted: Fit, widths_um=None) -> pd.DataFrame:
    """fit_prediction.csv: Vth of widths not measured, at every length measured (the most measured ones of many)."""
    cells, sign = fitted.start.cells, fitted.measured.sign
    drawn = (
        np.geomspace(cells.width_um.min(), cells.width_um.max(), GRID)
        if widths_um is None
        else np.asarray(widths_um, float)
    )
    lengths, rows = np.unique(fitted.measured.length_um, return_counts=True)
    lengths = np.sort(lengths[np.argsort(-rows, kind="stable")[:6]])
    tables = []
    for length in lengths:
        said = prediction(fitted, np.unique(drawn), float(length))
        ends = {"mean": (said["mean_low"], said["mean_high"]), "device": (said["low"], said["high"])}
        table = {"width_um": np.unique(drawn), "length_um": float(length), "vth_mv": sign * MV * said["mean"]}
        for name, pair in ends.items():
            low, high = np.sort(np.stack([sign * MV * each for each in pair]), axis=0)
            table |= {f"vth_{name}_low_mv": low, f"vth_{name}_high_mv": high}
        tables.append(pd.DataFrame(table))
    return pd.concat(tables, ignore_index=True)


def edge_keys(fitted: Fit, values) -> dict[str, object]:
    """The edge as the process file has it."""
    law = fitted.problem.law
    numbers = [values[parameter.key] for parameter in law.parameters]
    return law.keys(table_widths(fitted.start.narrowest, fitted.start.widest), *numbers)


def ensemble_table(fitted: Fit) -> pd.DataFrame:
    """FITTED_ensemble.csv: a row a draw, columns named by process-file keys, table_factor.K for the entries of a table."""
    prefix, rows = f"device.{fitted.device}.", []
    for inner in fitted.ensemble.inner:
        values = fitted.problem.values(inner)
        row = {
            key: value
            for key, value in values.items()
            if not key.startswith("edge.") and key not in fitted.problem.held
        }
        for key, value in edge_keys(fitted, values).items():
            if key in ("shape", "field_oxide_nm"):
                row[f"edge.{key}"] = value
            elif key == "table_factor":
                row |= {f"edge.table_factor.{place}": factor for place, factor in enumerate(value)}
        rows.append(row)
    table = pd.DataFrame(rows)
    stream = np.random.Generator(np.random.SFC64([fitted.question.seed, 1 << 32]))
    for key, estimate in scatter_keys(fitted).items():
        table[key] = _drawn(estimate, stream.standard_normal(len(table)))
    return table.rename(columns=lambda key: prefix + key)


def _drawn(estimate: Estimate, normal) -> np.ndarray:
    """Draws of a sigma whose 2.5 %, 50 % and 97.5 % points are its low, its value and its high."""
    part = normal / stats.norm.ppf((1 + estimate.level) / 2)
    high = estimate.high if np.isfinite(estimate.high) else 2 * estimate.value
    if estimate.low > 0:
        ratio = np.where(part > 0, high / estimate.value, estimate.value / estimate.low)
        return estimate.value * ratio**part
    return np.maximum(
        estimate.value + part * np.where(part > 0, high - estimate.value, estimate.value - estimate.low), 0.0
    )
