"""Which share of chips meets a clock period at each width, and which period or width a target yield needs.

Dies are sampled; given a die the rest is computed (`studies.chip`). All widths see the same dies.
"""

from dataclasses import dataclass
from functools import partial
from time import perf_counter
from typing import Annotated

import numpy as np
import pandas as pd
from pydantic import Field

from mc.codec import storable
from mc.experiment import Inputs
from mc.groups import Grouped
from mc.intervals import Estimate, Summary, bounded_mean
from mc.plan import Block
from mc.runner import Progress, run
from mc.tally import Grid, Moments
from studies.answer import Answer, asked_columns, columns_of, make_plan, precision_notes
from studies.chip import Side, Stage, fail_probability, slowest_path
from studies.edge_notes import edge_width_notes
from studies.errors import InputError, one_line
from studies.notes import bound_notes, model_notes, timing_sentences, timing_tail_notes
from studies.population import Population
from studies.process_file import LEVELS, ProcessFile
from studies.question import WidthQuestion
from studies.settings import Settings, Workers
from studies.timing_numbers import probit_crossing, timing_numbers
from studies.timing_tail import Tail, TailAnswer, beyond_counting, tail_answers
from studies.units import SUFFIXES

BLOCK = 512  # dies; small enough for a default run to have groups of blocks
SLICE = 256  # dies at once; each is evaluated at some two hundred places
DEFAULT_SAMPLES = 16384
SLOWEST = ("slowest.edge_a.chip", "slowest.edge_b.chip")  # one standard normal a chip and edge
PERIOD_GRID = np.linspace(-8, 16, 97)  # in pilot sigmas of the slowest path


class Question(WidthQuestion):
    """Timing yield of chips with many equal paths against width, and the period or width a target yield needs."""

    period_ps: Annotated[float, Field(gt=0)]
    """clock period"""
    paths: Annotated[int, Field(ge=1, le=10**9)]
    """paths per chip, all equal"""
    stages: Annotated[int, Field(ge=2, le=10000)]
    """inverting stages per path"""
    supply_v: Annotated[float, Field(gt=0, le=100)]
    """supply voltage"""
    fan_out: Annotated[float, Field(gt=0, le=100)] = 3.0
    """gates driven by each stage"""
    wire_capacitance_ff: Annotated[float, Field(ge=0)] = 0.0
    """wire per stage"""
    width_ratio: Annotated[float, Field(gt=0, le=20)] = 2.0
    """p width over n width; width_um is that of the n device"""
    target_yield: Annotated[float, Field(gt=0, lt=1, alias="yield")] = 0.99
    """share of chips wanted"""
    n_device: str = "n"
    """device that pulls down"""
    p_device: str = "p"
    """device that pulls up"""


@storable
@dataclass(frozen=True, kw_only=True)
class TimingTally:
    """Sums over dies: failure probabilities and their squares, shape (widths, periods), and the slowest path's moments."""

    failures: np.ndarray
    squares: np.ndarray
    slowest: Moments

    def __add__(self, other):
        return TimingTally(
            failures=self.failures + other.failures,
            squares=self.squares + other.squares,
            slowest=self.slowest + other.slowest,
        )


