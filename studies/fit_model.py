"""What the tool says of measured devices: the mean threshold and the computed scatter of every distinct cell, by its own formulas.

A cell is one width, length and set of conditions; a hundred thousand rows are a few dozen cells, and only cells are computed.
"""

from dataclasses import dataclass, replace

import numpy as np

from physics import current, dopants, roughness, short_channel
from physics.device import Device
from physics.silicon import thermal_voltage
from physics.threshold import electrostatics, oxide_capacitance, threshold_voltage
from studies.errors import InputError, one_line
from studies.fit_laws import EdgeLaw, Parameter, edge_laws
from studies.fit_read import Measured
from studies.nominal import nominal_device
from studies.process_file import ProcessFile
from studies.units import SUFFIXES, si

REFUSED = 1e3  # [V]; threshold where a formula does not hold, so that a search turns back
SHORT = short_channel.LEAST_LENGTH_RATIO
SHORT_ERROR = 2.0  # of a short channel's parameter, as a logarithm, up to which the data know it


@dataclass(frozen=True, kw_only=True)
class Cells:
    """Distinct widths, lengths and conditions.

    width_um, length_um : drawn; body_bias_v, drain_v, temperature_c : conditions; arrays of one entry a cell
    of_row : cell of every row
    """

    width_um: np.ndarray
    length_um: np.ndarray
    body_bias_v: np.ndarray
    drain_v: np.ndarray
    temperature_c: np.ndarray
    of_row: np.ndarray

    def __len__(self) -> int:
        return len(self.width_um)


CONDITIONS = ("width_um", "length_um", "body_bias_v", "drain_v", "temperature_c")


def make_cells(measured: Measured) -> Cells:
    """The cells of measured rows."""
    columns = np.column_stack([getattr(measured, name) for name in CONDITIONS])
    distinct, of_row = np.unique(columns, axis=0, return_inverse=True)
    return Cells(**dict(zip(CONDITIONS, distinct.T)), of_row=of_row.reshape(-1))


