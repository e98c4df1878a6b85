"""The smallest width of a matched pair that keeps its offset or current error inside a limit on enough chips.

The same draws serve every width, so the yield is a smooth function of the width and the search needs few evaluations.
"""

from dataclasses import dataclass, field
from functools import partial
from time import perf_counter

import numpy as np
import pandas as pd

from mc.experiment import Inputs
from mc.intervals import Estimate, Summary
from mc.plan import Plan
from mc.runner import Progress, run
from mc.search import crossing_of_decreasing
from mc.sensitivity import variance_share
from studies.answer import Answer, asked_columns, columns_of, make_plan, precision_notes
from studies.biasing import Biasing
from studies.notes import model_notes, pair_notes, pair_sentences
from studies.pair_question import Question
from studies.pairing import DISTANCE, GRADIENT, Arrangement, PairChips, PairTally
from studies.population import Population
from studies.process_file import ProcessFile
from studies.settings import Settings, Workers
from studies.units import SUFFIXES, si
from studies.variation import CAUSES

__all__ = ["Question", "answer", "check"]

BLOCK = 8192
DRAWS_AT_ONCE = 200_000  # a slice's chips times its random numbers
FAILURES_EXPECTED = 100  # chips outside at the target yield, unless samples are given
CURVE = 6  # widths of the overview, the search's first bracket
SHARE_CHIPS = 20_000
TOLERANCES = {"value": 2e-4, "low": 2e-3, "high": 2e-3}  # of the limit; the bounds need less than the answer


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before any sampling."""
    population = _population(question, file)
    for length in question.length_um:
        biasing = Biasing(question, _arrangement(question, population), length)
        for width in (question.width_min_um, question.width_max_um):
            biasing.candidate(width)


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer a pair question. Raises InputError where the physics has no answer."""
    started = perf_counter()
    population = _population(question, file)
    arrangement = _arrangement(question, population)
    searches = []
    for length in question.length_um:
        search = Search(
            question=question,
            arrangement=arrangement,
            biasing=Biasing(question, arrangement, length),
            plan=_plan(question, settings),
            inputs=_inputs(arrangement, settings),
            evaluate=partial(run, jobs=workers.jobs, backend=workers.backend, progress=progress),
        )
        search.run()
        searches.append(search)
    rows = pd.DataFrame([row for search in searches for row in search.rows(file)])
    lengths = pd.DataFrame([search.summary(file) for search in searches])
    best = min(searches, key=lambda search: (not search.met, search.area(search.width.value)))
    shares = best.shares(file)
    return Answer(
        kind="pair",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=rows,
        tables={"pair_lengths": lengths, "pair_shares": shares},
        headlines=best.headlines(),
        sentences=pair_sentences(question, file.name, best, len(searches)),
        notes=(
            *model_notes(population),
            *pair_notes(question, population, best, rows),
            *precision_notes(settings, best.samples),
        ),
        samples=best.samples,
        block_size=BLOCK,
        evaluations=sum(search.evaluations for search in searches),
        seconds=perf_counter() - started,
        met=best.met,
    )


def _population(question: Question, file: ProcessFile) -> Population:
    return Population(file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c)


def _arrangement(question: Question, population: Population) -> Arrangement:
    distance = question.distance_um * SUFFIXES["um"]
    scatter = population.record.scatter
    gradient = 0.0 if question.layout == "common centroid" else si(scatter, "gradient_uv_per_um")
    return Arrangement(
        population=population,
        mirror=question.kind == "current mirror",
        pairs=question.pairs,
        fingers=question.fingers,
        drain_voltage=question.drain_v,
        distance_sigma=si(scatter, "distance_pair_uv_per_um") * distance,
        gradient_sigma=gradient * distance,
    )


def _plan(question: Question, settings: Settings) -> Plan:
    wanted = round(float(np.clip(FAILURES_EXPECTED / (1 - question.target_yield), 20_000, 1_000_000)))
    return make_plan(settings, default_samples=wanted, block_size=BLOCK)


