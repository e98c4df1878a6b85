"""The border between what a person writes and SI: the unit is the end of a key's name, and is converted here alone."""

from physics.constants import ELEMENTARY_CHARGE

SUFFIXES = {  # longest endings first, so that "_mv_um" is not read as "_um"
    "percent_um": 1e-8,  # [m]; a relative coefficient in % um
    "uv_per_um": 1.0,  # [V/m]
    "mv_um": 1e-9,  # [V m]
    "cm2_per_vs": 1e-4,  # [m^2/(V s)]
    "cm_per_s": 1e-2,  # [m/s]
    "ff_per_um": 1e-9,  # [F/m]
    "per_cm3": 1e6,  # [m^-3]
    "per_cm2": ELEMENTARY_CHARGE * 1e4,  # [C/m^2]; charges are given as a number of elementary charges
    "per_v": 1.0,  # [1/V]
    "percent": 1e-2,  # [1]
    "nm2": 1e-18,  # [m^2]
    "um2": 1e-12,  # [m^2]
    "mm2": 1e-6,  # [m^2]
    "mm": 1e-3,  # [m]
    "nm": 1e-9,  # [m]
    "um": 1e-6,  # [m]
    "mv": 1e-3,  # [V]
    "ev": 1.0,  # [V]; a work function divided by the elementary charge
    "v": 1.0,  # [V]
    "ua": 1e-6,  # [A]
    "na": 1e-9,  # [A]
    "ps": 1e-12,  # [s]
    "ff": 1e-15,  # [F]
}
ZERO_CELSIUS = 273.15  # [K]


def split_unit(key: str) -> tuple[str, str | None]:
    """A key's quantity and unit: ("oxide_thickness", "nm"); the unit is None for a key without one."""
    for suffix in SUFFIXES:
        if key.endswith("_" + suffix):
            return key[: -len(suffix) - 1], suffix
    return key, None


def si(record, key: str):
    """Value of a validated record's key in SI units.

    record : anything with the key as an attribute; key : ends in a unit, or in "_c" for a temperature
    Raises KeyError for a key that ends in no known unit.
    """
    value = getattr(record, key)
    if key.endswith("temperature_c"):
        return value + ZERO_CELSIUS
    unit = split_unit(key)[1]
    if unit is None:
        raise KeyError(f"{key} ends in no known unit")
    return value * SUFFIXES[unit]


def micrometres(length: float) -> float:
    """A length [m] in um."""
    return length * 1e6
