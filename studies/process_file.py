"""A process option as a person writes it: a TOML file of nominal devices, their edges, variation and scatter.

Keys are whole words that end in their unit. Sigmas are one standard deviation. The records below are the file's
documentation: every key, its range and its meaning.
"""

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from studies.errors import InputError, nearest, one_line
from studies.process_edge import Edge
from studies.ranges import Doping, NotNegative, Percent, Positive, Thickness
from studies.validated import Record, read_toml, validated

LEVELS = ("lot", "wafer", "die", "device")
LAWS = Literal["normal", "lognormal", "truncated normal", "uniform", "empirical"]


class ShortChannel(Record):
    """Short-channel effect."""

    kind: Literal["none", "charge sharing", "quasi two-dimensional"] = "none"
    """"charge sharing" is Yau's trapezoid, which needs junction_depth_nm; "quasi two-dimensional" includes the drain"""
    eta: Annotated[float, Field(gt=0.1, le=10)] = 1.0
    """quasi two-dimensional: fitting parameter of the decay length, 1 if unknown"""

    @model_validator(mode="after")
    def _eta_has_effect(self):
        if "eta" in self.model_fields_set and self.kind != "quasi two-dimensional":
            raise ValueError(f"'eta' has no effect with kind = \"{self.kind}\"; remove it")
        return self


class Spread(Record):
    """What every kind of variation has besides its sizes."""

    law: LAWS = "normal"
    """law of every level given here; the sizes are its standard deviations"""
    cut_sigmas: Annotated[float, Field(gt=0.5, le=10)] | None = None
    """truncated normal: where the law is cut; the sizes are then those before cutting"""
    values_csv: str | None = None
    """empirical: CSV file beside this one whose column holds measured values; their deviations from their mean are used"""
    values_column: str | None = None
    """empirical: its column; the unit is that of the sizes"""
    values_level: Literal["lot", "wafer", "die", "device"] | None = None
    """empirical: the level at which the measured values vary; other levels given are normal"""

    @model_validator(mode="after")
    def _consistent(self):
        if (self.law == "truncated normal") != (self.cut_sigmas is not None):
            raise ValueError("'cut_sigmas' and law = \"truncated normal\" go together")
        empirical = [self.values_csv, self.values_column, self.values_level]
        if (
            any(item is not None for item in empirical) != (self.law == "empirical")
            or None in empirical
            and any(empirical)
        ):
            raise ValueError('law = "empirical" needs values_csv, values_column and values_level, and they need it')
        for name, value in self:
            if self.values_level is not None and name.startswith(f"{self.values_level}_") and value:
                raise ValueError(f"'{name}' has no effect: that level has measured values; remove one of them")
        return self


class Relative(Spread):
    """Variation in percent of the nominal value."""

    lot_percent: Percent = 0.0
    wafer_percent: Percent = 0.0
    die_percent: Percent = 0.0
    device_percent: Percent = 0.0


class Length(Spread):
    """Variation of a dimension in nanometres."""

    lot_nm: NotNegative = 0.0
    wafer_nm: NotNegative = 0.0
    die_nm: NotNegative = 0.0
    device_nm: NotNegative = 0.0


class Voltage(Spread):
    """Variation of a voltage in millivolts."""

    lot_mv: NotNegative = 0.0
    wafer_mv: NotNegative = 0.0
    die_mv: NotNegative = 0.0
    device_mv: NotNegative = 0.0


class Variation(Record):
    """What varies between devices by more than their local scatter: sizes per level lot, wafer, die, device."""

    oxide_thickness: Relative = Relative()
    doping: Relative = Relative()
    mobility: Relative = Relative()
    width: Length = Length()
    length: Length = Length()
    flat_band: Voltage = Voltage()

    @model_validator(mode="after")
    def _lognormal_scale(self):
        for name in ("width", "length", "flat_band"):
            if getattr(self, name).law == "lognormal":
                raise ValueError(f"{name}: a lognormal law needs a quantity given in percent")
        return self


