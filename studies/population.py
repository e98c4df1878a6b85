"""From draws to devices and their thresholds and currents.

`silicon` computes what every width shares, once; `devices`, `thresholds` and `channel` add one geometry. An input that
is not among the draws stays at its nominal value, so nominal devices and runs in which only some inputs vary go through
the same door.
"""

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from mc.correlation import Copula
from physics import current, dopants
from physics.device import Device
from physics.silicon import thermal_voltage
from physics.threshold import Electrostatics, electrostatics, oxide_capacitance, threshold_voltage
from studies.errors import one_line
from studies.geometry import Geometry, make_geometry
from studies.nominal import nominal_device
from studies.process_file import ProcessFile
from studies.units import si
from studies.variation import RandomInput, copula, random_inputs

Draws = Mapping[str, np.ndarray]
SILICON_CAUSES = ("oxide_thickness", "doping", "flat_band")  # what `Population.silicon` reads
MOBILITY_EXPONENT = -1.5  # phonon-limited mobility against temperature; common practice


class Silicon(NamedTuple):
    """What every width shares: devices without dimensions, and their electrostatics."""

    device: Device
    state: Electrostatics


class Population:
    """The devices of one kind that a process option makes, at one temperature and body bias.

    file, device : the process option and the device's name in it
    body_bias_v : reverse body bias, a magnitude
    temperature_c : overrides the file's temperature; None keeps it
    Raises InputError where the physics has no answer for the nominal device.
    """

    def __init__(self, file: ProcessFile, device: str, *, body_bias_v: float = 0.0, temperature_c: float | None = None):
        self.where = f"{one_line(file.path)}: device.{one_line(device)}"
        self.record = file.device(device)
        self.inputs: tuple[RandomInput, ...] = random_inputs(file, device)
        self.copula: Copula = copula(file)
        self.nominal = nominal_device(file, device, body_bias_v=body_bias_v, temperature_c=temperature_c)
        self._varied = {cause: self._inputs_of(cause) for cause in {item.cause for item in self.inputs if item.law}}
        self.silicon_inputs = frozenset(item.name for item in self.inputs if item.cause in SILICON_CAUSES)
        self._scatter = {item.cause: item.name for item in self.inputs if not item.law}

    def _inputs_of(self, cause):
        return [item for item in self.inputs if item.cause == cause]

    def names(self, *, level: str | None = None, cause: str | None = None) -> tuple[str, ...]:
        """Names of the random inputs: all, those of one level, those of one cause."""
        return tuple(item.name for item in self.inputs if level in (None, item.level) and cause in (None, item.cause))

    def geometry(self, width_um: float, length_um: float) -> Geometry:
        """A drawn width and length; raises InputError, see `make_geometry`."""
        return make_geometry(self.nominal, self.record, self.inputs, self.where, width_um, length_um)

    def _deviated(self, draws: Draws, cause: str, nominal=0.0):
        """`nominal` and the deviations from it, the levels added up."""
        total = nominal
        for item in self._varied.get(cause, ()):
            if item.name in draws:
                total = total + item.law.from_normal(draws[item.name])
        return total

    def _normal(self, draws: Draws, cause: str):
        return draws.get(self._scatter.get(cause))

    def silicon(self, draws: Draws) -> Silicon:
        """Doping, oxide and flat band of the devices that the draws describe, arrays of the draws' shape."""
        device = self.nominal.varied(
            oxide_thickness=self.nominal.oxide_thickness * self._deviated(draws, "oxide_thickness", 1.0),
            profile=self.nominal.profile.scaled(self._deviated(draws, "doping", 1.0)),
            flat_band_shift=self._deviated(draws, "flat_band"),
        )
        return Silicon(device, electrostatics(device))

    def devices(self, draws: Draws, geometry: Geometry, silicon: Silicon) -> Device:
        """Devices of one geometry: dimensions with their variation and rough edges, oxide with its roughness, its edge."""
        width = self._deviated(draws, "width", geometry.width)
        length = self._deviated(draws, "length", geometry.length)
        if (normal := self._normal(draws, "gate_edges")) is not None:
            length = length + geometry.gate_edge_sigma * normal
        if (normal := self._normal(draws, "active_edges")) is not None:
            width = width + geometry.active_edge_sigma * normal
        thickness = silicon.device.oxide_thickness
        if (normal := self._normal(draws, "oxide_roughness")) is not None:
            thickness = thickness * (1 + geometry.oxide_sigma * normal)
        return silicon.device.varied(width=width, length=length, oxide_thickness=thickness, edge=geometry.edge)

    def scatter(self, draws: Draws, geometry: Geometry, device: Device, state: Electrostatics):
        """Signed shift of the threshold by dopants, grains and the measured remainder [V]."""
        shift = 0.0
        if (normal := self._normal(draws, "dopants")) is not None:
            shift = self._dopant_scatter(normal, geometry, device, state)
        if (normal := self._normal(draws, "grains")) is not None:
            shift = shift + geometry.grain_sigma * normal
        if (normal := self._normal(draws, "remainder")) is not None:
            shift = shift + geometry.remainder_sigma * normal
        return shift

    def _dopant_scatter(self, normal, geometry, device, state):
        place = device.profile, state.depletion_width, device.width, device.length
        capacitance = oxide_capacitance(device.oxide_thickness)
        root, sigma = dopants.dopant_root_and_sigma(*place, capacitance, geometry.fringe_shape)
        scatter = normal
        if geometry.counted is not None:
            scatter = geometry.counted.at_inverse_root(normal, geometry.skewness_ratio / root)
        scatter = geometry.sigma_ratio * sigma * scatter
        return scatter if device.polarity == 1 else -scatter

    def thresholds(self, draws: Draws, geometry: Geometry, silicon: Silicon, drain_voltage: float):
        """Threshold voltages [V], signed, one for every draw."""
        device = self.devices(draws, geometry, silicon)
        shift = self.scatter(draws, geometry, device, silicon.state)
        return threshold_voltage(device, silicon.state, drain_voltage) + shift

    def channels(self, draws: Draws, geometry: Geometry, silicon: Silicon, drain_voltages) -> list[current.Channel]:
        """What currents need, at each of several drain voltages; the device must have a mobility."""
        device, state = self.devices(draws, geometry, silicon), silicon.state
        shift = self.scatter(draws, geometry, device, state)
        mobility = (
            si(self.record, "mobility_cm2_per_vs")
            * (device.temperature / 300) ** MOBILITY_EXPONENT
            * self._deviated(draws, "mobility", 1.0)
        )
        if (normal := self._normal(draws, "current_factor")) is not None:
            mobility = mobility * (1 + geometry.current_factor_sigma * normal)
        capacitance = oxide_capacitance(device.oxide_thickness)
        slope = current.slope_factor(state.depletion_width, capacitance)
        kt = thermal_voltage(device.temperature)
        drop = np.inf
        if self.record.saturation_velocity_cm_per_s is not None:
            drop = current.critical_drop(mobility, device.length, si(self.record, "saturation_velocity_cm_per_s"))
        specific = current.specific_current(slope, mobility, capacitance, device.width, device.length, kt)
        return [
            current.Channel(
                threshold=device.polarity * (threshold_voltage(device, state, voltage) + shift),
                slope_factor=slope,
                specific_current=specific,
                thermal_voltage=kt,
                mobility_degradation=self.record.mobility_degradation_per_v,
                critical_drop=drop,
            )
            for voltage in drain_voltages
        ]
