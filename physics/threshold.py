"""Threshold voltage: V_T = V_FB + s (psi_s + F_w F_l Q_B/C_ox), s = +1 for n-channel and -1 for p-channel."""

from typing import Any, NamedTuple

import numpy as np

from physics.constants import BOLTZMANN, ELEMENTARY_CHARGE, OXIDE_PERMITTIVITY, SILICON_PERMITTIVITY
from physics.device import Device
from physics.silicon import ELECTRON_AFFINITY, band_gap, fermi_potential, thermal_voltage


class Electrostatics(NamedTuple):
    """What the silicon of a wide, long device has at threshold; no dimension and no oxide enters.

    surface_potential : band bending at the source end without body bias [V]
    depletion_width : with body bias [m]
    bulk_charge : magnitude of the depletion charge with body bias [C/m^2]
    silicon_work_function : vacuum level to the Fermi level of the substrate [V]
    junction_barrier : built-in potential of the source less the surface potential [V]
    """

    surface_potential: Any
    depletion_width: Any
    bulk_charge: Any
    silicon_work_function: Any
    junction_barrier: Any


def oxide_capacitance(oxide_thickness):
    """Gate oxide capacitance per area.

    oxide_thickness : SiO2-equivalent thickness [m]
    Returns capacitance [F/m^2].
    Source: definition.
    """
    return OXIDE_PERMITTIVITY / oxide_thickness


def flat_band_voltage(work_function_difference, oxide_charge, oxide_capacitance):
    """Flat-band voltage.

    work_function_difference : gate less silicon [V]
    oxide_charge : fixed charge at the interface [C/m^2]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    Returns flat-band voltage [V].
    Source: Neamen, 4th ed., eq. 10.25.
    """
    return work_function_difference - oxide_charge / oxide_capacitance


def long_channel_threshold(flat_band_voltage, surface_potential, bulk_drop, polarity=1):
    """Threshold voltage of a wide, long channel, against the source.

    flat_band_voltage : flat-band voltage [V]
    surface_potential : band bending at threshold without body bias, 2 phi_F for uniform doping [V]
    bulk_drop : magnitude of the depletion charge, with body bias and any factors, over the oxide capacitance [V]
    polarity : +1 n-channel, -1 p-channel [1]
    Returns threshold voltage [V], signed.
    Source: Neamen, 4th ed., eq. 10.31a and 10.32a.
    """
    magnitude = surface_potential + bulk_drop
    return flat_band_voltage + magnitude if polarity == 1 else flat_band_voltage - magnitude


def body_coefficient(doping, oxide_capacitance):
    """Body-effect coefficient gamma.

    doping : uniform doping [m^-3]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    Returns coefficient [V^0.5].
    Source: Neamen, 4th ed., eq. 10.81.
    """
    return np.sqrt(2 * ELEMENTARY_CHARGE * SILICON_PERMITTIVITY * doping) / oxide_capacitance


def body_effect(coefficient, surface_potential, body_bias):
    """Rise of the threshold's magnitude with reverse body bias, uniform doping.

    coefficient : body-effect coefficient [V^0.5]
    surface_potential : 2 phi_F [V]
    body_bias : reverse body bias, a magnitude [V], >= 0
    Returns rise [V].
    Source: Neamen, 4th ed., eq. 10.80.
    """
    return coefficient * (np.sqrt(surface_potential + body_bias) - np.sqrt(surface_potential))


def implant_shift(dose, oxide_capacitance):
    """Shift of the threshold by a sheet of dopants at the interface.

    dose : active dose, acceptors positive [m^-2]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    Returns shift [V].
    Source: Neamen, 4th ed., eq. 11.31 (delta implant).
    """
    return ELEMENTARY_CHARGE * dose / oxide_capacitance