class Scatter(Record):
    """What differs between neighbouring devices."""

    dopants: Literal["counted", "normal", "off"] = "counted"
    """"counted" is the compound-Poisson law, "normal" its mean and variance alone"""
    fringe_dopants: bool = False
    """count the field oxide's fringe dopants too: an upper bound that field solutions do not confirm"""
    gate_edge_nm: NotNegative = 0.0
    """roughness of ONE gate edge, ONE sigma (the literature often quotes three)"""
    gate_edge_correlation_nm: Positive | None = None
    active_edge_nm: NotNegative = 0.0
    """roughness of ONE edge of the active area, one sigma"""
    active_edge_correlation_nm: Positive | None = None
    edge_correlation: Literal["exponential", "gaussian"] = "exponential"
    """correlation function of both edges' roughness"""
    oxide_roughness_nm: NotNegative = 0.0
    """point sigma of the oxide thickness, Gaussian correlation"""
    oxide_roughness_correlation_nm: Positive | None = None
    grain_mv: NotNegative = 0.0
    """sigma of the work function over a metal gate's grains"""
    grain_area_nm2: Positive | None = None
    """mean area of a grain"""
    grain_cells: Literal["equal", "voronoi"] = "voronoi"
    """"voronoi" has the area scatter of natural grains, 1.13 times more sigma than "equal" """
    remainder_pair_mv_um: NotNegative = 0.0
    """measured pair coefficient of whatever is not modelled above: sigma of the DIFFERENCE of a pair times sqrt(W L)"""
    current_factor_pair_percent_um: NotNegative = 0.0
    """measured pair coefficient of the current factor"""
    distance_pair_uv_per_um: NotNegative = 0.0
    """measured distance coefficient of a pair: sigma of the difference per distance, beyond the area law"""
    gradient_uv_per_um: NotNegative = 0.0
    """sigma over dies of the threshold's linear gradient across the die"""

    @model_validator(mode="after")
    def _partners(self):
        pairs = {
            "gate_edge_nm": "gate_edge_correlation_nm",
            "active_edge_nm": "active_edge_correlation_nm",
            "oxide_roughness_nm": "oxide_roughness_correlation_nm",
            "grain_mv": "grain_area_nm2",
        }
        for size, partner in pairs.items():
            if getattr(self, size) > 0 and getattr(self, partner) is None:
                raise ValueError(f"'{size}' needs '{partner}'")
            if getattr(self, size) == 0 and getattr(self, partner) is not None:
                raise ValueError(f"'{partner}' has no effect without '{size}'; remove it")
        given = self.model_fields_set
        if "edge_correlation" in given and self.gate_edge_nm == 0 and self.active_edge_nm == 0:
            raise ValueError("'edge_correlation' has no effect without rough edges; remove it")
        if "grain_cells" in given and self.grain_mv == 0:
            raise ValueError("'grain_cells' has no effect without 'grain_mv'; remove it")
        return self


