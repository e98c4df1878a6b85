"""What two process options differ in, and options in between: some ingredients of one, the rest of the other."""

from dataclasses import replace

from studies.process_file import ProcessFile

MOST = 6  # ingredients told apart; each doubles the work
PROCESS_KEYS = ("temperature_c", "intrinsic_density", "correlation")
DEVICE_KEYS = {
    "oxide": ("oxide_thickness_nm", "oxide_charge_per_cm2"),
    "gate": ("gate", "gate_work_function_ev", "gate_doping_per_cm3", "quantum_shift"),
    "doping profile": ("doping_per_cm3", "surface_doping_per_cm3", "surface_depth_nm"),
    "edge": ("edge",),
    "width bias": ("width_bias_nm",),
    "length and junctions": ("length_bias_nm", "junction_depth_nm", "short_channel"),
    "current": (
        "mobility_cm2_per_vs",
        "mobility_degradation_per_v",
        "saturation_velocity_cm_per_s",
        "overlap_capacitance_ff_per_um",
        "junction_capacitance_ff_per_um",
    ),
}
SCATTER_KEYS = {
    "edge": ("fringe_dopants",),  # which ask for an edge of their kind
    "dopant scatter": ("dopants",),
    "gate edges": ("gate_edge_nm", "gate_edge_correlation_nm"),
    "active edges": ("active_edge_nm", "active_edge_correlation_nm"),
    "shape of rough edges": ("edge_correlation",),
    "oxide roughness": ("oxide_roughness_nm", "oxide_roughness_correlation_nm"),
    "gate grains": ("grain_mv", "grain_area_nm2", "grain_cells"),
    "measured remainder": ("remainder_pair_mv_um",),
}
UNSEEN = ("current", "mobility variation")  # ingredients that move no threshold


class Between:
    """Options between two: the first with chosen ingredients of the second.

    first, second : the options; device : the device's name in both
    """

    def __init__(self, first: ProcessFile, second: ProcessFile, device: str):
        self._device = device
        self._first, self._second = (_with_full_paths(file, device) for file in (first, second))

    def names(self) -> list[str]:
        """Ingredients that differ and can move a threshold."""
        found = ["process-wide settings"] if self._differ(PROCESS_KEYS, lambda file: file.process) else []
        found += [name for name, keys in DEVICE_KEYS.items() if self._differ(keys, self._record)]
        variations = type(self._record(self._first).variation).model_fields
        found += [f"{key.replace('_', ' ')} variation" for key in variations if self._differ((key,), self._variation)]
        found += [name for name, keys in SCATTER_KEYS.items() if self._differ(keys, self._scatter)]
        return [name for name in dict.fromkeys(found) if name not in UNSEEN]

    def option(self, chosen) -> ProcessFile:
        """The first option with the ingredients named in `chosen` taken from the second."""
        mine, other = self._record(self._first), self._record(self._second)
        chosen = set(chosen)
        device = _taken(mine, other, [key for name, keys in DEVICE_KEYS.items() if name in chosen for key in keys])
        varied = [name.removesuffix(" variation").replace(" ", "_") for name in chosen if name.endswith(" variation")]
        scattered = [key for name, keys in SCATTER_KEYS.items() if name in chosen for key in keys]
        device = device.model_copy(
            update={
                "variation": _taken(mine.variation, other.variation, varied),
                "scatter": _taken(mine.scatter, other.scatter, scattered),
            }
        )
        process = self._first.process
        if "process-wide settings" in chosen:
            process = _taken(process, self._second.process, PROCESS_KEYS)
        return replace(self._first, process=process.model_copy(update={"device": {self._device: device}}))

    def _differ(self, keys, part) -> bool:
        mine, other = part(self._first), part(self._second)
        return any(getattr(mine, key) != getattr(other, key) for key in keys)

    def _record(self, file: ProcessFile):
        return file.process.device[self._device]

    def _variation(self, file: ProcessFile):
        return self._record(file).variation

    def _scatter(self, file: ProcessFile):
        return self._record(file).scatter


def _taken(mine, other, keys):
    """A record with some keys' values from another."""
    return mine.model_copy(update={key: getattr(other, key) for key in keys})


def _with_full_paths(file: ProcessFile, device: str) -> ProcessFile:
    """The option with one device, its measured values named by their full paths: a mixture has no folder of its own."""
    record = file.process.device[device]
    spreads = {
        name: spread.model_copy(update={"values_csv": str((file.path.parent / spread.values_csv).absolute())})
        for name, spread in record.variation
        if spread.values_csv is not None
    }
    record = record.model_copy(update={"variation": record.variation.model_copy(update=spreads)})
    # correlations with other devices' inputs do not act on one device
    kept = [each for each in file.process.correlation if all(name.startswith(f"{device}.") for name in each.inputs)]
    process = file.process.model_copy(update={"device": {device: record}, "correlation": kept})
    return replace(file, process=process)
