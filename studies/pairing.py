"""Chips of matched pairs: every pair's offset, or mirror error, from its two drawn devices.

All pairs of a chip share lot, wafer and die; the two devices of a pair differ by every cause at device level, finger by
finger, by the distance term, and by the die's linear gradient unless a common-centroid layout cancels it.
"""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from mc.codec import storable
from mc.experiment import Inputs
from mc.intervals import Estimate, Summary, fraction_exact
from mc.plan import Block
from mc.tally import Grid, Tally
from physics.current import Channel
from physics.matching import gate_voltage_at, saturated_current, saturated_efficiency
from studies.geometry import Geometry
from studies.population import Population
from studies.process_file import LEVELS

SIDES = ("a", "b")
DISTANCE, GRADIENT = "pair.distance", "pair.gradient.die"
NEWTON_STEPS = 3  # of the fingers' common gate voltage, from a start within a few mV


@dataclass(frozen=True, kw_only=True)
class Candidate:
    """A width to be judged. finger : geometry of one finger; current : drain current of one device [A]"""

    width_um: float
    finger: Geometry
    current: float


@dataclass(frozen=True, kw_only=True)
class Arrangement:
    """What does not change between widths.

    population : devices; mirror : current mirror instead of differential pair
    pairs, fingers : per chip, per device [1]; drain_voltage : [V]
    distance_sigma : of the threshold difference by distance [V]
    gradient_sigma : of the threshold difference by the die's gradient [V]; 0 in a common-centroid layout
    """

    population: Population
    mirror: bool
    pairs: int
    fingers: int
    drain_voltage: float
    distance_sigma: float
    gradient_sigma: float

    def die_names(self) -> tuple[str, ...]:
        """Inputs that all pairs of a chip share."""
        names = [name for level in LEVELS[:-1] for name in self.population.names(level=level)]
        return (*names, *([GRADIENT] if self.gradient_sigma else []))

    def pair_names(self) -> tuple[str, ...]:
        """Inputs of every pair, by pair, side and finger."""
        local = self.population.names(level="device")
        names = [
            self._local(name, pair, side, finger)
            for pair in range(self.pairs)
            for side in SIDES
            for finger in range(self.fingers)
            for name in local
        ]
        return (*names, *([f"{DISTANCE}.{pair}" for pair in range(self.pairs)] if self.distance_sigma else []))

    @staticmethod
    def _local(name: str, pair: int, side: str, finger: int) -> str:
        return f"{name}/pair {pair}/{side}/finger {finger}"

    @property
    def evaluations_per_chip(self) -> int:
        """Device evaluations that one chip costs at one width; fingers count as devices."""
        return 2 * self.pairs * self.fingers

    def device(self, draws, die, pair: int, side: str, candidate: Candidate, silicon) -> list[Channel]:
        """The fingers of one device."""
        population, channels = self.population, []
        for finger in range(self.fingers):
            mine = {name: self._local(name, pair, side, finger) for name in population.names(level="device")}
            local = {name: draws[source] for name, source in mine.items() if source in draws}
            own = {**die, **local}
            mine_silicon = population.silicon(own) if population.silicon_inputs & set(local) else silicon
            channels += population.channels(own, candidate.finger, mine_silicon, [self.drain_voltage])
        return channels

    def errors(self, draws, candidate: Candidate):
        """Offset [V] or relative current error [1] of every pair of every chip, one (chips,) array a pair."""
        die = {name: draws[name] for name in self.die_names() if name in draws}
        silicon = self.population.silicon(die)
        gradient = self.gradient_sigma * draws.get(GRADIENT, 0.0)
        for pair in range(self.pairs):
            one, other = (self.device(draws, die, pair, side, candidate, silicon) for side in SIDES)
            apart = gradient + self.distance_sigma * draws.get(f"{DISTANCE}.{pair}", 0.0)
            gate = common_gate_voltage(one, candidate.current)
            if self.mirror:
                yield total_current(other, gate + apart) / candidate.current - 1
            else:
                yield gate + apart - common_gate_voltage(other, candidate.current)


def total_current(fingers: list[Channel], gate_voltage):
    """Current of a device's fingers in parallel [A]."""
    return sum(saturated_current(finger, gate_voltage) for finger in fingers)


