"""How far each device is inside its limits, by reason: the limit states of the tail."""

from dataclasses import dataclass

import numpy as np

from physics.current import drain_current, off_current
from studies.geometry import Geometry
from studies.loss_question import Question
from studies.population import Population
from studies.units import SUFFIXES

REASONS = ("vth_low", "vth_high", "drive", "leakage")
SIDES = {
    "fast": ("vth_low", "leakage"),
    "slow": ("vth_high", "drive"),
}  # reasons that a shift of the threshold moves alike
FARTHEST = 8.0  # sigmas at which a cause is held: nothing that counts lies beyond, but dimensions may end there


@dataclass(frozen=True, kw_only=True)
class Margins:
    """Margins of one geometry; positive inside. Each is in its own unit, relative to the limit where it is a current.

    population, geometry, question : what is asked of which devices
    limits : limit by reason, thresholds as magnitudes [V], currents [A]
    """

    population: Population
    geometry: Geometry
    question: Question
    limits: dict[str, float]

    @classmethod
    def of(cls, population: Population, geometry: Geometry, question: Question) -> "Margins":
        """Margins with the limits that are relative to nominal made absolute."""
        bare = cls(population=population, geometry=geometry, question=question, limits={})
        nominal = bare._values({})
        limits = {}
        if question.vth_window_mv is not None:
            window = question.vth_window_mv * SUFFIXES["mv"]
            limits = {"vth_low": nominal["vth"] - window, "vth_high": nominal["vth"] + window}
        if question.vth_low_v is not None:
            limits["vth_low"] = question.vth_low_v
        if question.vth_high_v is not None:
            limits["vth_high"] = question.vth_high_v
        if question.drive_floor_ua is not None:
            limits["drive"] = question.drive_floor_ua * SUFFIXES["ua"]
        if question.drive_floor_percent is not None:
            limits["drive"] = question.drive_floor_percent * SUFFIXES["percent"] * nominal["drive"]
        if question.leakage_ceiling_na is not None:
            limits["leakage"] = question.leakage_ceiling_na * SUFFIXES["na"]
        if question.leakage_ceiling_times is not None:
            limits["leakage"] = question.leakage_ceiling_times * nominal["leakage"]
        return cls(population=population, geometry=geometry, question=question, limits=limits)

    @property
    def reasons(self) -> tuple[str, ...]:
        """The reasons for which a device can fail here."""
        return tuple(reason for reason in REASONS if reason in self.limits)

    def _values(self, draws) -> dict:
        """Threshold as a magnitude [V], drive and leakage [A]; currents only where a supply is given."""
        population, silicon = self.population, self.population.silicon(draws)
        supply = self.question.supply_v
        if supply is None:
            signed = population.thresholds(draws, self.geometry, silicon, self.question.drain_v)
            return {"vth": population.nominal.polarity * signed}
        at_drain, at_supply = population.channels(draws, self.geometry, silicon, (self.question.drain_v, supply))
        return {
            "vth": at_drain.threshold,
            "drive": drain_current(at_supply, supply, supply),
            "leakage": off_current(at_supply, supply),
        }

    def by_reason(self, draws) -> dict[str, np.ndarray]:
        """Margin of every device for every reason."""
        values, limits = self._values(draws), self.limits
        margins = {
            "vth_low": lambda: values["vth"] - limits["vth_low"],
            "vth_high": lambda: limits["vth_high"] - values["vth"],
            "drive": lambda: np.log(values["drive"] / limits["drive"]),
            "leakage": lambda: np.log(limits["leakage"] / values["leakage"]),
        }
        return {reason: margins[reason]() for reason in self.reasons}


@dataclass(frozen=True, kw_only=True)
class LimitState:
    """A function of independent standard normals for the rare-event estimator.

    margins : see `Margins`; names : inputs in the order of the columns; fixed : draws that stay, scalars by name
    reasons : the reasons that count
    """

    margins: Margins
    names: tuple[str, ...]
    fixed: dict[str, float]
    reasons: tuple[str, ...]

    def __call__(self, points):
        held = np.clip(points.T, -FARTHEST, FARTHEST)
        margins = self.margins.by_reason({**self.fixed, **dict(zip(self.names, np.ascontiguousarray(held)))})
        return np.minimum.reduce([margins[reason] for reason in self.reasons])
