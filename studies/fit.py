"""A process file fitted to measured thresholds: reading, the form of the edge, the mean, the scatter, and how well all is known.

The data flow one way: measured rows -> cells -> form of the edge -> robust fit of rows -> variance components -> (once more,
with what is now known of the scatter) -> ensemble -> intervals and predictions.
"""

import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from mc.intervals import Estimate
from studies.errors import InputError, nearest, one_line
from studies.fit_edges import CellMeans, Choice, choose
from studies.fit_ensemble import Ensemble, draw
from studies.fit_mean import Problem, row_weights, separable, solve
from studies.fit_model import Start, make_cells
from studies.fit_read import Measured, read_measured
from studies.fit_rows import cell_means, finest, first_sigma, gross
from studies.fit_scatter import (
    Scatter,
    array_share,
    array_shift,
    fit_scatter,
    widened,
)
from studies.process_file import ProcessFile, load_process
from studies.ranges import NotNegative
from studies.units import si
from studies.validated import Record

LEVEL = 0.95
EDGES = ("none", "field oxide", "trench", "1/W", "edge transistor", "hump")
ARRAY_ROUNDS = 5  # an array's shift depends on the scatter, and the scatter on that shift
OF_SCATTER = ("width_bias_nm", "length_bias_nm", "doping_per_cm3")  # what a device's area and dopants depend on
FEW = 4  # rows up to which a group of arrays keeps its mean
REPEATED = 20  # rows beyond one a cell from which on outliers show before a fit
FEWEST_DRAWS, MOST_DRAWS = 50, 100_000


class Question(Record):
    """Fit a process file to measured thresholds."""

    device: str | None = None
    """device of the start that was measured; needed where the file does not say"""
    edge: str | None = None
    """form of the edge: none, "field oxide", trench, 1/W, "edge transistor" or hump; all are compared when not given"""
    parameters: list[str] | None = None
    """keys to fit besides the edge, for instance oxide_charge_per_cm2 width_bias_nm; what the data can tell when not given"""
    drain_v: NotNegative = 0.05
    """drain voltage of the measurement, a magnitude, for rows that do not say"""
    draws: int = 400
    """draws of the parameter ensemble"""
    seed: int = 1
    """seed of the draws"""


@dataclass(frozen=True, kw_only=True)
class Fit:
    """A fit and what is known of it.

    file, device, question, measured : what was asked, and what was measured
    start, problem, inner : the start, the model, and where its parameters stand
    choice, means : forms of the edge compared, and the cells' means; scatter, ensemble : see there
    threshold : of every row, arrays raised to the mean of their devices [V]; residual [V], weight [1], sigma [V] : of every row
    notes : in words; seconds : wall time
    """

    file: ProcessFile
    device: str
    question: Question
    measured: Measured
    start: Start
    choice: Choice
    means: CellMeans
    problem: Problem
    inner: np.ndarray
    scatter: Scatter
    ensemble: Ensemble
    threshold: np.ndarray
    residual: np.ndarray
    weight: np.ndarray
    sigma: np.ndarray
    notes: tuple[str, ...]
    seconds: float

    @property
    def fits(self) -> bool:
        """Whether a form of the edge fits."""
        return self.choice.fits

    def parameters(self) -> dict[str, Estimate]:
        """Every fitted parameter by key, in the file's unit, with its interval."""
        values = self.problem.values(self.inner)
        drawn = [self.problem.values(inner) for inner in self.ensemble.inner]
        found = {}
        for place, parameter in enumerate(self.problem.free):
            low, high = np.quantile([each[parameter.key] for each in drawn], [(1 - LEVEL) / 2, (1 + LEVEL) / 2])
            clusters, freedom = f"{self.ensemble.units} {self.ensemble.level}s", self.ensemble.freedom[place]
            found[parameter.key] = Estimate(
                value=values[parameter.key], low=float(low), high=float(high), level=LEVEL, n=int((self.weight > 0).sum()),
                method=f"cluster bootstrap of {clusters}, Student t with {freedom:.0f} degrees",
            )  # fmt: skip
        return found


