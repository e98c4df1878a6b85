"""The search of a pair's width at one length: by counting chips, or by rare events where counting cannot reach."""

from dataclasses import dataclass, field
from functools import partial

import numpy as np
import pandas as pd
from scipy.special import ndtri

from mc.experiment import Inputs
from mc.groups import Grouped, Groups
from mc.intervals import Estimate, Summary, quantile_ranks
from mc.plan import Plan
from mc.rare import RareEstimate
from mc.search import crossing_of_decreasing
from mc.sensitivity import variance_share
from studies.answer import asked_columns, columns_of
from studies.biasing import Biasing
from studies.geometry import Geometry
from studies.pair_question import Question
from studies.pair_tail import pair_failure, yields_of
from studies.pairing import DISTANCE, GRADIENT, Arrangement, PairChips, PairTally
from studies.process_file import ProcessFile
from studies.variation import CAUSES

CURVE = 6  # widths of the overview, the search's first bracket
SHARE_CHIPS = 20_000
TAIL_SPAN = 1.25  # on either side of the first guess, where the tail is estimated
TOLERANCES = {"value": 2e-4, "low": 2e-3, "high": 2e-3}  # of the limit; the bounds need less than the answer


@dataclass(kw_only=True)
class Search:
    """The search of one length: widths judged so far, and the one that was looked for.

    judged, grouped : tally and row of every width, summed and in groups of chips
    width : smallest width [um] with the widths at which the yield's bounds cross the target
    """

    question: Question
    arrangement: Arrangement
    biasing: Biasing
    plan: Plan
    inputs: Inputs
    evaluate: partial
    judged: dict[float, tuple[PairTally, int]] = field(default_factory=dict)
    grouped: dict[float, tuple[Groups, int]] = field(default_factory=dict)
    tail: dict[float, RareEstimate] = field(default_factory=dict)
    width: Estimate | None = None
    met: bool = False
    samples: int = 0
    evaluations: int = 0

    def judge(self, widths_um) -> None:
        """Tally chips at several widths on the same draws."""
        candidates = tuple(self.biasing.candidate(width) for width in widths_um)
        task = PairChips.prepare(self.arrangement, candidates, self.question.limit, self.inputs)
        grouped, self.samples = self.evaluate(
            Grouped(task=task),
            self.plan,
            half_width=lambda so_far: _yield_half_width(so_far.total()),
            name=self._run_name("all causes", widths_um),
        )
        tally = grouped.total()
        self.evaluations += self.samples * self.arrangement.evaluations_per_chip * len(candidates)
        for row, width in enumerate(widths_um):
            self.judged[width] = (tally, row)
            self.grouped[width] = (grouped, row)

    def run(self) -> None:
        """Judge the overview, find the crossings, and judge the answer on the layout grid."""
        question = self.question
        overview = self.overview()
        self.judge(overview)
        if self._tail_is_needed():
            return self._run_tail(overview)
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

    def overview(self) -> list[float]:
        """Widths judged first [um]: the whole range, evenly on a logarithmic scale."""
        return list(np.geomspace(self.question.width_min_um, self.question.width_max_um, CURVE))

    def _tail_is_needed(self) -> bool:
        """Whether so many chips bound the target's quantile not even from above."""
        return quantile_ranks(self.question.target_yield, self.samples)[1] > self.samples

    def _failure(self, width_um: float) -> float:
        """Failure probability of one pair at a width, by the rare-event estimator."""
        if width_um not in self.tail:
            candidate = self.biasing.candidate(width_um)
            found = pair_failure(self.arrangement, candidate, self.question.limit, self.inputs.seed)
            self.tail[width_um] = found
            self.evaluations += found.calls * 2 * self.question.fingers
        return max(self.tail[width_um].value, np.finfo(float).tiny)

    def _run_tail(self, overview) -> None:
        """The search where counting cannot reach: the width at which K pairs fail as often as the target allows."""
        allowed = (1 - self.question.target_yield) / self.question.pairs
        start = self._gaussian_width(overview, allowed)
        span = [start / TAIL_SPAN, start, start * TAIL_SPAN]
        places = [width for width in span if overview[0] <= width <= overview[-1]] or [overview[0], overview[-1]]
        if self._failure(places[-1]) > allowed:
            places = sorted({*places, overview[-1]})
        if self._failure(places[0]) <= allowed:
            places = sorted({*places, overview[0]})
        found = crossing_of_decreasing(self._failure, allowed, places, tolerance=0.03)
        self.met = bool(np.isfinite(found))
        width = self._on_grid(found) if self.met else np.inf
        ends = (width, width)
        if self.met:
            failure, near = self._failure(width), self.tail[width]
            slope = np.log(self._failure(places[-1]) / self._failure(places[0])) / np.log(places[-1] / places[0])
            # at the answer the failure probability's bounds, moved along the curve's slope, give the width's
            ends = sorted(self._on_grid(width * (failure / bound) ** (1 / slope)) for bound in (near.low, near.high))
            self.judge([width])
        self.width = Estimate(
            value=width,
            low=min(ends[0], width),
            high=max(ends[1], width),
            level=0.95,
            n=self.samples,
            method="rare events: width at which the pair's failure probability and its bounds meet the target",
        )

    def _gaussian_width(self, overview, allowed: float) -> float:
        """First guess: the width at which a normal law of the error would fail as often as is allowed."""
        sigmas = [Summary(self.judged[width][0].every, 2 * self.judged[width][1]).sigma().value for width in overview]
        wanted = self.question.limit / -ndtri(allowed / 2)
        return float(np.exp(np.interp(-np.log(wanted), -np.log(sigmas), np.log(overview))))

    def error_sigma(self, width_um: float) -> Estimate:
        """Sigma of the error at a width, in the unit of the tables."""
        tally, row = self.judged[width_um]
        return Summary(tally.every, 2 * row).sigma().scaled(self.question.error_words[2])

    def yields(self, width_um: float) -> tuple[Estimate, Estimate]:
        """Pair yield and chip yield at a width: by rare events where they were asked, else by counting."""
        if width_um in self.tail:
            return yields_of(self.tail[width_um], self.question.pairs)
        tally, row = self.judged[width_um]
        return tally.pair_yield(row), tally.chip_yield(row)

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

    def finger_geometry(self) -> Geometry:
        """One finger of the answer's devices."""
        width_um = self.shown_width() / self.question.fingers
        return self.arrangement.population.geometry(width_um, self.biasing.length_um)

    def rows(self, file: ProcessFile) -> list[dict]:
        """Rows of pair.csv: the overview and the answer."""
        widths = sorted({*self.overview(), self.shown_width()})
        return [self._row(file, float(width)) for width in widths]

    def _row(self, file: ProcessFile, width_um: float) -> dict:
        tally, row = self.judged[width_um]
        error, unit, scale = self.question.error_words
        sigma = Summary(tally.every, 2 * row).sigma().scaled(scale)
        size = Summary(tally.every, 2 * row + 1).quantile(0.999).scaled(scale)
        pair_yield, chip_yield = self.yields(width_um)
        columns = (
            self._identity(file)
            | {"width_um": width_um, "area_um2": self.area(width_um)}
            | {f"{error}_sigma_{unit}": sigma.value, f"{error}_p99_9_{unit}": size.value}
            | columns_of("pair_yield", pair_yield)
            | columns_of("chip_yield", chip_yield)
            | {f"{error}_sigma_low_{unit}": sigma.low, f"{error}_sigma_high_{unit}": sigma.high}
            | {f"{error}_p99_9_low_{unit}": size.low, f"{error}_p99_9_high_{unit}": size.high}
            | {"electrical_width_um": self.biasing.electrical_width_um(width_um)}
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
            "chip_yield": self.yields(self.shown_width())[1],
        }

    def shares(self, file: ProcessFile) -> pd.DataFrame:
        """Break-down of the error's variance at the answer: runs in which only one cause varies, on the same draws."""
        candidate = (self.biasing.candidate(self.shown_width()),)
        plan = Plan(samples=min(self.samples, SHARE_CHIPS), block_size=self.plan.block_size)
        error, unit, scale = self.question.error_words

        def summary(names, part):
            inputs = Inputs(
                seed=self.inputs.seed, names=names, copula=self.inputs.copula, slice_size=self.inputs.slice_size
            )
            task = PairChips.prepare(self.arrangement, candidate, self.question.limit, inputs)
            tally, chips = self.evaluate(task, plan, name=self._run_name(part, [self.shown_width()]))
            self.evaluations += chips * self.arrangement.evaluations_per_chip
            return Summary(tally.every, 0)

        whole = summary(self.inputs.names, "all causes together")
        rows = []
        for cause, names in self._causes().items():
            alone = summary(names, f"{cause} alone")
            rows.append(
                self._identity(file)
                | {"width_um": self.shown_width(), "part": cause, "samples": alone.n}
                | columns_of(f"{error}_sigma", alone.sigma().scaled(scale), unit)
                | columns_of("share", variance_share(alone, whole))
            )
        return pd.DataFrame(rows)

    def _run_name(self, part: str, widths_um) -> str:
        """What tells a run of this search from every other."""
        widths = ", ".join(f"{width!r}" for width in map(float, widths_um))
        return f"{part}, L = {self.biasing.length_um!r} um, {self.question.fingers} fingers, W = {widths} um"

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
