"""From a process file to devices with single dopants, to what the fast model says of the same dopants, and to one solution."""

from dataclasses import dataclass, replace

import numpy as np

from mc.codec import storable
from mc.streams import generator
from physics import dopants
from physics.atom_dopants import Dopants, place_dopants
from physics.atom_mesh import AtomDevice, atom_mesh
from physics.atomistic import UniformThreshold, solve_device, uniform_threshold
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, TrenchWall
from physics.threshold import oxide_capacitance
from studies.errors import InputError, one_line
from studies.geometry import Geometry
from studies.population import Population
from studies.process_file import ProcessFile, Scatter, ShortChannel, Variation
from studies.section import edge_section
from studies.units import SUFFIXES

FIELD = 2.0  # depletion widths beside each edge; three more move the threshold by 2 mV, the shifts by 0.5 mV
KEYS = {"mesh_spacing": "mesh_nm", "the field's width": "field_nm"}  # of the question


@dataclass(frozen=True, kw_only=True)
class Kind:
    """Devices of one width, and what the fast model needs to know of their dopants.

    width_um : drawn width; geometry : of the fast model
    depletion_width : of the fast model [m]; one_shift : of the threshold by one dopant at the surface [V]
    mean_weight, fast_channel_sigma : mean sum of the weights of the dopants under the channel [1], and the sigma of the
        threshold by them [V]
    fast_sigma : sigma of the fast model's law [V], fringe and solved edges included where the file asks for them
    """

    width_um: float
    device: AtomDevice
    geometry: Geometry
    depletion_width: float
    one_shift: float
    mean_weight: float
    fast_channel_sigma: float
    fast_sigma: float

    def placed(self, seed: int, number: int) -> Dopants:
        """The dopants of one device. number : of the device, from 0"""
        return place_dopants(self.device, generator(seed, f"dopants one by one, {self.width_um:.15g} um", number))

    def fast_shift(self, places: Dopants) -> float:
        """What the fast model says of these dopants: shift of the threshold's magnitude [V], zero on average."""
        under = np.abs(places.across) <= self.device.width / 2
        weights = np.clip(1 - places.depth[under] / self.depletion_width, 0, None)
        return float(self.one_shift * (weights.sum() - self.mean_weight))

    def fast_law(self, population: Population, normal) -> np.ndarray:
        """Shift of the threshold by the fast model's law at standard normals [V], signed."""
        silicon = population.silicon({})
        device = population.devices({}, self.geometry, silicon)
        draws = dict.fromkeys(population.names(cause="dopants"), np.asarray(normal, float))
        return population.scatter(draws, self.geometry, device, silicon.state)


@storable
@dataclass(frozen=True, kw_only=True, eq=False)
class Solved:
    """One device. shift : of the threshold's magnitude against continuous doping [V]; fast_shift : see `Kind`;

    surface : potential of the silicon surface [V], of the first device alone, else None
    """

    shift: float
    fast_shift: float
    surface: np.ndarray | None


def only_dopants(file: ProcessFile, question) -> Population:
    """The population of a device of which nothing but counted dopants varies, without short-channel effects."""
    record = file.device(question.device)
    counted = Scatter(dopants="counted", fringe_dopants=record.scatter.fringe_dopants)
    record = record.model_copy(update={"scatter": counted, "variation": Variation(), "short_channel": ShortChannel()})
    process = file.process.model_copy(update={"device": {question.device: record}, "correlation": []})
    return Population(
        replace(file, process=process),
        question.device,
        body_bias_v=question.body_bias_v,
        temperature_c=question.temperature_c,
    )


def edge_of(population: Population, field_nm: float | None) -> FieldStep | TrenchWall | NoEdge:
    """Edges of the devices that are solved, as far as the file's geometry and `field_nm` allow; else none."""
    section = edge_section(population.nominal, population.record, population.where)
    if section is None or field_nm == 0:
        return NoEdge()
    if field_nm is None:
        depletion = float(population.silicon({}).state.depletion_width)
        field = getattr(section.edge, "taper_length", 0.0) + FIELD * depletion
    else:
        field = field_nm * SUFFIXES["nm"]
    return replace(section.edge, field_width=field)


def prepared_kind(population: Population, question, width_um: float) -> Kind:
    """Devices of one drawn width. Raises InputError for what neither model can take."""
    geometry = population.geometry(width_um, question.length_um)
    nominal, state = population.nominal, population.silicon({}).state
    try:
        device = AtomDevice(
            width=float(geometry.width),
            length=float(geometry.length),
            oxide_thickness=float(nominal.oxide_thickness),
            profile=nominal.profile,
            temperature=float(nominal.temperature),
            edge=edge_of(population, question.field_nm),
            body_bias=float(nominal.body_bias),
            intrinsic_density=float(nominal.intrinsic_density),
            mesh_spacing=question.mesh_nm * SUFFIXES["nm"],
            charge_level=question.charge_level,
        )
    except InputError:
        raise
    except ValueError as error:
        raise InputError(f"{population.where}: width_um = {width_um:g}: {_in_keys(population, error)}") from None
    place = nominal.profile, float(state.depletion_width), geometry.width, geometry.length
    capacitance = oxide_capacitance(nominal.oxide_thickness)
    whole = dopants.dopant_sigma(*place, capacitance, geometry.fringe_shape)
    return Kind(
        width_um=width_um,
        device=device,
        geometry=geometry,
        depletion_width=float(state.depletion_width),
        one_shift=float(dopants.single_dopant_shift(capacitance, geometry.width, geometry.length)),
        mean_weight=float(dopants.weighted_count(*place, 1)),
        fast_channel_sigma=float(dopants.dopant_sigma(*place, capacitance)),
        fast_sigma=float(geometry.sigma_ratio * whole),
    )


def _in_keys(population: Population, error: ValueError) -> str:
    """What the physics refuses, in the words of a person's keys."""
    said = one_line(error) if len(str(error)) < 100 else str(error)
    for name, key in KEYS.items():
        said = said.replace(name, key)
    return said + ("; field_nm = 0 leaves the edges away" if population.record.edge.solvable else "")


def nodes_of(kind: Kind) -> int:
    """Nodes of a device's mesh."""
    return int(atom_mesh(kind.device).depth.size * np.prod(kind.device.plane))


def uniform_of(kind: Kind) -> UniformThreshold:
    """The device with continuous doping. Raises InputError where it has no solution."""
    try:
        return uniform_threshold(kind.device)
    except RuntimeError as error:
        raise InputError(
            f"width_um = {kind.width_um:g}, continuous doping: {one_line(error)}; change mesh_nm"
        ) from None


def solved(kinds: list[Kind], uniform: list[UniformThreshold], seed: int, item: tuple[int, int]) -> Solved:
    """One device. item : place of its width, and its number. Raises InputError where it has no solution."""
    place, number = item
    kind = kinds[place]
    places = kind.placed(seed, number)
    try:
        found = solve_device(kind.device, places, uniform[place])
    except RuntimeError as error:
        raise InputError(f"width_um = {kind.width_um:g}, device {number}: {one_line(error)}; change mesh_nm") from None
    return Solved(
        shift=-float(found.lowering),
        fast_shift=kind.fast_shift(places),
        surface=np.ascontiguousarray(found.surface_potential) if item == (0, 0) else None,
    )
