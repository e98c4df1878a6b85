"""The command `widthwise fit`: its arguments, what it prints, its exit code."""

import json
import sys
from pathlib import Path
from textwrap import fill

import numpy as np

from studies import terminal
from studies.errors import InputError, one_line
from studies.fit import Fit, Question, fit
from studies.fit_files import check_out, write
from studies.fit_read import listed
from studies.fit_tables import parameter_table, prediction_table
from studies.validated import validated

DONE, NONE_FITS = 0, 1
LOW_WEIGHT = 0.45  # of a row about four sigmas off
MOST_ROWS = 30


def add_arguments(parser) -> None:
    """What is not a field of the question."""
    parser.add_argument("measured", type=Path, metavar="MEASURED.csv", help="CSV or Parquet, one row a measurement")
    parser.add_argument("--start", type=Path, required=True, metavar="PROCESS.toml", help="process file to begin with")
    parser.add_argument(
        "--out",
        type=Path,
        required=True,
        metavar="FITTED.toml",
        help="fitted process file; tables and figures go beside it",
    )
    parser.add_argument(
        "--column", action="append", default=[], metavar="OURS=THEIRS",
        help="name of a column in the file, for instance vth_v=threshold; may be repeated",
    )  # fmt: skip
    parser.add_argument(
        "--predict-width-um", type=float, nargs="+", default=[], metavar="UM", help="widths to print predictions for"
    )


def columns(pairs) -> dict[str, str]:
    """Our names of columns for theirs. Raises InputError."""
    named = {}
    for pair in pairs:
        ours, equals, theirs = pair.partition("=")
        if not (equals and ours and theirs):
            raise InputError(f"--column {one_line(pair)}: OURS=THEIRS is needed, for instance vth_v=threshold")
        if ours in named:
            raise InputError(f"--column {one_line(ours)}: given twice")
        named[ours] = theirs
    return named


def run(given: dict) -> int:
    """Fit, write, print. Returns the exit code: 1 when no form of the edge fits."""
    question = {name: given[name] for name in Question.model_fields if name in given}
    if given["jobs"] < 1:
        raise InputError(f"--jobs {given['jobs']}: 1 or more is needed")
    if any(not 0 < width < np.inf for width in given["predict_width_um"]):
        raise InputError("--predict-width-um: widths above 0 are needed")
    question = validated(Question, question, "command line")
    check_out(given["out"], [given["measured"], given["start"]], given["replace"])
    with terminal.waiting("fitting"):
        fitted = fit(given["measured"], given["start"], question, columns(given["column"]), given["jobs"])
        extra = prediction_table(fitted, given["predict_width_um"]) if given["predict_width_um"] else None
        files = write(fitted, given["out"])
    if given["json"]:
        print(json.dumps(as_json(fitted, extra, files), indent=2))
    else:
        print("\n".join(lines(fitted, extra)))
    print(f"Written: {one_line(given['out'])}, and beside it {', '.join(files[:-1])}", file=sys.stderr)
    return DONE if fitted.fits else NONE_FITS


def outlier_words(fitted: Fit) -> list[str]:
    """Rows that pull little or not at all, by their number in the file and with their weight."""
    low = np.flatnonzero(fitted.weight < LOW_WEIGHT)
    if not len(low):
        return []
    gone = low[fitted.weight[low] == 0]
    said = []
    if len(gone):
        said.append(
            f"Gross outliers, weight 0: {listed(fitted.measured.row[gone])}; all with their weights in residuals.csv."
        )
    some = [
        f"{fitted.measured.row[place]} (weight {fitted.weight[place]:.2f})" for place in low if fitted.weight[place] > 0
    ]
    if some:
        more = f" and {len(some) - MOST_ROWS} more" if len(some) > MOST_ROWS else ""
        said.append(f"Rows of little weight: {', '.join(some[:MOST_ROWS])}{more}.")
    return said


def lines(fitted: Fit, extra) -> list[str]:
    """What is printed."""
    measured = fitted.measured
    head = (
        f"{one_line(measured.source.name)}, device {one_line(fitted.device)}: {len(measured.row)} rows, "
        f"{len(fitted.start.cells)} sizes and conditions, edge: {fitted.choice.name}"
    )
    if not fitted.fits:
        head += " (no form of the edge fits; a constant was written)"
    table = parameter_table(fitted)
    width = max(len(name) for name in table.parameter)
    said = [fill(head, 100), "", f"{'parameter':{width}}  {'value':>11}  95 % interval"]
    for row in table.itertuples():
        span = "frozen" if row.state == "frozen" else f"[{row.low:.4g}, {row.high:.4g}]"
        said.append(f"{one_line(row.parameter):{width}}  {row.value:11.5g}  {span}")
    said.append("")
    if extra is not None:
        said += ["Predicted Vth in mV; brackets: 95 % interval of the mean, then of one further device"]
        said += [
            f"W = {row.width_um:g} um, L = {row.length_um:g} um: {row.vth_mv:.1f} [{row.vth_mean_low_mv:.1f}, {row.vth_mean_high_mv:.1f}] "
            f"[{row.vth_device_low_mv:.1f}, {row.vth_device_high_mv:.1f}]"
            for row in extra.itertuples()
        ]
        said.append("")
    return said + [fill(note, 100) for note in (*fitted.notes, *outlier_words(fitted))]


def as_json(fitted: Fit, extra, files) -> dict:
    """What is printed for machines."""
    table = parameter_table(fitted)
    return {
        "device": fitted.device,
        "edge": fitted.choice.name,
        "fits": fitted.fits,
        "rows": len(fitted.measured.row),
        "parameters": json.loads(table.to_json(orient="records", double_precision=15)),
        "errors_at_widths_left_out_mv": {
            name: None if np.isnan(form.error) else 1e3 * form.error for name, form in fitted.choice.forms.items()
        },
        "predictions": [] if extra is None else json.loads(extra.to_json(orient="records")),
        "outliers": [
            {"row": int(fitted.measured.row[place]), "weight": float(fitted.weight[place])}
            for place in np.flatnonzero(fitted.weight < LOW_WEIGHT)
        ],
        "notes": [*fitted.notes],
        "seconds": round(fitted.seconds, 2),
        "files": files,
    }