def fit(path: Path, start: Path, question: Question, mapping=None, jobs: int = 1) -> Fit:
    """Fit the start to the measurements in a file. mapping : our column for theirs; jobs : workers of the bootstrap

    Raises InputError in one line.
    """
    begun = time.perf_counter()
    _check(question)
    file = load_process(start)
    channels = {name: record.channel for name, record in file.process.device.items()}
    defaults = {"drain_v": question.drain_v, "temperature_c": file.process.temperature_c}
    device, measured = read_measured(path, mapping or {}, channels, question.device, defaults)
    begin = Start(file, device, make_cells(measured))
    _check_design(question, measured, begin, one_line(path))
    mean = _fit_mean(measured, begin, question)
    if begin.added and "short_channel.eta" not in {parameter.key for parameter in mean["problem"].free}:
        begin = Start(
            file, device, begin.cells, short=False
        )  # the data do not ask for the short channel that was added
        mean = _fit_mean(measured, begin, question)
    problem, weight, sigma, residual = (mean[name] for name in ("problem", "weight", "sigma", "residual"))
    ensemble = draw(
        problem, mean["inner"], measured.levels, begin.cells.of_row, residual, sigma, weight,
        draws=question.draws, seed=question.seed, jobs=jobs,
    )  # fmt: skip
    mean["scatter"] = _with_dimensions(measured, mean, ensemble)
    mean["weight"] = weight * row_weights(residual, sigma)
    del mean["share"]
    said = (*mean["choice"].said, *mean.pop("frozen"), *begin.notes, *measured.notes, *mean["scatter"].notes)
    return Fit(
        file=file, device=device, question=question, measured=measured, start=begin, ensemble=ensemble,
        notes=tuple(dict.fromkeys(said)), seconds=time.perf_counter() - begun, **mean,
    )  # fmt: skip


def _with_dimensions(measured: Measured, mean, ensemble: Ensemble) -> Scatter:
    """The scatter's intervals with the error of the electrical dimensions and the doping, on which they depend."""
    problem, moved = mean["problem"], []
    if mean["scatter"].remainder is None and mean["scatter"].device is None:
        return mean["scatter"]
    low, high = problem.bounds
    residual = _apart(mean["residual"], mean["weight"], measured, problem.start.cells.of_row)
    for place, parameter in enumerate(problem.free):
        if parameter.key in OF_SCATTER:
            inner = mean["inner"].copy()
            step = min(ensemble.error[place], 0.9 * (high[place] - inner[place]))
            inner[place] += step
            again = fit_scatter(
                measured,
                problem,
                inner,
                residual,
                mean["weight"],
                mean["share"],
                intervals=False,
                begin=mean["scatter"],
            )
            moved.append(again)
    return widened(mean["scatter"], moved)


def _first_look(measured: Measured, start: Start):
    """Thresholds raised to the mean of their devices, weight and sigma of the rows, and means of the cells, without a fit."""
    of_row, unit = start.cells.of_row, finest(measured)
    computed, area = start.sigmas(start.laws["none"], {})
    local = computed**2 + si(start.record.scatter, "remainder_pair_mv_um") ** 2 / (2 * area)
    threshold = measured.threshold + array_shift(measured, local, start.weak_voltage, of_row)
    weight = np.ones(len(threshold))
    for again in (True, False):
        sigma = first_sigma(threshold, weight, measured, of_row, np.sqrt(local))
        means = cell_means(threshold, sigma, weight, of_row, np.sqrt(local))
        if not again or means.pure is None or means.pure[1] < REPEATED:
            return threshold, weight, sigma, means
        weight = 1.0 - gross(threshold - means.mean[of_row], unit, of_row)