def common_gate_voltage(fingers: list[Channel], current):
    """Gate voltage at which the fingers together carry a current [V]: closed for one finger, Newton for several."""
    each = [gate_voltage_at(finger, current / len(fingers)) for finger in fingers]
    if len(fingers) == 1:
        return each[0]
    gate = sum(each) / len(fingers)
    for _ in range(NEWTON_STEPS):
        currents = [saturated_current(finger, gate) for finger in fingers]
        total = sum(currents)
        slope = sum(part * saturated_efficiency(finger, gate) for part, finger in zip(currents, fingers))
        gate = gate - np.log(total / current) * total / slope
    return gate


def current_at_efficiency(channel: Channel, efficiency: float) -> float | None:
    """Current of a nominal device at a wanted gm/I [A]; None when no current gives it."""
    kt = channel.slope_factor * channel.thermal_voltage
    low, high = channel.threshold - 40 * kt, channel.threshold + 400 * kt

    def excess(gate):
        return float(saturated_efficiency(channel, gate)) - efficiency

    if not (excess(low) > 0 > excess(high)):
        return None
    return float(saturated_current(channel, brentq(excess, low, high)))


@storable
@dataclass(frozen=True, kw_only=True, eq=False)
class PairTally:
    """Sums over chips, for every candidate: the worst pair of each chip, all pairs, and how many stayed inside.

    worst : largest size of an error on each chip; every : errors of all pairs, signed and as sizes, two rows a candidate
    chips_inside, pairs_inside : counts, shape (candidates,)
    """

    worst: Tally
    every: Tally
    chips_inside: np.ndarray
    pairs_inside: np.ndarray

    def __add__(self, other):
        return PairTally(
            worst=self.worst + other.worst,
            every=self.every + other.every,
            chips_inside=self.chips_inside + other.chips_inside,
            pairs_inside=self.pairs_inside + other.pairs_inside,
        )

    def chip_yield(self, row: int) -> Estimate:
        """Share of chips whose pairs are all inside."""
        return fraction_exact(int(self.chips_inside[row]), self.worst.count)

    def pair_yield(self, row: int) -> Estimate:
        """Share of pairs inside; pairs of one chip are treated as independent, which given the die they are."""
        return fraction_exact(int(self.pairs_inside[row]), self.every.count)

    def worst_quantile(self, row: int, probability: float) -> Estimate:
        """Limit at which a share of chips would stay inside."""
        return Summary(self.worst, row).quantile(probability)


@dataclass(frozen=True, kw_only=True)
class PairChips:
    """Task for the runner: tally a block of chips.

    arrangement, candidates : what is judged; limit : [V] or [1]; inputs : draws of dies and pairs
    grids : of the worst pair and of all pairs
    """

    arrangement: Arrangement
    candidates: tuple[Candidate, ...]
    limit: float
    inputs: Inputs
    grids: tuple[Grid, Grid]

    @classmethod
    def prepare(cls, arrangement, candidates, limit, inputs) -> "PairChips":
        """A task whose grids come from the first slice of block 0, which the run will see again."""
        errors = _errors(arrangement, candidates, next(inputs.slices(Block(0, inputs.slice_size))))
        worst = np.abs(errors).max(axis=1)
        return cls(
            arrangement=arrangement,
            candidates=candidates,
            limit=limit,
            inputs=inputs,
            grids=(Grid.from_pilot(worst), Grid.from_pilot(_signed_and_size(errors))),
        )

    def __call__(self, block: Block) -> PairTally:
        total = None
        for draws in self.inputs.slices(block):
            errors = _errors(self.arrangement, self.candidates, draws)
            worst = np.abs(errors).max(axis=1)
            tally = PairTally(
                worst=Tally.of(self.grids[0], [worst]),
                every=Tally.of(self.grids[1], [_signed_and_size(errors)]),
                chips_inside=(worst <= self.limit).sum(axis=1),
                pairs_inside=(np.abs(errors) <= self.limit).sum(axis=(1, 2)),
            )
            total = tally if total is None else total + tally
        return total


def _errors(arrangement: Arrangement, candidates, draws) -> np.ndarray:
    """Errors of shape (candidates, pairs, chips)."""
    return np.array([list(arrangement.errors(draws, candidate)) for candidate in candidates])


def _signed_and_size(errors) -> np.ndarray:
    """Errors of all pairs and their sizes, shape (2 candidates, pairs * chips)."""
    flat = errors.reshape(len(errors), -1)
    return np.stack([flat, np.abs(flat)], axis=1).reshape(2 * len(errors), -1)