def quantum_potential(surface_field, temperature):
    """Additional band bending because the inversion layer's lowest level lies above the band edge.

    surface_field : field at the silicon surface at threshold [V/m]
    temperature : absolute temperature [K]
    Returns potential [V].
    Source: M. J. van Dort, P. H. Woerlee, A. J. Walker, Solid-State Electron. 37, 411 (1994) (from memory): gap
    widening (13/9) 4.1e-8 eV cm (eps_s/4kT)^(1/3) E^(2/3); the density keeps its value when the bending rises by it.
    """
    kappa = 4.1e-10  # [V m]; 4.1e-8 eV cm
    return 13 / 9 * kappa * np.cbrt(SILICON_PERMITTIVITY / (4 * BOLTZMANN * temperature)) * np.cbrt(surface_field) ** 2


def gate_depletion_potential(bulk_charge, gate_doping):
    """Voltage lost in the depleted edge of a polysilicon gate at threshold.

    bulk_charge : charge mirrored in the gate [C/m^2]
    gate_doping : active gate doping [m^-3]; infinite for a metal
    Returns voltage [V].
    Source: depletion approximation in the gate, Q^2/(2 q eps_s N) (elementary).
    """
    return bulk_charge**2 / (2 * ELEMENTARY_CHARGE * SILICON_PERMITTIVITY * gate_doping)


def electrostatics(device: Device) -> Electrostatics:
    """The silicon's part of a threshold, computed once and shared by every width, length and oxide.

    device : see `physics.device.Device`
    Returns Electrostatics, each entry with the shape of what it depends on.
    The surface potential is phi_F(surface) + phi_F(substrate): the carrier density at the surface then equals the doping
    there, and uniform doping gives 2 phi_F. That holds while the depletion edge lies below the surface layer.
    """
    kt = thermal_voltage(device.temperature)
    profile = device.profile
    fermi = fermi_potential(profile.doping, kt, device.intrinsic_density)
    at_surface = fermi
    if profile.surface_doping is not profile.doping:
        at_surface = fermi_potential(profile.surface_doping, kt, device.intrinsic_density)
    potential = fermi + at_surface
    half_gap = band_gap(device.temperature) / 2
    width = profile.depletion_width(potential + device.body_bias)
    return Electrostatics(
        surface_potential=potential,
        depletion_width=width,
        bulk_charge=profile.depletion_charge(width),
        silicon_work_function=ELECTRON_AFFINITY + half_gap + device.polarity * fermi,
        junction_barrier=half_gap + fermi - potential,
    )


def threshold_voltage(device: Device, state: Electrostatics, drain_voltage=0.0):
    """Threshold voltage of every device, against its source, without the scatter of single dopants.

    device : see `physics.device.Device`
    state : `electrostatics(device)`
    drain_voltage : magnitude of drain to source [V], >= 0; only the quasi-two-dimensional short channel uses it
    Returns threshold voltage [V], negative for p-channel; the broadcast shape.
    The width's factor multiplies what the length leaves of the bulk charge: an approximation, since each is derived as if
    the other were absent.
    Raises ChannelTooShort, see `physics.short_channel`.
    """
    width_factor = device.edge.charge_factor(state.depletion_width, device.width, device.oxide_thickness)
    capacitance = oxide_capacitance(device.oxide_thickness)
    wide_drop = state.bulk_charge / capacitance
    lowering = device.short_channel.lowering(state, wide_drop, device.length, device.oxide_thickness, drain_voltage)
    drop = width_factor * (wide_drop - lowering)
    work_function_difference = device.gate_work_function + device.flat_band_shift - state.silicon_work_function
    flat_band = flat_band_voltage(work_function_difference, device.oxide_charge, capacitance)
    potential = state.surface_potential
    if np.isfinite(device.gate_doping):
        potential = potential + gate_depletion_potential(drop * capacitance, device.gate_doping)
    if device.quantum_shift:
        potential = potential + quantum_potential(state.bulk_charge / SILICON_PERMITTIVITY, device.temperature)
    return long_channel_threshold(flat_band, potential, drop, device.polarity)
