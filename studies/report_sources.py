"""Where the formulas of a job come from: the docstrings of the physics say it, and the job says which were used."""

import re
from collections.abc import Callable, Iterable, Mapping
from inspect import getdoc
from typing import NamedTuple

from physics import (
    atom_dopants,
    atom_poisson,
    atom_sheet,
    atomistic,
    counted,
    cross_section,
    cross_section_dopants,
    current,
    dopants,
    edges,
    gate_delay,
    matching,
    profile,
    roughness,
    section_poisson,
    short_channel,
    silicon,
    threshold,
)
from studies.process_file import Device, ProcessFile

SOURCE = re.compile(r"Source:\s*(.*?)(?:\n\s*\n|\Z)", re.S)
CURRENTS = {"supply_v", "gm_over_i_per_v", "drain_current_ua", "current_per_square_ua"}  # keys of questions about them
SOLVED = (
    section_poisson.box_equations,
    section_poisson.newton,
    cross_section.threshold_inversion,
    cross_section_dopants.dopant_weights,
    cross_section_dopants.dopant_scatter,
)
ONE_BY_ONE = (
    atomistic.solve_device,
    atom_dopants.place_dopants,
    atom_dopants.dopant_charge,
    atom_poisson.atom_equations,
    atom_poisson.newton_step,
    atom_sheet.SheetNetwork.current,
)
UNTOLD = ("definition", "elementary", "see there")  # what no book is needed for


class Source(NamedTuple):
    """A formula and where it comes from."""

    formula: str
    source: str


def sources_of(uses: Iterable[tuple[ProcessFile, str, Mapping]]) -> list[Source]:
    """Sources of the formulas used, each once. uses : process files with the kinds of questions and the questions"""
    used: dict[Callable, None] = {}
    for file, kind, question in uses:
        process, keys = file.process, _keys(question)
        fit = silicon.intrinsic_density
        if process.intrinsic_density != "sproul green":
            fit = silicon.intrinsic_density_misiakos
        used |= dict.fromkeys((silicon.band_gap, fit, silicon.fermi_potential))
        named = [process.device[name] for name in _devices(question) if name in process.device]
        for device in named or process.device.values():
            used |= dict.fromkeys(_of_device(device, bool(keys & CURRENTS)))
            if kind == "edge" or device.edge.method == "solved":
                used |= dict.fromkeys(SOLVED)
        used |= dict.fromkeys(ONE_BY_ONE if kind == "atoms" else ())
        used |= dict.fromkeys(_of_question(keys, named))
    return [Source(_first_line(formula), source) for formula in used if (source := source_in(formula))]


def source_in(formula: Callable) -> str:
    """What a docstring says about its formula's source, in one line; nothing where no book is needed."""
    found = SOURCE.search(getdoc(formula) or "")
    text = " ".join(found[1].split()).replace("`", "") if found else ""
    return "" if text.rstrip(".").lower() in UNTOLD else text


def _first_line(formula: Callable) -> str:
    return (getdoc(formula) or "").split("\n")[0].replace("`", "").rstrip(".")


def _keys(question: Mapping) -> set[str]:
    """Keys of a question that were given, those of questions inside it included."""
    keys = {key for key, value in question.items() if value is not None}
    for value in question.values():
        keys |= _keys(value) if isinstance(value, Mapping) else set()
    return keys


def _devices(question: Mapping) -> list[str]:
    """Names of the devices that a question is about."""
    named = [question[key] for key in ("device", "n_device", "p_device") if isinstance(question.get(key), str)]
    for value in question.values():
        named += _devices(value) if isinstance(value, Mapping) else []
    return named


def _of_device(device: Device, has_currents: bool) -> list[Callable]:
    """Formulas that a device's own keys call for."""
    used = [threshold.flat_band_voltage, threshold.long_channel_threshold]
    shape = profile.UniformProfile if device.surface_doping_per_cm3 is None else profile.StepProfile
    used.append(shape.depletion_width)
    if device.edge.method == "closed form":
        used += {"field oxide": [edges.fringe_factor], "trench": [edges.trench_length]}.get(device.edge.kind, [])
    used += {
        "charge sharing": [short_channel.charge_sharing_factor],
        "quasi two-dimensional": [
            short_channel.quasi_two_dimensional_length,
            short_channel.quasi_two_dimensional_shift,
        ],
    }.get(device.short_channel.kind, [])
    used += [threshold.quantum_potential] if device.quantum_shift else []
    used += [threshold.gate_depletion_potential] if device.gate_doping_per_cm3 else []
    scatter = device.scatter
    used += [dopants.dopant_root_and_sigma, dopants.weighted_count] if scatter.dopants != "off" else []
    used += [counted.compound_poisson_quantiles] if scatter.dopants == "counted" else []
    used += [dopants.fringe_weighted_dopants] if scatter.fringe_dopants else []
    if scatter.gate_edge_nm or scatter.active_edge_nm:
        averaging = {"exponential": roughness.exponential_averaging, "gaussian": roughness.gaussian_averaging}
        used.append(averaging[scatter.edge_correlation])
    used += [roughness.oxide_roughness_sigma] if scatter.oxide_roughness_nm else []
    used += [roughness.grain_sigma] if scatter.grain_mv else []
    used += [roughness.area_law_sigma] if scatter.remainder_pair_mv_um or scatter.current_factor_pair_percent_um else []
    if has_currents:
        used += [current.interpolation, current.slope_factor, current.drain_current]
        used += [current.critical_drop] if device.saturation_velocity_cm_per_s else []
    return used


def _of_question(keys: set[str], devices: list[Device]) -> list[Callable]:
    """Formulas that a question's keys call for."""
    used: list[Callable] = []
    if "stages" in keys:
        used += [gate_delay.effective_drive_current, gate_delay.stage_delay, gate_delay.gate_capacitance]
    if {"limit_mv", "limit_percent"} & keys:
        used += [matching.gate_voltage_at, matching.saturation_voltage]
        used.append(matching.mirror_error if "limit_percent" in keys else matching.pair_offset)
        if any(each.scatter.distance_pair_uv_per_um or each.scatter.gradient_uv_per_um for each in devices):
            used.append(matching.distance_sigma)
    return used
