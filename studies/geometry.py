"""What one drawn width and length make of a nominal device: electrical dimensions and the sizes of its local scatter."""

from dataclasses import dataclass, replace

from physics import dopants, roughness, short_channel, threshold
from physics.counted import CountedLaw, layered_law
from physics.device import Device
from physics.edge_patch import edge_patch
from physics.edge_surface import SolvedEdge
from physics.edges import Edge
from studies.errors import InputError
from studies.process_file import Device as DeviceRecord
from studies.units import SUFFIXES, si
from studies.variation import CLEAR_SIGMAS, largest_fall

FEWEST_DOPANTS = 2.0


@dataclass(frozen=True, kw_only=True)
class Geometry:
    """A drawn width and length, and what they make of the local scatter.

    width, length : nominal electrical dimensions [m]
    drawn_width : drawn width [m]
    gate_edge_sigma, active_edge_sigma : sigma of the mean length and width [m]
    oxide_sigma : relative sigma of the mean oxide thickness [1]
    grain_sigma, remainder_sigma : sigma of the threshold [V]
    current_factor_sigma : relative sigma of the current factor [1]
    edge : the nominal device's edge; of a solved one its quick stand-in around this width
    sigma_ratio, skewness_ratio : of the dopant scatter over their closed forms [1]; 1 but for solved edges
    fringe_shape : field-oxide shape whose fringe dopants are counted too, 0 for none [1]
    counted : tabulated law of the dopants; None for the normal law or none
    """

    width: float
    length: float
    drawn_width: float
    gate_edge_sigma: float
    active_edge_sigma: float
    oxide_sigma: float
    grain_sigma: float
    remainder_sigma: float
    current_factor_sigma: float
    edge: Edge
    sigma_ratio: float
    skewness_ratio: float
    fringe_shape: float
    counted: CountedLaw | None


def make_geometry(
    nominal: Device, record: DeviceRecord, inputs, where: str, width_um: float, length_um: float
) -> Geometry:
    """Geometry of a drawn width and length.

    inputs : the device's random inputs; where : file and device, for messages
    Raises InputError for a width or a length that its bias or its variation eats up, a width outside an edge's table, a
    channel too short for its formula, or one with hardly a dopant under it.
    """
    width = electrical(record, where, width_um, "width")
    length = electrical(record, where, length_um, "length")
    sized = replace(nominal, width=width, length=length)
    check_edge_table(sized, record, where)
    state = threshold.electrostatics(sized)
    try:
        threshold.threshold_voltage(sized, state)
    except short_channel.ChannelTooShort as error:
        raise InputError(f"{where}: length_um = {length_um:g}: {error}") from None
    scatter = record.scatter
    gate_edge_sigma = _edge_sigma(scatter, "gate_edge", width)
    active_edge_sigma = _edge_sigma(scatter, "active_edge", length)
    _check_clear(inputs, where, "width", width, "active_edge_nm", active_edge_sigma)
    _check_clear(inputs, where, "length", length, "gate_edge_nm", gate_edge_sigma)
    oxide_sigma = _oxide_sigma(scatter, sized)
    if oxide_sigma * CLEAR_SIGMAS >= 1:
        raise InputError(
            f"{where}.scatter.oxide_roughness_nm = {scatter.oxide_roughness_nm:g}: {CLEAR_SIGMAS:g} sigmas of the mean "
            "oxide thickness must leave some oxide"
        )
    fringe_shape = sized.edge.shape if scatter.fringe_dopants else 0.0
    edge, sigma_ratio, skewness_ratio = sized.edge, 1.0, 1.0
    if isinstance(edge, SolvedEdge):
        sigma_ratio, skewness_ratio = float(edge.sigma_ratio(width)), float(edge.skewness_ratio(width))
        edge = edge_patch(edge, width)
    return Geometry(
        width=width,
        length=length,
        drawn_width=width_um * SUFFIXES["um"],
        gate_edge_sigma=gate_edge_sigma,
        active_edge_sigma=active_edge_sigma,
        oxide_sigma=oxide_sigma,
        grain_sigma=_grain_sigma(scatter, sized),
        remainder_sigma=float(roughness.area_law_sigma(si(scatter, "remainder_pair_mv_um"), width, length)),
        current_factor_sigma=float(
            roughness.area_law_sigma(si(scatter, "current_factor_pair_percent_um"), width, length)
        ),
        edge=edge,
        sigma_ratio=sigma_ratio,
        skewness_ratio=skewness_ratio,
        fringe_shape=fringe_shape,
        counted=_counted_law(sized, state, fringe_shape, skewness_ratio, where)
        if scatter.dopants == "counted"
        else None,
    )


