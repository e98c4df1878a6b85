"""The random inputs of a device: their names, levels, causes and laws, from a process file's variation and scatter.

An input is named device.quantity.level, for instance n.oxide_thickness.die; its stream of standard normals has that
name, so the same input has the same draws in every question.
"""

from dataclasses import dataclass

import numpy as np

from mc.correlation import Copula
from mc.laws import Empirical, Law, Lognormal, Normal, TruncatedNormal, Uniform
from studies.errors import InputError, nearest, one_line
from studies.measured import read_column
from studies.process_file import LEVELS, ProcessFile
from studies.units import SUFFIXES

QUANTITIES = {
    "oxide_thickness": "percent",
    "doping": "percent",
    "mobility": "percent",
    "width": "nm",
    "length": "nm",
    "flat_band": "mv",
}
SCATTER = {  # cause of the scatter within one device, and the process-file key that switches it on
    "dopants": "dopants",
    "gate_edges": "gate_edge_nm",
    "active_edges": "active_edge_nm",
    "oxide_roughness": "oxide_roughness_nm",
    "grains": "grain_mv",
    "remainder": "remainder_pair_mv_um",
    "current_factor": "current_factor_pair_percent_um",
}
CAUSES = (*QUANTITIES, *SCATTER)
CLEAR_SIGMAS = 8.0  # a quantity must stay above zero this far out


@dataclass(frozen=True, kw_only=True)
class RandomInput:
    """One named random input.

    name : device.quantity.level
    cause : one of CAUSES
    level : one of LEVELS
    law : law of the deviation in SI units or as a ratio; None for scatter, whose size depends on the dimensions
    """

    name: str
    cause: str
    level: str
    law: Law | None = None


def _law(kind, sigma, relative, cut) -> Law:
    if kind == "lognormal" and relative:
        return Lognormal(mean=1.0, sigma=sigma, shift=-1.0)
    if kind == "uniform":
        return Uniform(low=-np.sqrt(3) * sigma, high=np.sqrt(3) * sigma)
    if kind == "truncated normal":
        return TruncatedNormal(sigma=sigma, cut=cut)
    return Normal(sigma=sigma)


def _measured_law(spread, unit, folder) -> Empirical:
    path = folder / spread.values_csv
    values = np.array(read_column(path, spread.values_column))
    if unit == "percent" and values.min() <= 0:
        raise InputError(f"{one_line(path)}: {one_line(spread.values_column)} = {values.min():g}: must be above 0")
    deviations = values / values.mean() - 1 if unit == "percent" else (values - values.mean()) * SUFFIXES[unit]
    return Empirical(values=tuple(deviations))


def random_inputs(file: ProcessFile, device: str) -> tuple[RandomInput, ...]:
    """Every random input of a device, in a fixed order. Raises InputError for measured values that cannot be read."""
    record = file.device(device)
    inputs = []
    for quantity, unit in QUANTITIES.items():
        spread = getattr(record.variation, quantity)
        for level in LEVELS:
            sigma = getattr(spread, f"{level}_{unit}") * SUFFIXES[unit]
            if spread.law == "empirical" and spread.values_level == level:
                law = _measured_law(spread, unit, file.path.parent)
            elif sigma > 0:
                law = _law(spread.law, sigma, unit == "percent", spread.cut_sigmas)
            else:
                continue
            inputs.append(RandomInput(name=f"{device}.{quantity}.{level}", cause=quantity, level=level, law=law))
        if unit == "percent" and largest_fall([item for item in inputs if item.cause == quantity]) >= 1:
            raise InputError(
                f"{one_line(file.path)}: device.{one_line(device)}.variation.{quantity}: so large that some devices would "
                f"have none; {CLEAR_SIGMAS:g} sigmas of all levels together must stay below 100 percent"
            )
    for cause, key in SCATTER.items():
        if getattr(record.scatter, key) not in ("off", 0.0):
            inputs.append(RandomInput(name=f"{device}.{cause}.device", cause=cause, level="device"))
    return tuple(inputs)


def largest_fall(inputs, *local_sigmas: float) -> float:
    """How far a quantity may fall below nominal: CLEAR_SIGMAS of the normal parts together, and all of the others.

    inputs : random inputs of one quantity; local_sigmas : further normal parts in the same unit
    """
    normal = [item.law.sigma for item in inputs if isinstance(item.law, Normal)]
    others = sum(-float(item.law.from_normal(-CLEAR_SIGMAS)) for item in inputs if not isinstance(item.law, Normal))
    return CLEAR_SIGMAS * float(np.sqrt(sum(sigma**2 for sigma in (*normal, *local_sigmas)))) + others


def copula(file: ProcessFile) -> Copula:
    """The process option's correlations. Raises InputError for an unknown input or a contradiction."""
    known = [item.name for device in file.process.device for item in random_inputs(file, device)]
    pairs = []
    for number, entry in enumerate(file.process.correlation):
        for name in entry.inputs:
            if name.endswith(".device"):
                raise InputError(
                    f"{one_line(file.path)}: correlation.{number}.inputs: '{one_line(name)}': neighbouring devices are "
                    "independent here; lot, wafer and die levels can be correlated"
                )
            if name not in known:
                raise InputError(
                    f"{one_line(file.path)}: correlation.{number}.inputs: '{one_line(name)}' does not vary; {nearest(name, known)}"
                )
        pairs.append((*entry.inputs, entry.value))
    try:
        return Copula.of_pairs(pairs)
    except ValueError as error:
        raise InputError(f"{one_line(file.path)}: correlation: {error}") from None
