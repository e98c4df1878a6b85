"""How much the threshold voltage spreads at each width, and why.

Every sample is one device of the whole production: its own lot, wafer, die and neighbourhood. All widths see the same
draws. The causes' shares come from runs on the first samples in which only one cause, or only one level, varies.
"""

from dataclasses import dataclass, replace
from time import perf_counter
from typing import Annotated

import numpy as np
import pandas as pd
from pydantic import Field

from mc.experiment import Experiment, GroupedExperiment, Inputs
from mc.groups import Groups
from mc.intervals import Estimate, Summary
from mc.plan import Plan
from mc.runner import Progress, run
from mc.sensitivity import variance_share
from mc.tally import Moments, Tally
from physics.edges import NoEdge
from studies.answer import Answer, asked_columns, columns_of, make_plan, precision_notes
from studies.edge_notes import edge_width_notes
from studies.errors import InputError
from studies.geometry import Geometry
from studies.notes import bound_notes, model_notes, spread_sentences
from studies.numbers import Number, numbers_of
from studies.population import Population
from studies.process_file import LEVELS, ProcessFile
from studies.question import WidthQuestion
from studies.settings import Settings, Workers
from studies.variation import CAUSES

BLOCK = 65536
DEFAULT_SAMPLES = 400_000
SHARE_SAMPLES = 2 * BLOCK
QUANTILES = {"vth_p0_1": 0.001, "vth_p99_9": 0.999}
BETTER = {"vth_mean_mv": 0, "vth_sigma_mv": -1, "vth_skew": 0, "vth_p0_1_mv": 0, "vth_p99_9_mv": 0}
WITHOUT_EFFECT = ("mobility", "current_factor")  # causes that move currents but not thresholds


class Question(WidthQuestion):
    """Threshold voltage against width: mean, sigma, skew, tails, and which cause contributes how much."""

    device: str
    """device of the process file"""
    body_bias_v: Annotated[float, Field(ge=0, le=20)] = 0.0
    """reverse body bias, a magnitude"""
    drain_v: Annotated[float, Field(ge=0, le=20)] = 0.05
    """drain voltage at which the threshold is meant, a magnitude"""


@dataclass(frozen=True, kw_only=True)
class Thresholds:
    """Model of the runner: thresholds of every geometry, once for each group of inputs that vary.

    population, geometries, drain_voltage : what is evaluated
    groups : names of the inputs that vary, one tuple for each set of outputs
    Outputs are ordered group by group, each with every geometry.
    """

    population: Population
    geometries: tuple[Geometry, ...]
    drain_voltage: float
    groups: tuple[tuple[str, ...], ...]

    def __call__(self, draws):
        count = len(next(iter(draws.values())))
        rows = np.empty((len(self.groups), len(self.geometries), count))
        for names, group_rows in zip(self.groups, rows):
            chosen = {name: draws[name] for name in names}
            silicon = self.population.silicon(chosen)
            for geometry, row in zip(self.geometries, group_rows):
                row[:] = self.population.thresholds(chosen, geometry, silicon, self.drain_voltage)
        return rows.reshape(-1, count)


@dataclass(frozen=True, kw_only=True)
class Part:
    """One width's variance from one cause or level alone: its sigma [mV] and its share of the whole variance."""

    sigma_mv: Estimate
    share: Estimate


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before any sampling."""
    _prepared(question, file)


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer a spread question. Raises InputError where the physics has no answer."""
    started = perf_counter()
    population, geometries, groups = _prepared(question, file)
    inputs = Inputs(seed=settings.seed, names=groups["all"], copula=population.copula)

    def model(names):
        return Thresholds(
            population=population, geometries=geometries, drain_voltage=question.drain_v, groups=tuple(names)
        )

    widths = range(len(geometries))
    grouped, samples = run(
        GroupedExperiment(experiment=Experiment.prepare(model([groups["all"]]), inputs)),
        make_plan(settings, default_samples=DEFAULT_SAMPLES, block_size=BLOCK),
        half_width=lambda so_far: max(_relative_half_width(Summary(so_far.total(), width).sigma()) for width in widths),
        jobs=workers.jobs,
        backend=workers.backend,
        progress=progress,
        ledger=workers.ledger,
        name="devices",
    )
    tally = grouped.total()
    share_plan = Plan(samples=min(samples, SHARE_SAMPLES), block_size=BLOCK)
    share_experiment = Experiment.prepare(model(groups.values()), inputs, Moments)
    share_tally, _ = run(
        share_experiment, share_plan, jobs=workers.jobs, backend=workers.backend, ledger=workers.ledger, name="shares"
    )
    parts = _parts(share_tally, list(groups), len(geometries))

    table = _table(question, file, population, geometries, [Summary(tally, width) for width in widths], parts)
    return Answer(
        kind="spread",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=table,
        tables={"spread_shares": _share_table(question, file, parts)},
        headlines={
            f"vth_sigma_mv at width_um {width:.15g}": Summary(tally, row).sigma().scaled(1e3)
            for row, width in enumerate(question.width_um)
        },
        sentences=spread_sentences(table.to_dict("records")),
        notes=(
            *model_notes(population),
            *edge_width_notes(population, geometries),
            *bound_notes(table, "devices", "3700 or more are needed for the 0.1 % and 99.9 % quantiles"),
            *precision_notes(settings, samples),
        ),
        samples=samples,
        block_size=BLOCK,
        evaluations=len(geometries) * (samples + share_plan.samples * len(groups)),
        seconds=perf_counter() - started,
        numbers=_numbers(question, grouped, tally),
    )