class Device(Record):
    """One kind of transistor of the process."""

    channel: Literal["n", "p"]
    oxide_thickness_nm: Thickness
    """electrical gate oxide, SiO2 equivalent"""
    gate: Literal["n+ polysilicon", "p+ polysilicon"] | None = None
    gate_work_function_ev: Annotated[float, Field(ge=3, le=6.5)] | None = None
    """instead of `gate`"""
    gate_doping_per_cm3: Annotated[float, Field(ge=1e18, le=1e22)] | None = None
    """active doping of a polysilicon gate; given, its depletion is taken into account"""
    quantum_shift: bool = False
    """add the inversion layer's quantum shift (van Dort)"""
    doping_per_cm3: Doping
    """substrate under the channel"""
    surface_doping_per_cm3: Doping | None = None
    """doping from the surface down to surface_depth_nm, for a retrograde well or an implant"""
    surface_depth_nm: Positive | None = None
    oxide_charge_per_cm2: Annotated[float, Field(ge=-1e13, le=1e13)] = 0.0
    """fixed positive charges at the interface"""
    junction_depth_nm: Annotated[float, Field(ge=1, le=5000)] | None = None
    width_bias_nm: Annotated[float, Field(ge=-2000, le=2000)] = 0.0
    """electrical less drawn width"""
    length_bias_nm: Annotated[float, Field(ge=-2000, le=2000)] = 0.0
    """electrical less drawn length"""
    mobility_cm2_per_vs: Annotated[float, Field(ge=1, le=2000)] | None = None
    """low-field mobility at 300 K; a question about currents needs it"""
    mobility_degradation_per_v: NotNegative = 0.0
    """loss of mobility per volt of overdrive"""
    saturation_velocity_cm_per_s: Annotated[float, Field(ge=1e5, le=1e8)] | None = None
    """without it there is no velocity saturation"""
    overlap_capacitance_ff_per_um: NotNegative = 0.0
    """gate to source or drain, one side, per drawn width"""
    junction_capacitance_ff_per_um: NotNegative = 0.0
    """drain junction per drawn width"""
    edge: Edge
    short_channel: ShortChannel = ShortChannel()
    variation: Variation = Variation()
    scatter: Scatter = Scatter()

    @model_validator(mode="after")
    def _consistent(self):
        if (self.gate is None) == (self.gate_work_function_ev is None):
            raise ValueError("exactly one of 'gate' and 'gate_work_function_ev' is needed")
        if self.gate is None and self.gate_doping_per_cm3 is not None:
            raise ValueError("'gate_doping_per_cm3' goes with a polysilicon 'gate'; a metal does not deplete")
        if (self.surface_doping_per_cm3 is None) != (self.surface_depth_nm is None):
            raise ValueError("'surface_doping_per_cm3' and 'surface_depth_nm' go together")
        if self.short_channel.kind == "charge sharing" and self.junction_depth_nm is None:
            raise ValueError("short_channel.kind = \"charge sharing\" needs 'junction_depth_nm'")
        if self.scatter.fringe_dopants and (self.edge.kind != "field oxide" or self.scatter.dopants == "off"):
            raise ValueError(
                'scatter.fringe_dopants = true needs edge.kind = "field oxide" and dopants that are not "off"'
            )
        if self.scatter.fringe_dopants and self.edge.method == "solved":
            raise ValueError('scatter.fringe_dopants = true has no effect with edge.method = "solved"; remove it')
        return self


class Correlation(Record):
    """Correlation of two inputs, each named device.quantity.level, for instance n.length.die."""

    inputs: Annotated[list[str], Field(min_length=2, max_length=2)]
    value: Annotated[float, Field(ge=-1, le=1)]


class Process(Record):
    """A process option."""

    title: Annotated[str, Field(min_length=1, max_length=200)]
    source: str = ""
    """where the numbers come from"""
    does_not_claim: str = ""
    """what this file should not be used for"""
    temperature_c: Annotated[float, Field(ge=-70, le=200)] = 27.0
    intrinsic_density: Literal["sproul green", "misiakos tsamakis"] = "sproul green"
    """which published fit of the intrinsic carrier density"""
    device: Annotated[dict[str, Device], Field(min_length=1)]
    correlation: list[Correlation] = Field(default_factory=list)


@dataclass(frozen=True, kw_only=True)
class ProcessFile:
    """A process option and where it came from.

    name : short name, the file's own unless a job gives another
    path : the file; paths inside it start from its folder
    process : its content
    """

    name: str
    path: Path
    process: Process

    def device(self, name: str) -> Device:
        """A device by name. Raises InputError that names the known ones."""
        if name not in self.process.device:
            raise InputError(
                f"{one_line(self.path)}: device '{one_line(name)}' is not there; {nearest(name, self.process.device)}"
            )
        return self.process.device[name]

    def measured_files(self) -> list[Path]:
        """Files of measured values that the process refers to."""
        return [
            self.path.parent / spread.values_csv
            for device in self.process.device.values()
            for _, spread in device.variation
            if spread.values_csv is not None
        ]


def load_process(path, name: str | None = None) -> ProcessFile:
    """The process option in a file. Raises InputError in one line."""
    path = Path(path)
    return ProcessFile(name=name or path.stem, path=path, process=validated(Process, read_toml(path), path))
