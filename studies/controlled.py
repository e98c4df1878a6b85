"""Differences of two options' thresholds, known better by a control whose law is known exactly.

Near nominal a threshold is nearly linear in the standard normals it is drawn from. That linear part has mean zero and a
known variance, so what the sample's linear part shows beyond these is chance, and is taken off.
"""

from dataclasses import dataclass

import numpy as np

from mc.experiment import Experiment, Inputs
from mc.groups import GROUPS, Grouped, jackknife_half_width
from mc.intervals import Estimate
from mc.plan import Plan
from mc.runner import run
from mc.tally import Moments
from studies.geometry import Geometry
from studies.numbers import FEWEST_GROUPS
from studies.population import Population
from studies.process_file import ProcessFile
from studies.settings import Settings, Workers
from studies.spread import BLOCK, WITHOUT_EFFECT, Question

SMALLEST_BLOCK = 256
NUMBERS = ("vth_mean_mv", "vth_sigma_mv")  # of every width, from the same devices
METHOD = "paired, linear control, delete-a-group jackknife"


@dataclass(frozen=True, kw_only=True, eq=False)
class Option:
    """One option's devices at every width, and their thresholds' slopes.

    names : inputs that move a threshold; slopes : of each geometry with each of them, shape (widths, names) [V]
    """

    population: Population
    geometries: tuple[Geometry, ...]
    names: tuple[str, ...]
    slopes: np.ndarray
    drain_voltage: float

    @classmethod
    def of(cls, file: ProcessFile, question: Question) -> "Option":
        """An option as the question asks for it."""
        population = Population(
            file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c
        )
        geometries = tuple(population.geometry(width, question.length_um) for width in question.width_um)
        names = tuple(item.name for item in population.inputs if item.cause not in WITHOUT_EFFECT)

        def threshold(geometry, name, normal):
            draws = {name: np.array([normal])}
            return float(population.thresholds(draws, geometry, population.silicon(draws), question.drain_v)[0])

        slopes = [
            [(threshold(each, name, 1.0) - threshold(each, name, -1.0)) / 2 for name in names] for each in geometries
        ]
        return cls(
            population=population,
            geometries=geometries,
            names=names,
            slopes=np.array(slopes),
            drain_voltage=question.drain_v,
        )

    def thresholds_and_controls(self, draws) -> np.ndarray:
        """Thresholds of every geometry and their linear parts, shape (2 widths, n) [V]."""
        silicon = self.population.silicon(draws)
        thresholds = [self.population.thresholds(draws, each, silicon, self.drain_voltage) for each in self.geometries]
        normals = np.array([draws[name] for name in self.names])
        controls = [sum(slope * normal for slope, normal in zip(row, normals)) for row in self.slopes]
        return np.array([*thresholds, *controls])

    def mean_and_sigma(self, moments: Moments, rows: slice) -> np.ndarray:
        """Mean and sigma of every geometry's threshold with chance in the control taken off, shape (2, widths) [mV]."""
        mean, second, _, _ = (each[rows] for each in moments.central_moments())
        variance = second * moments.count / (moments.count - 1)
        widths = len(self.geometries)
        true_variance = (self.slopes**2).sum(axis=1)
        better = variance[:widths] - (variance[widths:] - true_variance)
        return 1e3 * np.array([mean[:widths] - mean[widths:], np.sqrt(better)])


@dataclass(frozen=True, kw_only=True)
class Both:
    """Model of the runner: both options on the same draws."""

    first: Option
    second: Option

    def __call__(self, draws):
        return np.vstack([each.thresholds_and_controls(draws) for each in (self.first, self.second)])

    def change(self, moments: Moments) -> np.ndarray:
        """Change of mean and sigma from the first option to the second, shape (2, widths) [mV]."""
        half = 2 * len(self.first.geometries)
        first = self.first.mean_and_sigma(moments, slice(0, half))
        return self.second.mean_and_sigma(moments, slice(half, None)) - first


def threshold_changes(
    first: ProcessFile, second: ProcessFile, question: Question, samples: int, settings: Settings, workers: Workers
) -> dict[tuple[str, float], Estimate]:
    """Changes of the threshold's mean and sigma, by number's name and width; none where inputs of the device are correlated.

    Source: control variates, J. M. Hammersley and D. C. Handscomb, Monte Carlo Methods (1964), ch. 5 (memory).
    """
    model = Both(first=Option.of(first, question), second=Option.of(second, question))
    names = tuple(dict.fromkeys((*model.first.names, *model.second.names)))
    for option in (model.first, model.second):
        if any(set(option.population.copula.needed((name,))) & set(names) - {name} for name in names):
            return {}  # the linear part's variance would need their correlation
    block = max(SMALLEST_BLOCK, min(BLOCK, samples // GROUPS))  # short runs need groups too
    grouped, _ = run(
        Grouped(task=Experiment.prepare(model, Inputs(seed=settings.seed, names=names), Moments)),
        Plan(samples=samples, block_size=block),
        jobs=workers.jobs,
        backend=workers.backend,
        ledger=workers.ledger,
        name=f"both options on the same draws, {block} a block",
    )
    if len(grouped.sizes) < FEWEST_GROUPS:
        return {}
    whole = model.change(grouped.total())
    half = jackknife_half_width(whole, [model.change(part) for part in grouped.without_each()], grouped.group_sizes())
    return {
        (name, width): Estimate(
            value=float(whole[row, column]),
            low=float(whole[row, column] - half[row, column]),
            high=float(whole[row, column] + half[row, column]),
            level=0.95,
            n=samples,
            method=METHOD,
        )
        for row, name in enumerate(NUMBERS)
        for column, width in enumerate(question.width_um)
    }