def _fit_mean(measured: Measured, start: Start, question: Question) -> dict[str, object]:
    """The form of the edge, the mean and the scatter: fields of a Fit, and notes on what was frozen."""
    of_row, unit = start.cells.of_row, finest(measured)
    asked = tuple(question.parameters) if question.parameters else None
    threshold, weight, sigma, means = _first_look(measured, start)
    choice = choose(start, means, asked, question.edge)
    form = choice.forms[choice.name]
    problem, inner, frozen = form.problem, form.inner, list(form.notes)
    if (weight > 0).sum() <= len(inner):
        raise InputError(
            f"{one_line(measured.source)}: {int((weight > 0).sum())} rows for {len(inner)} parameters "
            f"({', '.join(parameter.key for parameter in problem.free)}); more rows are needed, or fewer --parameters"
        )
    share = 1 / measured.count
    for _ in range(ARRAY_ROUNDS if (measured.count > 1).any() else 1):
        inner, residual = _rows(problem, inner, threshold, sigma, weight, of_row)
        scatter = fit_scatter(
            measured, problem, inner, _apart(residual, weight, measured, of_row), weight, share, intervals=False
        )
        shared = scatter.site.value if scatter.site else 0.0
        share = array_share(measured, scatter.local, start.weak_voltage, of_row)
        weight = 1.0 - gross(residual, unit, of_row, np.sqrt(scatter.local[of_row] * share + shared))
        threshold = measured.threshold + array_shift(measured, scatter.local, start.weak_voltage, of_row)
        sigma = scatter.rows(share, of_row)
    precision = np.bincount(of_row, weight / sigma**2, len(start.cells))
    problem, inner, more = separable(problem, inner, precision, asked is not None)
    inner, residual = _rows(problem, inner, threshold, sigma, weight, of_row)
    scatter = fit_scatter(
        measured, problem, inner, _apart(residual, weight, measured, of_row), weight, share, intervals=True, begin=scatter
    )
    return {
        "choice": choice, "means": means, "problem": problem, "inner": inner, "scatter": scatter, "threshold": threshold,
        "residual": residual, "weight": weight, "sigma": scatter.rows(share, of_row), "frozen": [*frozen, *more], "share": share,
    }  # fmt: skip


def _rows(problem, inner, threshold, sigma, weight, of_row):
    """The robust fit of all rows with weight, and the residuals of all."""
    good = weight > 0
    inner = solve(problem, inner, threshold[good], sigma[good], of_row[good])
    return inner, threshold - problem.cells(inner)[of_row]


def _apart(residual, weight, measured: Measured, of_row):
    """Residuals with the mean of every cell's arrays, and of its single devices, taken off where there are arrays.

    An array's shift that is not right yet would else count as scatter, and enlarge that shift.
    """
    if not (measured.count > 1).any():
        return residual
    group = np.unique(np.column_stack([of_row, measured.count]), axis=0, return_inverse=True)[1].reshape(-1)
    rows = np.bincount(group, weight)
    mean = np.bincount(group, weight * residual) / np.maximum(rows, 1e-300)
    return residual - np.where(rows > FEW, mean, 0.0)[group]


def _check(question: Question) -> None:
    if question.edge is not None and question.edge not in EDGES:
        raise InputError(f"--edge {one_line(question.edge)}: no such form; {nearest(question.edge, EDGES)}")
    if not FEWEST_DRAWS <= question.draws <= MOST_DRAWS:
        raise InputError(f"--draws {question.draws}: {FEWEST_DRAWS} to {MOST_DRAWS} are needed")
    if question.seed < 0:
        raise InputError(f"--seed {question.seed}: 0 or more is needed")


def _check_design(question: Question, measured: Measured, start: Start, where: str) -> None:
    widths = np.unique(measured.width_um)
    if question.edge not in (None, "none") and len(widths) < 2:
        raise InputError(
            f"{where}: one width only ({widths[0]:g} um): a form of the edge cannot be fitted; leave out --edge"
        )
    least = 1 if question.parameters is None else len(question.parameters)
    law = start.laws[question.edge] if question.edge else start.laws["none"]
    if len(measured.row) <= least + len(law.parameters):
        raise InputError(
            f"{where}: {len(measured.row)} rows for {least + len(law.parameters)} parameters or more; more rows are needed"
        )