@dataclass(frozen=True, kw_only=True)
class Chips:
    """Task for the runner: tally a block of dies.

    stages : one per width; paths : per chip; inputs : die-level inputs and SLOWEST
    grid : of the slowest path [s]; periods : shape (widths, periods) [s]
    """

    stages: tuple[Stage, ...]
    paths: int
    inputs: Inputs
    grid: Grid
    periods: np.ndarray

    def __call__(self, block: Block) -> TimingTally:
        failures, squares = np.zeros_like(self.periods), np.zeros_like(self.periods)
        slowest = []
        for die in self.inputs.slices(block):
            rows = []
            for row, stage in enumerate(self.stages):
                cumulants = stage.path_cumulants(die)
                rows.append(slowest_path(cumulants, [die[name] for name in SLOWEST], self.paths))
                failed = fail_probability(cumulants, self.periods[row][:, None], self.paths)
                failures[row] += failed.sum(axis=1)
                squares[row] += (failed * failed).sum(axis=1)
            slowest.append(np.array(rows))
        return TimingTally(failures=failures, squares=squares, slowest=Moments.of(self.grid, slowest))


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before any sampling."""
    _stages(question, file)


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer a timing question. Raises InputError where the physics has no answer."""
    started = perf_counter()
    chips = prepare(question, file, settings)
    plan = make_plan(settings, default_samples=DEFAULT_SAMPLES, block_size=BLOCK)
    grouped, samples = run(
        Grouped(task=chips),
        plan,
        half_width=lambda so_far: max(
            (estimate.high - estimate.low) / 2 for estimate in _yields_at_period(so_far.total(), len(chips.stages))
        ),
        jobs=workers.jobs,
        backend=workers.backend,
        progress=progress,
        ledger=workers.ledger,
        name="dies",
    )
    tally = grouped.total()
    rows = range(len(chips.stages))
    yields = _yields_at_period(tally, len(chips.stages))
    tails = _tails(question, chips, tally, samples, workers)
    if tails:
        yields = [
            tail.chip_yield if beyond_counting(each.value, samples) else each for tail, each in zip(tails, yields)
        ]
        periods = [tail.period.scaled(1 / SUFFIXES["ps"]) for tail in tails]
    else:
        periods = [_period_at(tally, chips, row, question.target_yield) for row in rows]
    min_width = _smallest_width(question, yields)
    table = _table(question, file, tally, yields, periods)
    met = bool(np.isfinite(min_width.value))
    headlines = {"min_width_um": min_width}
    headlines |= {f"yield at width_um {width:.15g}": mine for width, mine in zip(question.width_um, yields)}
    headlines |= {
        f"period_at_target_ps at width_um {width:.15g}": mine for width, mine in zip(question.width_um, periods)
    }
    return Answer(
        kind="timing",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=table,
        headlines=headlines,
        sentences=timing_sentences(question, table.to_dict("records"), min_width),
        notes=(
            *(note for side in chips.stages[0].sides for note in model_notes(side.population)),
            *_edge_notes(chips),
            *(() if tails else bound_notes(table, "dies", "ask for more samples")),
            *timing_tail_notes(question, tails),
            *precision_notes(settings, samples),
        ),
        samples=samples,
        block_size=BLOCK,
        evaluations=samples * sum(stage.evaluations_per_die for stage in chips.stages)
        + sum(tail.dies * stage.evaluations_per_die for tail, stage in zip(tails, chips.stages)),
        seconds=perf_counter() - started,
        met=met,
        numbers=timing_numbers(question, chips, grouped, yields, periods, min_width, tails),
    )


def prepare(question: Question, file: ProcessFile, settings: Settings) -> Chips:
    """The task of a question: populations, geometries, and the period grid from a pilot of dies."""
    stages = tuple(stage.with_interactions(settings.seed) for stage in _stages(question, file))
    populations = [side.population for side in stages[0].sides]
    names = tuple(name for each in populations for level in LEVELS[:-1] for name in each.names(level=level))
    inputs = Inputs(seed=settings.seed, names=(*names, *SLOWEST), copula=populations[0].copula, slice_size=SLICE)
    die = next(inputs.slices(Block(0, BLOCK)))
    normals = [die[name] for name in SLOWEST]
    pilot = np.array([slowest_path(stage.path_cumulants(die), normals, question.paths) for stage in stages])
    if not np.all(np.isfinite(pilot)):
        raise InputError(f"{one_line(file.path)}: supply_v = {question.supply_v:g}: the stages do not switch")
    grid = Grid.from_pilot(pilot)
    periods = grid.center[:, None] + grid.scale[:, None] * PERIOD_GRID
    asked = np.full((len(stages), 1), question.period_ps * SUFFIXES["ps"])
    return Chips(stages=stages, paths=question.paths, inputs=inputs, grid=grid, periods=np.hstack([asked, periods]))


def _stages(question: Question, file: ProcessFile) -> tuple[Stage, ...]:
    populations = []
    for key, channel in (("n_device", "n"), ("p_device", "p")):
        name = getattr(question, key)
        population = Population(file, name, temperature_c=question.temperature_c)
        if population.record.channel != channel:
            raise InputError(f'{population.where}.channel: {key} needs a device with channel = "{channel}"')
        if population.record.mobility_cm2_per_vs is None:
            raise InputError(f"{population.where}: timing needs 'mobility_cm2_per_vs'")
        if not population.names(level="device"):
            raise InputError(f"{population.where}.scatter: timing needs some scatter between devices")
        populations.append(population)
    pull_down, pull_up = populations
    return tuple(
        Stage(
            pull_down=Side(population=pull_down, geometry=pull_down.geometry(width, question.length_um)),
            pull_up=Side(
                population=pull_up, geometry=pull_up.geometry(width * question.width_ratio, question.length_um)
            ),
            stages=question.stages,
            fan_out=question.fan_out,
            wire_capacitance=question.wire_capacitance_ff * SUFFIXES["ff"],
            supply=question.supply_v,
        )
        for width in question.width_um
    )