class Start:
    """The start's device with closed-form edges, and what can be fitted of it.

    file, name : the process file and its device; cells : the measured cells
    short : whether a short channel may be added to a start that has none, where several lengths are measured
    Raises InputError where the physics has no answer for the start itself.
    """

    def __init__(self, file: ProcessFile, name: str, cells: Cells, *, short: bool = True):
        record = file.device(name)
        self.where = f"{one_line(file.path)}: device.{one_line(name)}"
        self.notes: list[str] = []
        if record.edge.method == "solved":
            self.notes.append('Fitted with closed-form edges: the start\'s method = "solved" was dropped.')
            record = record.model_copy(update={"edge": record.edge.model_copy(update={"method": "closed form"})})
        self.added = short and record.short_channel.kind == "none" and len(np.unique(cells.length_um)) > 1
        if self.added:
            quasi = type(record.short_channel)(kind="quasi two-dimensional")
            record = record.model_copy(update={"short_channel": quasi})
            self.notes.append(
                "Several lengths: a quasi two-dimensional short channel was added to the start, which has none."
            )
        self.record, self.cells, self.file, self.name = record, cells, file, name
        process = file.process.model_copy(update={"device": {name: record}})
        plain = ProcessFile(name=file.name, path=file.path, process=process)
        self._bases = [
            (cells.temperature_c == celsius, nominal_device(plain, name, body_bias_v=0.0, temperature_c=float(celsius)))
            for celsius in np.unique(cells.temperature_c)
        ]
        self.polarity = self._bases[0][1].polarity
        self._check_sizes()
        wide = self._bases[0][1]
        state, capacitance = electrostatics(wide), oxide_capacitance(wide.oxide_thickness)
        self.bulk_drop = float(state.bulk_charge / capacitance)
        self.depletion_width = float(state.depletion_width)
        self.slope = float(current.slope_factor(state.depletion_width, capacitance))
        self.weak_voltage = self.slope * thermal_voltage(wide.temperature)  # n kT/q
        widths = cells.width_um * SUFFIXES["um"] + si(record, "width_bias_nm")
        self.narrowest, self.widest = float(widths.min()), float(widths.max())
        self.laws = edge_laws(
            record.edge, self.weak_voltage / self.bulk_drop, self.narrowest, self.widest, record.oxide_thickness_nm
        )
        self.parameters = {parameter.key: parameter for parameter in self._parameters()}

    def _check_sizes(self):
        for name in ("width", "length"):
            least, bias = getattr(self.cells, f"{name}_um").min(), getattr(self.record, f"{name}_bias_nm")
            if least * 1e3 + bias <= 0:
                raise InputError(
                    f"{self.where}.{name}_bias_nm = {bias:g}: leaves nothing of the measured {name}_um = {least:g}"
                )

    def _parameters(self):
        """Everything but the edge that can be fitted; their order is that in which they are given up, last first."""
        record, cells = self.record, self.cells
        narrowest, shortest = 1e3 * cells.width_um.min(), 1e3 * cells.length_um.min()
        yield Parameter(
            key="oxide_charge_per_cm2", start=record.oxide_charge_per_cm2, low=-1e13, high=1e13, tolerance=np.inf
        )
        if record.gate_work_function_ev is not None:
            yield Parameter(key="gate_work_function_ev", start=record.gate_work_function_ev, low=3.0, high=6.5)
        short = record.short_channel
        if short.kind == "quasi two-dimensional":
            decay = short_channel.quasi_two_dimensional_length(
                si(record, "oxide_thickness_nm"), self._deepest_depletion(), 1.0
            )
            least = max(0.1, 1.1 * float(SHORT * decay / self._shortest()) ** 2)
            if least >= 10:
                raise InputError(f"{self.where}.short_channel: length_um = {shortest / 1e3:g} is too short a channel for any eta")
            yield Parameter(
                key="short_channel.eta",
                start=min(max(short.eta, 1.05 * least), 9.5),
                low=least,
                high=10.0,
                log=True,
                tolerance=SHORT_ERROR,
            )
        if short.kind == "charge sharing":
            most = self._deepest_junction()
            yield Parameter(
                key="junction_depth_nm",
                start=min(record.junction_depth_nm, 0.95 * most),
                low=1.0,
                high=most,
                log=True,
                tolerance=SHORT_ERROR,
            )
        bias = record.width_bias_nm
        yield Parameter(
            key="width_bias_nm",
            start=bias,
            low=bias - 0.5 * (narrowest + bias),
            high=bias + 0.7 * narrowest,
            tolerance=0.25 * narrowest,
        )
        doping = record.doping_per_cm3
        yield Parameter(
            key="doping_per_cm3", start=doping, low=doping / 4, high=min(doping * 4, 1e21), log=True, tolerance=0.25
        )
        bias = record.length_bias_nm
        yield Parameter(
            key="length_bias_nm",
            start=bias,
            low=bias - 0.25 * (shortest + bias),
            high=bias + 0.5 * shortest,
            tolerance=0.08 * shortest,
        )

    def _shortest(self):
        return self.cells.length_um.min() * SUFFIXES["um"] + si(self.record, "length_bias_nm")

    def _deepest_depletion(self):
        base = self._bases[0][1].varied(body_bias=float(self.cells.body_bias_v.max()))
        return float(electrostatics(base).depletion_width)

    def _deepest_junction(self):
        depths = np.geomspace(1, 5000, 400)
        reach = short_channel.charge_sharing_reach(self._deepest_depletion(), depths * SUFFIXES["nm"])
        holds = depths[2 * reach < 0.95 * self._shortest()]
        if not len(holds):
            raise InputError(f"{self.where}.short_channel: the shortest channel is too short for charge sharing")
        return float(holds[-1])

    def devices(self, law: EdgeLaw, values: dict[str, float]) -> list[tuple[np.ndarray, Device]]:
        """The cells' devices with some keys changed, by temperature: which cells, and an array of devices."""
        edge = law.edge(*[values[parameter.key] for parameter in law.parameters])
        record, cells = self.record, self.cells

        def value(key):
            return values.get(key, getattr(record, key))

        short = self._bases[0][1].short_channel
        if "short_channel.eta" in values:
            short = short_channel.QuasiTwoDimensional(eta=values["short_channel.eta"])
        if "junction_depth_nm" in values:
            short = short_channel.ChargeSharing(junction_depth=values["junction_depth_nm"] * SUFFIXES["nm"])
        made = []
        for mine, base in self._bases:
            changes = {}
            if "gate_work_function_ev" in values:
                changes["gate_work_function"] = values["gate_work_function_ev"]
            if "doping_per_cm3" in values:
                changes["profile"] = replace(base.profile, doping=values["doping_per_cm3"] * SUFFIXES["per_cm3"])
            made.append((mine, base.varied(
                width=cells.width_um[mine] * SUFFIXES["um"] + value("width_bias_nm") * SUFFIXES["nm"],
                length=cells.length_um[mine] * SUFFIXES["um"] + value("length_bias_nm") * SUFFIXES["nm"],
                body_bias=cells.body_bias_v[mine],
                oxide_charge=value("oxide_charge_per_cm2") * SUFFIXES["per_cm2"],
                edge=edge, short_channel=short, **changes,
            )))  # fmt: skip
        return made

    def thresholds(self, law: EdgeLaw, values: dict[str, float]) -> np.ndarray:
        """Mean threshold of every cell, polarity times the signed one [V]; REFUSED where a formula does not hold."""
        found = np.empty(len(self.cells))
        for mine, device in self.devices(law, values):
            try:
                found[mine] = self.polarity * threshold_voltage(
                    device, electrostatics(device), self.cells.drain_v[mine]
                )
            except short_channel.ChannelTooShort:
                return np.full(len(self.cells), REFUSED)
        return np.where(np.isfinite(found), found, REFUSED)

    def sigmas(self, law: EdgeLaw, values: dict[str, float]) -> tuple[np.ndarray, np.ndarray]:
        """Computed local sigma of one device of every cell without the remainder [V], and its area W L [m^2].

        The parts: dopants by their moments, and whatever the start says of edges, oxide roughness and grains.
        """
        variance, area = np.zeros(len(self.cells)), np.empty(len(self.cells))
        scatter = self.record.scatter
        for mine, device in self.devices(law, values):
            state = electrostatics(device)
            width, length = device.width, device.length
            capacitance = oxide_capacitance(device.oxide_thickness)
            part = np.zeros(mine.sum())
            if scatter.dopants != "off":
                fringe = getattr(device.edge, "shape", 0.0) if scatter.fringe_dopants else 0.0
                part = (
                    part
                    + dopants.dopant_sigma(device.profile, state.depletion_width, width, length, capacitance, fringe)
                    ** 2
                )
            if scatter.grain_mv:
                factor = roughness.VORONOI_AREA_FACTOR if scatter.grain_cells == "voronoi" else 1.0
                part = (
                    part
                    + roughness.grain_sigma(
                        si(scatter, "grain_mv"), si(scatter, "grain_area_nm2"), width, length, factor
                    )
                    ** 2
                )
            part = part + self._rough(device, state, self.cells.drain_v[mine])
            variance[mine], area[mine] = part, width * length
        return np.sqrt(variance), area

    def _rough(self, device, state, drain):
        """Variance by rough edges and a rough oxide, by the threshold's derivatives."""
        scatter, total = self.record.scatter, 0.0

        def slope(name, step):
            up, down = (device.varied(**{name: getattr(device, name) + sign * step}) for sign in (1, -1))
            return (threshold_voltage(up, state, drain) - threshold_voltage(down, state, drain)) / (2 * step)

        for key, name, along in (("gate_edge", "length", device.width), ("active_edge", "width", device.length)):
            if getattr(scatter, f"{key}_nm"):
                sigma = roughness.edge_pair_sigma(
                    si(scatter, f"{key}_nm"), si(scatter, f"{key}_correlation_nm"), along, scatter.edge_correlation
                )
                total = total + (slope(name, 1e-10) * sigma) ** 2
        if scatter.oxide_roughness_nm:
            sigma = roughness.oxide_roughness_sigma(
                si(scatter, "oxide_roughness_nm"),
                si(scatter, "oxide_roughness_correlation_nm"),
                device.width,
                device.length,
            )
            total = total + (slope("oxide_thickness", 1e-12) * sigma) ** 2
        return total
