"""Why two process options differ: the threshold's mean and variance, shared out among the ingredients that differ.

Every mixture of the two options sees the same draws, so that shares of small effects stand clear of the noise.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import NamedTuple

import numpy as np

from mc.experiment import Experiment, Inputs
from mc.groups import GROUPS, Grouped, jackknife_half_width
from mc.intervals import Estimate
from mc.plan import Plan
from mc.runner import Progress, results, run
from mc.shapley import shapley_shares
from mc.tally import Moments
from studies.ingredients import MOST, Between
from studies.population import Population
from studies.process_file import ProcessFile
from studies.settings import Settings, Workers
from studies.spread import Thresholds

SAMPLES = 2**17
REST = "all other differences"


@dataclass(frozen=True, kw_only=True)
class Place:
    """Where the options are compared.

    device : name in both; width_um : drawn widths; length_um : drawn length
    body_bias_v, drain_v, temperature_c : conditions; neighbours : only what differs between neighbours, for pairs
    """

    device: str
    width_um: tuple[float, ...]
    length_um: float
    body_bias_v: float
    drain_v: float
    temperature_c: float | None
    neighbours: bool


@dataclass(frozen=True, kw_only=True)
class Share:
    """One ingredient's part of the change from the first option to the second, at one width."""

    width_um: float
    ingredient: str
    mean_mv: Estimate
    variance_mv2: Estimate


class Breakdown(NamedTuple):
    """Every ingredient's shares, width by width, and the devices that were evaluated for them."""

    shares: list[Share]
    evaluations: int


def breakdown(
    first: ProcessFile, second: ProcessFile, place: Place, settings: Settings, workers: Workers, progress: Progress
) -> Breakdown:
    """Shares of every ingredient that differs; they add up to the change. Empty where nothing differs.

    Where more than six differ, the five with the largest effects are told apart and the rest is one ingredient.
    Raises InputError where a mixture has no physical answer.
    """
    between = Between(first, second, place.device)
    names = between.names()
    if not names:
        return Breakdown([], 0)
    singles = [(), *((name,) for name in names)] if len(names) > MOST else []
    ingredients = _grouped(names, _moments(between, singles, place, settings, workers)) if singles else _each(names)
    numbers = range(len(ingredients))
    sets = [chosen for size in range(len(numbers) + 1) for chosen in combinations(numbers, size)]
    mixtures = [tuple(name for number in chosen for name in ingredients[number][1]) for chosen in sets]
    moments = _moments(between, mixtures, place, settings, workers, progress)
    known = dict(zip(map(frozenset, sets), moments))
    sizes = np.full(GROUPS, SAMPLES // GROUPS)
    found = []
    for (name, _), share in zip(ingredients, shapley_shares(known.__getitem__, len(ingredients))):
        half = jackknife_half_width(share[0], share[1:], sizes)
        for column, width in enumerate(place.width_um):
            mean, variance = (_estimate(share[0][row, column], half[row, column]) for row in (0, 1))
            found.append(Share(width_um=width, ingredient=name, mean_mv=mean, variance_mv2=variance))
    return Breakdown(found, (len(singles) + len(mixtures)) * len(place.width_um) * SAMPLES)


def _each(names: Sequence[str]) -> list[tuple[str, tuple[str, ...]]]:
    return [(name, (name,)) for name in names]


def _grouped(names: list[str], moments) -> list[tuple[str, tuple[str, ...]]]:
    """The ingredients with the largest effect when swapped alone, and the rest as one."""
    base, *alone = (each[0] for each in moments)
    scale = np.abs(base).max(axis=1)
    effect = {name: (np.abs(each - base).max(axis=1) / scale).sum() for name, each in zip(names, alone)}
    largest = sorted(names, key=effect.__getitem__, reverse=True)[: MOST - 1]
    told = [name for name in names if name in largest]
    return [*_each(told), (REST, tuple(name for name in names if name not in largest))]


def _moments(between, mixtures, place, settings, workers, progress: Progress = lambda *_: None) -> list[np.ndarray]:
    """Mean [mV] and variance [mV^2] of every mixture at every width, of all samples and without each group of them.

    Returns an array of shape (1 + groups, 2, widths) a mixture.
    """
    items = {" + ".join(chosen): (between.option(chosen), place, settings.seed) for chosen in mixtures}
    return results(
        _moments_of,
        items,
        jobs=workers.jobs,
        backend=workers.backend,
        progress=progress,
        ledger=workers.ledger,
        name=f"mixtures of the options, {place}",
    )


def _moments_of(item: tuple[ProcessFile, Place, int]) -> np.ndarray:
    option, place, seed = item
    population = Population(option, place.device, body_bias_v=place.body_bias_v, temperature_c=place.temperature_c)
    names = tuple(item.name for item in population.inputs if not place.neighbours or item.level == "device")
    model = Thresholds(
        population=population,
        geometries=tuple(population.geometry(width, place.length_um) for width in place.width_um),
        drain_voltage=place.drain_v,
        groups=(names,),
    )
    experiment = Experiment.prepare(model, Inputs(seed=seed, names=names, copula=population.copula), Moments)
    grouped, _ = run(Grouped(task=experiment), Plan(samples=SAMPLES, block_size=SAMPLES // GROUPS))
    return np.array([_mean_and_variance(part) for part in (grouped.total(), *grouped.without_each())])


def _mean_and_variance(part: Moments) -> np.ndarray:
    mean, second, _, _ = part.central_moments()
    return np.array([1e3 * mean, 1e6 * second * part.count / (part.count - 1)])


def _estimate(value: float, half: float) -> Estimate:
    return Estimate(
        value=float(value),
        low=float(value - half),
        high=float(value + half),
        level=0.95,
        n=SAMPLES,
        method="Shapley share on common draws, delete-a-group jackknife",
    )