def _edge_notes(chips: Chips) -> list[str]:
    """How far the edges' model can be believed for either device of a stage."""
    sides = zip(*(stage.sides for stage in chips.stages))
    return [
        note
        for devices in sides
        for note in edge_width_notes(devices[0].population, tuple(device.geometry for device in devices))
    ]


def _tails(question: Question, chips: Chips, tally: TimingTally, samples: int, workers: Workers) -> list[TailAnswer]:
    """Each width's tail where the target asks for more than the dies drawn can show; none where they can."""
    if not beyond_counting(question.target_yield, samples):
        return []
    period = float(chips.periods[0, 0])
    tails = [Tail.of(stage, question.paths, period, chips.inputs, SLOWEST) for stage in chips.stages]
    summaries = [Summary(tally.slowest, row) for row in range(len(tails))]
    guesses = [(each.mean().value, each.sigma().value) for each in summaries]
    return tail_answers(tails, question.target_yield, guesses, workers)


def _yield(tally: TimingTally, row: int, column: int) -> Estimate:
    failures, squares = float(tally.failures[row, column]), float(tally.squares[row, column])
    return bounded_mean(failures, squares, tally.slowest.count).complement()


def _yields_at_period(tally: TimingTally, widths: int) -> list[Estimate]:
    return [_yield(tally, row, 0) for row in range(widths)]


def _period_at(tally: TimingTally, chips: Chips, row: int, target: float) -> Estimate:
    """Period at which the yield, interpolated on the probit scale, meets the target; bounds where its bounds do."""
    columns = range(1, chips.periods.shape[1])
    estimates = [_yield(tally, row, column) for column in columns]
    crossing = partial(probit_crossing, chips.periods[row, 1:] / SUFFIXES["ps"], target)
    return Estimate(
        value=crossing([estimate.value for estimate in estimates]),
        low=crossing([estimate.high for estimate in estimates]),
        high=crossing([estimate.low for estimate in estimates]),
        level=estimates[0].level,
        n=estimates[0].n,
        method="crossing of the yield and its bounds",
    )


def _smallest_width(question: Question, yields: list[Estimate]) -> Estimate:
    """Smallest width that meets the target, interpolated between the widths asked for on the probit scale."""
    crossing = partial(probit_crossing, question.width_um, question.target_yield)
    return Estimate(
        value=crossing([each.value for each in yields]),
        low=crossing([each.high for each in yields]),
        high=crossing([each.low for each in yields]),
        level=yields[0].level,
        n=yields[0].n,
        method="crossing of the yield and its bounds, interpolated between widths",
    )


def _table(question: Question, file: ProcessFile, tally: TimingTally, yields, periods) -> pd.DataFrame:
    picoseconds = 1 / SUFFIXES["ps"]
    rows = []
    for row, width in enumerate(question.width_um):
        slowest = Summary(tally.slowest, row)
        mean, sigma = slowest.mean().scaled(picoseconds), slowest.sigma().scaled(picoseconds)
        row_columns = (
            {"process": file.name, "width_um": width, "period_ps": question.period_ps}
            | columns_of("yield", yields[row])
            | {"slowest_mean_ps": mean.value, "slowest_sigma_ps": sigma.value}
            | {"period_at_target_ps": periods[row].value}
            | {"length_um": question.length_um, "samples": slowest.n}
            | {"slowest_mean_low_ps": mean.low, "slowest_mean_high_ps": mean.high}
            | {"slowest_sigma_low_ps": sigma.low, "slowest_sigma_high_ps": sigma.high}
            | {"period_at_target_low_ps": periods[row].low, "period_at_target_high_ps": periods[row].high}
            | {"yield_method": yields[row].method}
        )
        rows.append(row_columns | asked_columns(question, row_columns))
    return pd.DataFrame(rows)