def _numbers(question: Question, grouped: Groups, tally: Tally) -> tuple[Number, ...]:
    summaries = [Summary(tally, row) for row in range(len(question.width_um))]
    found = {
        "vth_mean_mv": [each.mean().scaled(1e3) for each in summaries],
        "vth_sigma_mv": [each.sigma().scaled(1e3) for each in summaries],
        "vth_skew": [each.skew() for each in summaries],
    }
    found |= {f"{name}_mv": [each.quantile(p).scaled(1e3) for each in summaries] for name, p in QUANTILES.items()}

    def read(part: Tally):
        mean, second, third, _ = part.central_moments()
        variance = second * part.count / (part.count - 1)
        skew = np.where(second > 0, third / np.maximum(second, np.finfo(float).tiny) ** 1.5, 0.0)
        tails = [
            [1e3 * part.value_at_rank(row, p * part.count) for row in range(len(mean))] for p in QUANTILES.values()
        ]
        return np.array([1e3 * mean, 1e3 * np.sqrt(variance), skew, *tails])

    return numbers_of(BETTER, question.width_um, found, read, grouped)


def _prepared(question: Question, file: ProcessFile):
    population = Population(
        file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c
    )
    geometries = tuple(population.geometry(width, question.length_um) for width in question.width_um)
    return population, geometries, _groups(population)


def _relative_half_width(estimate: Estimate) -> float:
    return (estimate.high - estimate.low) / 2 / estimate.value if estimate.value > 0 else 0.0


def _groups(population: Population) -> dict[str, tuple[str, ...]]:
    """Inputs that vary together: "all" first, then every cause and every level that has any."""
    useful = [item for item in population.inputs if item.cause not in WITHOUT_EFFECT]
    if not useful:
        raise InputError(f"{population.where}: nothing varies; give variation or scatter, or ask for no spread")
    groups = {"all": tuple(item.name for item in useful)}
    groups |= {cause: tuple(item.name for item in useful if item.cause == cause) for cause in CAUSES}
    groups |= {f"level_{level}": tuple(item.name for item in useful if item.level == level) for level in LEVELS}
    return {name: group for name, group in groups.items() if group}


def _parts(tally: Moments, names: list[str], widths: int) -> list[dict[str, Part]]:
    """For each width the parts of its variance, by the names of the groups after the first."""
    return [
        {
            name: Part(
                sigma_mv=Summary(tally, number * widths + width).sigma().scaled(1e3),
                share=variance_share(Summary(tally, number * widths + width), Summary(tally, width)),
            )
            for number, name in enumerate(names)
            if number > 0
        }
        for width in range(widths)
    ]


def _identity(question: Question, file: ProcessFile, width: float) -> dict:
    return {"process": file.name, "device": question.device, "width_um": width, "length_um": question.length_um}


def _share_table(question: Question, file: ProcessFile, parts) -> pd.DataFrame:
    return pd.DataFrame(
        _identity(question, file, width)
        | {"part": name, "samples": part.share.n}
        | columns_of("vth_sigma", part.sigma_mv, "mv")
        | columns_of("share", part.share)
        for width, mine in zip(question.width_um, parts)
        for name, part in mine.items()
    )


def _table(question, file, population, geometries, summaries, parts) -> pd.DataFrame:
    silicon = population.silicon({})
    device_sigmas = [mine["level_device"].sigma_mv if "level_device" in mine else None for mine in parts]
    rows = []
    for width, geometry, summary, mine, local in zip(question.width_um, geometries, summaries, parts, device_sigmas):
        row = _identity(question, file, width) | {"samples": summary.n}
        row |= columns_of("vth_mean", summary.mean(), "v")
        row |= columns_of("vth_sigma", summary.sigma().scaled(1e3), "mv")
        row["vth_skew"] = summary.skew().value
        quantiles = {name: summary.quantile(probability) for name, probability in QUANTILES.items()}
        row |= {f"{name}_v": quantile.value for name, quantile in quantiles.items()}
        row |= {f"share_{name}": part.share.value for name, part in mine.items()}
        causes = [part.share for name, part in mine.items() if name in CAUSES]
        row["share_sum_of_causes"] = sum(share.value for share in causes)
        row |= {"vth_skew_low": summary.skew().low, "vth_skew_high": summary.skew().high}
        for name, part in mine.items():
            row |= {f"share_{name}_low": part.share.low, f"share_{name}_high": part.share.high}
        # the shares' errors are not independent: added up they bound the sum's
        row["share_sum_of_causes_low"] = sum(share.low for share in causes)
        row["share_sum_of_causes_high"] = sum(share.high for share in causes)
        for name, quantile in quantiles.items():
            row |= {f"{name}_low_v": quantile.low, f"{name}_high_v": quantile.high}
        row["vth_nominal_v"] = float(population.thresholds({}, geometry, silicon, question.drain_v))
        bare = replace(geometry, edge=NoEdge())
        row["vth_nominal_without_edges_v"] = float(population.thresholds({}, bare, silicon, question.drain_v))
        if local is not None:
            row |= columns_of("vth_device_sigma", local, "mv")
            ratio = np.sqrt(geometries[-1].width / geometry.width)
            row |= columns_of("vth_device_sigma_area_law", device_sigmas[-1].scaled(ratio), "mv")
        rows.append(row | asked_columns(question, row))
    return pd.DataFrame(rows)
