"""A chip of many equal paths: what one die does to the delay of its paths, by conditioning.

Given a die, the stages of a path are independent, so the cumulants of their delays add. A path of N stages, launched
by either edge, is pulled by n and p devices in turn: ceil(N/2) of one and floor(N/2) of the other. The two edges meet
different devices, so a chip has 2 P independent path delays and passes a period T with F_a(T)^P F_b(T)^P.

Approximations: a stage's load is that of its die's mean devices (the scatter of single gates averages over the fan-out
and both devices). The local causes' effects on a delay multiply, corrected by what a sample of the nominal die shows.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import log_ndtr

from mc.cumulants import (
    NODES,
    Interaction,
    measured_interaction,
    product_cumulants,
    score_from_value,
    score_of_largest,
    standardise,
    value_from_score,
)
from mc.streams import Streams
from physics.gate_delay import effective_drive_current, gate_capacitance, stage_delay
from physics.threshold import oxide_capacitance
from studies.geometry import Geometry
from studies.population import Population, Silicon
from studies.units import si

INTERACTION_SAMPLES = 32768


@dataclass(frozen=True, kw_only=True)
class Side:
    """One of the two devices of a stage."""

    population: Population
    geometry: Geometry


@dataclass(frozen=True, kw_only=True)
class Stage:
    """An inverting stage and the path it stands in.

    pull_down, pull_up : the n and the p device
    stages : per path [1]; fan_out : gates driven by each stage [1]
    wire_capacitance : per stage [F]; supply : [V]
    interactions : corrections of either side's cumulants, see `with_interactions`
    """

    pull_down: Side
    pull_up: Side
    stages: int
    fan_out: float
    wire_capacitance: float
    supply: float
    interactions: tuple[Interaction, Interaction] = (Interaction(), Interaction())

    @property
    def sides(self) -> tuple[Side, Side]:
        """Both devices, the n one first."""
        return self.pull_down, self.pull_up

    @property
    def evaluations_per_die(self) -> int:
        """Device evaluations that one die costs."""
        return sum(1 + NODES * len(side.population.names(level="device")) for side in self.sides)

    def load(self, die) -> np.ndarray:
        """Load of a stage on every die [F]. die : draws above device level, each (dies,)."""
        total = self.wire_capacitance
        for side in self.sides:
            population, geometry = side.population, side.geometry
            device = population.devices(die, geometry, population.silicon(die))
            gate = gate_capacitance(
                oxide_capacitance(device.oxide_thickness),
                device.width,
                device.length,
                si(population.record, "overlap_capacitance_ff_per_um"),
            )
            junction = si(population.record, "junction_capacitance_ff_per_um") * geometry.drawn_width
            total = total + self.fan_out * gate + junction
        return total

    def delay(self, side: Side, draws, silicon: Silicon, load) -> np.ndarray:
        """Delay of a stage pulled by one side [s]; draws and load broadcast."""
        half, full = side.population.channels(draws, side.geometry, silicon, (self.supply / 2, self.supply))
        return stage_delay(load, self.supply, effective_drive_current(half, full, self.supply))

    def _local_model(self, side: Side, die, load):
        """Delay of a stage as a function of the device-level draws alone."""
        population = side.population
        die_silicon = population.silicon(die)

        def model(local):
            draws = {**die, **local}
            silicon = population.silicon(draws) if population.silicon_inputs & set(local) else die_silicon
            return self.delay(side, draws, silicon, load)

        return model

    def with_interactions(self, seed: int) -> "Stage":
        """The stage with the interactions of its local causes measured on the nominal die, for use on every die."""
        load = self.load({})
        found = []
        for side in self.sides:
            streams = Streams(seed, 0, side.population.names(level="device"))
            found.append(measured_interaction(self._local_model(side, {}, load), streams.take(INTERACTION_SAMPLES)))
        return replace(self, interactions=tuple(found))

    def stage_cumulants(self, die) -> list[np.ndarray]:
        """First four cumulants of a stage's delay on every die, shape (4, dies) [s, s^2, s^3, s^4], for either side."""
        load = self.load(die)
        return [
            interaction.applied(
                product_cumulants(self._local_model(side, die, load), side.population.names(level="device"))
            )
            for side, interaction in zip(self.sides, self.interactions)
        ]

    def path_cumulants(self, die) -> list[np.ndarray]:
        """Cumulants of a path's delay on every die, shape (4, dies), for each of the two launching edges."""
        down, up = self.stage_cumulants(die)
        many, few = (self.stages + 1) // 2, self.stages // 2
        return [many * down + few * up, few * down + many * up]


def slowest_path(path_cumulants, normals, paths: int) -> np.ndarray:
    """Delay of each chip's slowest path [s].

    path_cumulants : see `Stage.path_cumulants`; normals : one standard normal a chip for each edge; paths : P
    """
    slowest = []
    for cumulants, normal in zip(path_cumulants, normals):
        mean, sigma, skew, excess = standardise(cumulants)
        slowest.append(mean + sigma * value_from_score(score_of_largest(normal, paths), skew, excess))
    return np.maximum(*slowest)


def fail_probability(path_cumulants, period, paths: int) -> np.ndarray:
    """Probability that a chip on each die misses a period; the failure, since near a yield of one it keeps its digits.

    period : [s], broadcasts with (dies,); paths : P
    Returns probability [1] of the broadcast shape.
    """
    log_pass = 0.0
    for cumulants in path_cumulants:
        mean, sigma, skew, excess = standardise(cumulants)
        log_pass = log_pass + paths * log_ndtr(score_from_value((period - mean) / sigma, skew, excess))
    return -np.expm1(log_pass)
