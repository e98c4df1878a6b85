"""What is asked of the tail of narrow devices."""

from typing import Annotated

from pydantic import Field, model_validator

from studies.question import WidthQuestion

LIMITS = (
    "vth_low_v",
    "vth_high_v",
    "vth_window_mv",
    "drive_floor_ua",
    "drive_floor_percent",
    "leakage_ceiling_na",
    "leakage_ceiling_times",
)
EITHER = (("drive_floor_ua", "drive_floor_percent"), ("leakage_ceiling_na", "leakage_ceiling_times"))
CURRENTS = ("drive_floor_ua", "drive_floor_percent", "leakage_ceiling_na", "leakage_ceiling_times")
Limit = Annotated[float, Field(gt=0, le=1e9)] | None


class Question(WidthQuestion):
    """Yield loss of narrow devices: shares outside their limits down to 1e-10, chip yield with spares, and area."""

    device: str
    """device of the process file"""
    vth_low_v: Annotated[float, Field(ge=-20, le=20)] | None = None
    """lowest threshold allowed, a magnitude for p devices too"""
    vth_high_v: Annotated[float, Field(ge=-20, le=20)] | None = None
    """highest threshold allowed"""
    vth_window_mv: Limit = None
    """instead: threshold within this of its nominal value at each width"""
    drive_floor_ua: Limit = None
    """lowest drain current allowed with gate and drain at the supply"""
    drive_floor_percent: Annotated[float, Field(gt=0, lt=100)] | None = None
    """instead: in percent of its nominal value at each width"""
    leakage_ceiling_na: Limit = None
    """highest drain current allowed with the gate at the source"""
    leakage_ceiling_times: Annotated[float, Field(gt=1, le=1e9)] | None = None
    """instead: in multiples of its nominal value at each width"""
    supply_v: Annotated[float, Field(gt=0, le=100)] | None = None
    """supply voltage, for drive and leakage"""
    drain_v: Annotated[float, Field(gt=0, le=100)] = 0.05
    """drain voltage at which the threshold is meant, a magnitude"""
    body_bias_v: Annotated[float, Field(ge=0, le=20)] = 0.0
    """reverse body bias, a magnitude"""
    devices: Annotated[int, Field(ge=1, le=10**9)]
    """devices per chip"""
    spares: Annotated[int, Field(ge=0, le=10**9)] = 0
    """devices that may fail, in each block"""
    blocks: Annotated[int, Field(ge=1, le=10**9)] = 1
    """blocks of a chip, each with its own spares and an equal part of the devices"""
    fixed_area_mm2: Annotated[float, Field(ge=0, le=10_000)] = 0.0
    """chip area besides the cells"""
    cell_area_um2: Annotated[float, Field(ge=0, le=1e6)] = 0.0
    """area of a cell besides the part that grows with the width"""
    cell_length_um: Annotated[float, Field(ge=0, le=1e4)] = 0.0
    """growth of a cell's area per drawn width"""
    wafer_diameter_mm: Annotated[float, Field(gt=0, le=1000)] | None = None
    """with edge_exclusion_mm: share of the wafer that is used"""
    edge_exclusion_mm: Annotated[float, Field(ge=0, le=100)] = 0.0
    """rim of the wafer that is lost"""
    defects_per_cm2: Annotated[float, Field(ge=0, le=1000)] = 0.0
    """density of defects that kill a chip"""
    clustering: Annotated[float, Field(gt=0, le=1000)] = 2.0
    """clustering parameter of the defects, negative-binomial yield"""

    @model_validator(mode="after")
    def _consistent(self):
        given = [name for name in LIMITS if getattr(self, name) is not None]
        if not given:
            raise ValueError(f"no limit at all; give one or more of {', '.join(LIMITS)}")
        for one, other in EITHER:
            if one in given and other in given:
                raise ValueError(f"'{one}' and '{other}': give one of the two")
        if "vth_window_mv" in given and {"vth_low_v", "vth_high_v"} & set(given):
            raise ValueError("'vth_window_mv' goes with neither 'vth_low_v' nor 'vth_high_v'")
        if {"vth_low_v", "vth_high_v"} <= set(given) and self.vth_low_v >= self.vth_high_v:
            raise ValueError(f"vth_low_v = {self.vth_low_v:g} must be below vth_high_v = {self.vth_high_v:g}")
        needs_supply = bool(set(CURRENTS) & set(given))
        if needs_supply != (self.supply_v is not None):
            raise ValueError("'supply_v' goes with limits of drive and leakage, and they need it")
        if self.blocks > self.devices or self.spares > self.devices // self.blocks:
            raise ValueError("more spares or blocks than devices")
        if self.edge_exclusion_mm and (
            self.wafer_diameter_mm is None or 2 * self.edge_exclusion_mm >= self.wafer_diameter_mm
        ):
            raise ValueError("'edge_exclusion_mm' needs a 'wafer_diameter_mm' of more than twice its size")
        if self.fixed_area_mm2 + self.cell_area_um2 + self.cell_length_um == 0:
            raise ValueError("no area at all; give fixed_area_mm2, cell_area_um2 or cell_length_um")
        return self