def electrical(record: DeviceRecord, where: str, drawn_um: float, dimension: str) -> float:
    """Electrical width or length [m] of a drawn one; raises InputError where its bias eats it up."""
    bias = getattr(record, f"{dimension}_bias_nm")
    electrical = drawn_um * SUFFIXES["um"] + bias * SUFFIXES["nm"]
    if electrical <= 0:
        raise InputError(f"{where}.{dimension}_bias_nm = {bias:g}: leaves nothing of {dimension}_um = {drawn_um:g}")
    return electrical


def _check_clear(inputs, where: str, dimension: str, electrical: float, edge_key: str, edge_sigma: float) -> None:
    varying = [item for item in inputs if item.cause == dimension]
    if electrical <= largest_fall(varying, edge_sigma):
        key = f"variation.{dimension}" if largest_fall(varying) > CLEAR_SIGMAS * edge_sigma else f"scatter.{edge_key}"
        raise InputError(
            f"{where}.{key}: too large for an electrical {dimension} of {electrical * 1e6:g} um; {CLEAR_SIGMAS:g} sigmas "
            "must leave something of the channel"
        )


def check_edge_table(device: Device, record: DeviceRecord, where: str) -> None:
    """Raise InputError for a width below those that an edge's table or surface holds for."""
    smallest = getattr(device.edge, "smallest_width", 0.0)
    if device.width < smallest * (1 - 1e-9):
        key = "table_width_um" if record.edge.kind == "table" else 'method = "solved"'
        raise InputError(
            f"{where}.edge.{key}: the table starts at {smallest * 1e6:.4g} um; an electrical width of "
            f"{device.width * 1e6:g} um is asked for"
        )


def _edge_sigma(scatter, name: str, along: float) -> float:
    if getattr(scatter, f"{name}_nm") == 0:
        return 0.0
    correlation_length = si(scatter, f"{name}_correlation_nm")
    return float(
        roughness.edge_pair_sigma(si(scatter, f"{name}_nm"), correlation_length, along, scatter.edge_correlation)
    )


def _oxide_sigma(scatter, device: Device) -> float:
    if scatter.oxide_roughness_nm == 0:
        return 0.0
    sigma = roughness.oxide_roughness_sigma(
        si(scatter, "oxide_roughness_nm"), si(scatter, "oxide_roughness_correlation_nm"), device.width, device.length
    )
    return float(sigma) / device.oxide_thickness


def _grain_sigma(scatter, device: Device) -> float:
    if scatter.grain_mv == 0:
        return 0.0
    factor = roughness.VORONOI_AREA_FACTOR if scatter.grain_cells == "voronoi" else 1.0
    area = si(scatter, "grain_area_nm2")
    return float(roughness.grain_sigma(si(scatter, "grain_mv"), area, device.width, device.length, factor))


def _counted_law(device: Device, state, fringe_shape: float, skewness_ratio: float, where: str) -> CountedLaw:
    """Law of the dopants; one of another skewness is that of as many dopants as have it."""
    profile, depletion = device.profile, state.depletion_width
    count = dopants.weighted_count(profile, depletion, device.width, device.length, 0, fringe_shape)
    count = count / skewness_ratio**2
    if count < FEWEST_DOPANTS:
        raise InputError(
            f"{where}: {count:.2g} dopants under a channel of {device.width * 1e6:g} by {device.length * 1e6:g} um; below "
            f"{FEWEST_DOPANTS:g} the counted law is not tabulated and a threshold has little meaning"
        )
    depth_ratio = getattr(profile, "surface_depth", 0.0) / depletion
    fringe = dopants.fringe_weighted_dopants(profile.surface_doping, depletion, fringe_shape, 0)
    fringe_ratio = fringe / (profile.doping * device.width * depletion)
    surface_ratio = profile.surface_doping / profile.doping
    return layered_law(float(count), float(surface_ratio), float(depth_ratio), float(fringe_ratio))
