"""The nominal transistor: a process file's record turned into the physics' SI device."""

import numpy as np

from physics import edges, short_channel, silicon, threshold
from physics.device import Device
from physics.profile import StepProfile, UniformProfile
from studies.edge_table import edge_table
from studies.errors import InputError, one_line
from studies.process_edge import Edge as EdgeRecord
from studies.process_file import Device as DeviceRecord
from studies.process_file import ProcessFile
from studies.section import edge_section
from studies.units import SUFFIXES, ZERO_CELSIUS, si

INTRINSIC_DENSITY = {
    "sproul green": silicon.intrinsic_density,
    "misiakos tsamakis": silicon.intrinsic_density_misiakos,
}
FIT_RANGE = {"sproul green": (200.0, 500.0), "misiakos tsamakis": (78.0, 340.0)}  # [K]
LEAST_DOPING_RATIO = 10.0  # over the intrinsic density; below it full depletion and Boltzmann mean nothing


def closed_form_edge(record: EdgeRecord) -> edges.Edge:
    """The edges by closed form or table, whatever the method says; none at all for a kind without a form."""
    if record.kind == "field oxide":
        return edges.FieldOxide(shape=np.pi / 2 if record.shape is None else record.shape)
    if record.kind == "trench":
        return edges.Trench(field_oxide_thickness=si(record, "field_oxide_nm"))
    if record.kind == "table":
        widths = np.array(record.table_width_um) * SUFFIXES["um"]
        return edges.TabulatedEdge(width=widths, factor=record.table_factor)
    return edges.NoEdge()


def _short_channel(record: DeviceRecord) -> short_channel.ShortChannel:
    kind = record.short_channel.kind
    if kind == "charge sharing":
        return short_channel.ChargeSharing(junction_depth=si(record, "junction_depth_nm"))
    if kind == "quasi two-dimensional":
        return short_channel.QuasiTwoDimensional(eta=record.short_channel.eta)
    return short_channel.LongChannel()


def _profile(record: DeviceRecord):
    if record.surface_depth_nm is None:
        return UniformProfile(doping=si(record, "doping_per_cm3"))
    return StepProfile(
        surface_doping=si(record, "surface_doping_per_cm3"),
        surface_depth=si(record, "surface_depth_nm"),
        doping=si(record, "doping_per_cm3"),
    )


def _gate_work_function(record: DeviceRecord, temperature: float) -> float:
    if record.gate is None:
        return si(record, "gate_work_function_ev")
    # degenerate polysilicon: the Fermi level at the conduction or the valence band edge; common practice
    return silicon.ELECTRON_AFFINITY + (silicon.band_gap(temperature) if record.gate == "p+ polysilicon" else 0.0)


def nominal_device(file: ProcessFile, name: str, *, body_bias_v: float, temperature_c: float | None) -> Device:
    """The nominal device of a process option, one metre wide and long until a geometry is chosen.

    body_bias_v : reverse body bias, a magnitude
    temperature_c : overrides the file's temperature; None keeps it
    Raises InputError for a surface layer deeper than the depletion region, and for a cross-section that cannot be solved.
    """
    record = file.device(name)
    density = file.process.intrinsic_density
    temperature = (file.process.temperature_c if temperature_c is None else temperature_c) + ZERO_CELSIUS
    coldest, hottest = FIT_RANGE[density]
    if not coldest <= temperature <= hottest:
        raise InputError(
            f"{one_line(file.path)}: intrinsic_density = '{density}': the fit holds from {coldest - ZERO_CELSIUS:g} to "
            f"{hottest - ZERO_CELSIUS:g} C; {temperature - ZERO_CELSIUS:g} C is asked for"
        )
    device = Device(
        polarity=1.0 if record.channel == "n" else -1.0,
        temperature=temperature,
        intrinsic_density=float(INTRINSIC_DENSITY[density](temperature)),
        width=1.0,
        length=1.0,
        oxide_thickness=si(record, "oxide_thickness_nm"),
        profile=_profile(record),
        gate_work_function=_gate_work_function(record, temperature),
        oxide_charge=si(record, "oxide_charge_per_cm2"),
        edge=closed_form_edge(record.edge),
        short_channel=_short_channel(record),
        body_bias=body_bias_v,
        quantum_shift=record.quantum_shift,
        gate_doping=np.inf if record.gate_doping_per_cm3 is None else si(record, "gate_doping_per_cm3"),
    )
    where = f"{one_line(file.path)}: device.{one_line(name)}"
    _check(device, record, where)
    if record.edge.method == "solved":
        return device.varied(edge=edge_table(edge_section(device, record, where)).edge)
    return device


def _check(device: Device, record: DeviceRecord, where: str) -> None:
    """Refuse what the physics has no answer for, before it gives one."""
    celsius = device.temperature - ZERO_CELSIUS
    least = LEAST_DOPING_RATIO * device.intrinsic_density
    for key in ("doping_per_cm3", "surface_doping_per_cm3"):
        if getattr(record, key) is not None and si(record, key) < least:
            raise InputError(
                f"{where}.{key} = {getattr(record, key):g}: at {celsius:g} C the silicon is intrinsic; at least "
                f"{least / SUFFIXES['per_cm3']:.2g} is needed"
            )
    if record.edge.field_oxide_nm is not None and si(record.edge, "field_oxide_nm") <= device.oxide_thickness:
        raise InputError(
            f"{where}.edge.field_oxide_nm = {record.edge.field_oxide_nm:g}: must be more than oxide_thickness_nm"
        )
    state = threshold.electrostatics(device)
    if record.short_channel.kind == "quasi two-dimensional" and state.junction_barrier <= 0:
        raise InputError(
            f"{where}.doping_per_cm3 = {record.doping_per_cm3:g}: no barrier is left between source and channel"
        )
    if record.surface_depth_nm is not None and si(record, "surface_depth_nm") >= state.depletion_width:
        raise InputError(
            f"{where}.surface_depth_nm = {record.surface_depth_nm:g}: must be less than the depletion width, "
            f"{state.depletion_width * 1e9:.1f} nm here; deeper, only surface_doping_per_cm3 counts"
        )
