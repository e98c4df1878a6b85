"""The operating point of a pair at each width, from the nominal device at its own dimensions."""

from functools import cache

import numpy as np

from physics.gate_delay import gate_capacitance
from physics.matching import gate_voltage_at, largest_current, saturated_efficiency, saturation_voltage
from physics.threshold import oxide_capacitance
from studies.errors import InputError
from studies.pair_question import BIASES, Question
from studies.pairing import Arrangement, Candidate, current_at_efficiency
from studies.units import SUFFIXES, si

LARGEST_SHARE = 0.5  # of the current that no gate voltage exceeds; beyond it the model says nothing of use


class Biasing:
    """Candidates of one length.

    question, arrangement : what is asked; length_um : drawn length
    """

    def __init__(self, question: Question, arrangement: Arrangement, length_um: float):
        self.question, self.arrangement, self.length_um = question, arrangement, length_um
        self.population = arrangement.population
        if self.population.record.mobility_cm2_per_vs is None:
            raise InputError(f"{self.population.where}: a pair's bias needs 'mobility_cm2_per_vs'")
        self._silicon = self.population.silicon({})
        self._nominal = cache(self._nominal_of)  # a geometry's table of dopants is worth keeping

    def _nominal_of(self, width_um: float):
        geometry = self.population.geometry(width_um / self.question.fingers, self.length_um)
        drain = [self.question.drain_v]
        return geometry, self.population.channels({}, geometry, self._silicon, drain)[0]

    def candidate(self, width_um: float) -> Candidate:
        """The bias current at a width. Raises InputError for a bias that the device cannot carry."""
        geometry, channel = self._nominal(width_um)
        question, fingers = self.question, self.question.fingers
        if question.gm_over_i_per_v is not None:
            each = current_at_efficiency(channel, question.gm_over_i_per_v)
            if each is None:
                most = 1 / (float(channel.slope_factor) * channel.thermal_voltage)
                raise self._refused(f"no current gives it at width_um = {width_um:g}; the most is {most:.1f}")
            current = fingers * each
        elif question.current_per_square_ua is not None:
            current = question.current_per_square_ua * SUFFIXES["ua"] * width_um / self.length_um
        else:
            current = question.drain_current_ua * SUFFIXES["ua"]
        most = LARGEST_SHARE * fingers * float(largest_current(channel))
        if current > most:
            raise self._refused(f"at width_um = {width_um:g} the device carries {most * 1e6:.3g} uA at most")
        return Candidate(width_um=width_um, finger=geometry, current=current)

    def _refused(self, why: str) -> InputError:
        bias = next(key for key in BIASES if getattr(self.question, key) is not None)
        return InputError(f"{self.population.where}: {bias} = {getattr(self.question, bias):g}: {why}")

    def operating_point(self, width_um: float) -> dict[str, float]:
        """Nominal drain current, gm/I, gate voltage and the drain voltage that saturates it, as columns."""
        current = self.candidate(width_um).current
        _, channel = self._nominal(width_um)
        gate = gate_voltage_at(channel, current / self.question.fingers)
        return {
            "drain_current_ua": current / SUFFIXES["ua"],
            "gm_over_i_per_v": float(saturated_efficiency(channel, gate)),
            "gate_v": float(gate),
            "saturation_v": float(saturation_voltage(channel, gate)),
        }

    def electrical_width_um(self, width_um: float) -> float:
        """Electrical width of one device, its fingers together."""
        return self.question.fingers * self._nominal(width_um)[0].width / SUFFIXES["um"]

    def gate_capacitance_ff(self, width_um: float) -> float:
        """Gate capacitance of one device."""
        geometry, _ = self._nominal(width_um)
        device, record = self._silicon.device, self.population.record
        overlap = si(record, "overlap_capacitance_ff_per_um")
        capacitance = oxide_capacitance(device.oxide_thickness)
        each = gate_capacitance(capacitance, geometry.width, geometry.length, overlap)
        return float(np.asarray(self.question.fingers * each / SUFFIXES["ff"]))