def _inputs(arrangement: Arrangement, settings: Settings) -> Inputs:
    names = (*arrangement.die_names(), *arrangement.pair_names())
    return Inputs(
        seed=settings.seed,
        names=names,
        copula=arrangement.population.copula,
        slice_size=max(64, min(BLOCK, DRAWS_AT_ONCE // len(names))),
    )


@dataclass(kw_only=True)
class Search:
    """The search of one length: widths judged so far, and the one that was looked for.

    width : smallest width [um] with the widths at which the yield's bounds cross the target
    """

    question: Question
    arrangement: Arrangement
    biasing: Biasing
    plan: Plan
    inputs: Inputs
    evaluate: partial
    judged: dict[float, tuple[PairTally, int]] = field(default_factory=dict)
    width: Estimate | None = None
    met: bool = False
    samples: int = 0
    evaluations: int = 0

    def judge(self, widths_um) -> None:
        """Tally chips at several widths on the same draws."""
        candidates = tuple(self.biasing.candidate(width) for width in widths_um)
        task = PairChips.prepare(self.arrangement, candidates, self.question.limit, self.inputs)
        tally, self.samples = self.evaluate(task, self.plan, half_width=_yield_half_width)
        self.evaluations += self.samples * self.arrangement.evaluations_per_chip * len(candidates)
        for row, width in enumerate(widths_um):
            self.judged[width] = (tally, row)

    def run(self) -> None:
        """Judge the overview, find the crossings, and judge the answer on the layout grid."""
        question = self.question
        overview = list(np.geomspace(question.width_min_um, question.width_max_um, CURVE))
        self.judge(overview)
        places = {
            end: crossing_of_decreasing(
                partial(self._limit_needed, end=end), question.limit, sorted(self.judged), tolerance=tolerance
            )
            for end, tolerance in TOLERANCES.items()
        }
        self.met = bool(np.isfinite(places["value"]))
        found = {end: self._on_grid(place) if np.isfinite(place) else np.inf for end, place in places.items()}
        self.width = Estimate(
            **found, level=0.95, n=self.samples, method="crossing of the chip yield and its bounds with the target"
        )
        if self.met and self.width.value not in self.judged:
            self.judge([self.width.value])

    def _limit_needed(self, width_um: float, end: str) -> float:
        """Limit that the target's share of chips would keep at a width; `end` picks its value or a bound."""
        if width_um not in self.judged:
            self.judge([width_um])
        tally, row = self.judged[width_um]
        needed = getattr(tally.worst_quantile(row, self.question.target_yield), end)
        return max(needed, np.finfo(float).tiny)

    def _on_grid(self, width_um: float) -> float:
        """The next width that the layout grid allows, finger by finger."""
        step = self.question.grid_nm * 1e-3 * self.question.fingers
        return float(np.round(np.ceil(width_um / step - 1e-6) * step, 9))

    def area(self, width_um: float) -> float:
        """Gate area of one pair, both devices [um^2]."""
        return 2 * width_um * self.biasing.length_um

    def shown_width(self) -> float:
        """The answer, or the widest width judged when the target is out of reach."""
        return self.width.value if self.met else max(self.judged)

    def rows(self, file: ProcessFile) -> list[dict]:
        """Rows of pair.csv: the overview and the answer."""
        overview = np.geomspace(self.question.width_min_um, self.question.width_max_um, CURVE)
        widths = sorted({*overview, self.shown_width()})
        return [self._row(file, float(width)) for width in widths]

    def _row(self, file: ProcessFile, width_um: float) -> dict:
        tally, row = self.judged[width_um]
        error, unit, scale = self.question.error_words
        sigma = Summary(tally.every, 2 * row).sigma().scaled(scale)
        size = Summary(tally.every, 2 * row + 1).quantile(0.999).scaled(scale)
        columns = (
            self._identity(file)
            | {"width_um": width_um, "area_um2": self.area(width_um)}
            | {f"{error}_sigma_{unit}": sigma.value, f"{error}_p99_9_{unit}": size.value}
            | columns_of("pair_yield", tally.pair_yield(row))
            | columns_of("chip_yield", tally.chip_yield(row))
            | {f"{error}_sigma_low_{unit}": sigma.low, f"{error}_sigma_high_{unit}": sigma.high}
            | {f"{error}_p99_9_low_{unit}": size.low, f"{error}_p99_9_high_{unit}": size.high}
            | {"is_minimum": bool(self.met and width_um == self.width.value), "samples": tally.worst.count}
            | self.biasing.operating_point(width_um)
        )
        return columns | asked_columns(self.question, columns)

    def _identity(self, file: ProcessFile) -> dict:
        question = self.question
        return {
            "process": file.name,
            "device": question.device,
            "kind": question.kind,
            "length_um": self.biasing.length_um,
            "fingers": question.fingers,
        }

    def summary(self, file: ProcessFile) -> dict:
        """Row of pair_lengths.csv: what this length costs."""
        width = self.width
        return self._identity(file) | {
            "met": self.met,
            "min_width_um": width.value,
            "min_width_low_um": width.low,
            "min_width_high_um": width.high,
            "area_um2": self.area(width.value),
            "gate_capacitance_ff": self.biasing.gate_capacitance_ff(width.value) if self.met else np.inf,
            "widths_judged": len(self.judged),
        }

    def headlines(self) -> dict[str, Estimate]:
        """The answer's numbers with their intervals."""
        tally, row = self.judged[self.shown_width()]
        error, unit, scale = self.question.error_words
        scaled = 2 * self.biasing.length_um
        return {
            "min_width_um": self.width,
            "area_um2": self.width.scaled(scaled),
            f"{error}_sigma_{unit}": Summary(tally.every, 2 * row).sigma().scaled(scale),
            "chip_yield": tally.chip_yield(row),
        }

    def shares(self, file: ProcessFile) -> pd.DataFrame:
        """Break-down of the error's variance at the answer: runs in which only one cause varies, on the same draws."""
        candidate = (self.biasing.candidate(self.shown_width()),)
        plan = Plan(samples=min(self.samples, SHARE_CHIPS), block_size=BLOCK)
        error, unit, scale = self.question.error_words

        def summary(names):
            inputs = Inputs(
                seed=self.inputs.seed, names=names, copula=self.inputs.copula, slice_size=self.inputs.slice_size
            )
            task = PairChips.prepare(self.arrangement, candidate, self.question.limit, inputs)
            tally, chips = self.evaluate(task, plan)
            self.evaluations += chips * self.arrangement.evaluations_per_chip
            return Summary(tally.every, 0)

        whole = summary(self.inputs.names)
        rows = []
        for cause, names in self._causes().items():
            alone = summary(names)
            rows.append(
                self._identity(file)
                | {"width_um": self.shown_width(), "part": cause, "samples": alone.n}
                | columns_of(f"{error}_sigma", alone.sigma().scaled(scale), unit)
                | columns_of("share", variance_share(alone, whole))
            )
        return pd.DataFrame(rows)

    def _causes(self) -> dict[str, tuple[str, ...]]:
        """Inputs of each cause that differs between the two devices of a pair."""
        causes = {}
        for cause in (*CAUSES, "distance", "gradient"):
            prefix = {"distance": DISTANCE, "gradient": GRADIENT}.get(cause, f"{self.question.device}.{cause}.device")
            names = tuple(name for name in self.inputs.names if name.split("/")[0].startswith(prefix))
            if names:
                causes[cause] = names
        return causes


def _yield_half_width(tally: PairTally) -> float:
    estimates = [tally.chip_yield(row) for row in range(len(tally.chips_inside))]
    return max((estimate.high - estimate.low) / 2 for estimate in estimates)
