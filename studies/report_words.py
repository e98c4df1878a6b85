"""Column names as a reader says them: plain words and a unit."""

from studies.units import split_unit

UNITS = {
    "percent_um": "% µm",
    "uv_per_um": "µV/µm",
    "mv_um": "mV µm",
    "cm2_per_vs": "cm²/Vs",
    "cm_per_s": "cm/s",
    "ff_per_um": "fF/µm",
    "per_cm3": "per cm³",
    "per_cm2": "per cm²",
    "per_v": "1/V",
    "percent": "%",
    "mv2": "mV²",
    "nm2": "nm²",
    "um2": "µm²",
    "mm2": "mm²",
    "mm": "mm",
    "nm": "nm",
    "um": "µm",
    "mv": "mV",
    "ev": "eV",
    "v": "V",
    "ua": "µA",
    "na": "nA",
    "ps": "ps",
    "ff": "fF",
}
PHRASES = {  # quantities without their unit, or whole columns
    "width": "drawn width",
    "length": "drawn length",
    "electrical_width": "electrical width",
    "vth_mean": "threshold, mean",
    "vth_sigma": "threshold, sigma",
    "vth_skew": "threshold, skew",
    "vth_p0_1": "0.1 % of transistors lie below",
    "vth_p99_9": "99.9 % of transistors lie below",
    "vth_variance": "threshold, variance",
    "vth_nominal": "threshold, nominal",
    "vth_nominal_without_edges": "the same without edges",
    "vth_device_sigma": "sigma between neighbours",
    "vth_device_sigma_area_law": "the same by the 1/√(W L) line",
    "share": "share of the variance",
    "share_sum_of_causes": "causes’ sum against the whole",
    "part": "cause",
    "yield": "chips within the period",
    "slowest_mean": "slowest path, mean",
    "slowest_sigma": "slowest path, sigma",
    "period_at_target": "period the target needs",
    "yield_method": "interval of the yield by",
    "period": "clock period",
    "area": "gate area",
    "offset_sigma": "offset, sigma",
    "error_sigma": "current error, sigma",
    "offset_p99_9": "99.9 % of offsets lie below",
    "error_p99_9": "99.9 % of errors lie below",
    "pair_yield": "pairs inside the limit",
    "chip_yield": "chips that work",
    "is_minimum": "smallest that meets the target",
    "gate_v": "gate voltage",
    "saturation_v": "drain voltage it needs",
    "gm_over_i": "gm/I",
    "min_width": "smallest width",
    "met": "target met",
    "widths_judged": "widths judged",
    "edge_shift": "shift by the edges, solved",
    "closed_form_shift": "the same by closed form",
    "closed_form_over_solved": "closed form over solved",
    "closed_form_agrees": "agree within 10 %",
    "equivalent_shape": "shape that gives the solved shift",
    "table_shift": "the same from the studies’ table",
    "dopant_sigma": "dopants’ sigma, solved",
    "dopant_sigma_ratio": "the same over its closed form",
    "dopant_skew_ratio": "dopants’ skew over its closed form",
    "table_dopant_sigma_ratio": "sigma over closed form, from the studies’ table",
    "threshold_uniform": "threshold, continuous doping",
    "lowering": "lowering by single dopants",
    "fast_sigma": "sigma by the fast model",
    "sigma_ratio": "sigma over the fast model’s",
    "device_failure": "devices outside their limits",
    "failure_vth_low": "threshold too low",
    "failure_vth_high": "threshold too high",
    "failure_leakage": "leakage too high",
    "failure_drive": "drive too low",
    "counted_failure": "counted, as a check",
    "good_chips": "good chips of wafer area",
    "chip_area": "chip area",
    "doubtful": "estimator doubts itself",
    "device": "device",
    "first_value": "first option",
    "second_value": "second option",
    "difference": "second less first",
    "better": "better",
    "interval": "intervals",
    "target_yield": "target yield",
    "yield_target": "target yield",
}
ASKED = {  # keys of a question or a process file that say less than a reader needs
    "yield": "share of chips wanted",
    "drain_v": "drain voltage, V",
    "distance_um": "distance between the devices, µm",
    "grid_nm": "layout grid, nm",
    "width_min_um": "narrowest width considered, µm",
    "width_max_um": "widest width considered, µm",
    "width_ratio": "p width over n width",
    "decides": "decided by",
    "curve": "curve shown",
    "n_device": "device that pulls down",
    "p_device": "device that pulls up",
    "paths": "paths a chip",
    "stages": "stages a path",
    "pairs": "pairs a chip",
    "devices": "devices a chip",
    "vth_window_mv": "threshold within ± of nominal, mV",
    "leakage_ceiling_times": "leakage up to, times nominal",
    "drive_floor_percent": "drive down to, % of nominal",
    "atoms.devices": "devices solved at each width",
    "charge_level": "inversion charge at threshold over C_ox kT/q",
    "mesh_nm": "side of the boxes, nm",
    "field_nm": "solved beside each edge, nm",
}
WORDS = {"vth": "threshold", "gm": "gm", "p0_1": "0.1 %", "p99_9": "99.9 %"}
TABLES = {
    "spread": "Thresholds at each width",
    "spread_shares": "What makes the spread: each cause’s share of the variance",
    "timing": "Timing at each width",
    "pair": "Pairs at the widths tried",
    "pair_lengths": "What each length costs",
    "pair_shares": "What makes the error of the answer",
    "loss": "Loss at each width",
    "compare": "Both options side by side",
    "compare_shares": "What makes the threshold’s mean and variance differ",
    "edge": "The edge at each width",
    "atoms": "Dopants one by one at each width",
}
ABOUT = {"compare": "Two options on the same random numbers: what differs, where they cross over, and why."}
RATIOS_IN_PERCENT = ("share", "yield")


def plain_words(name: str) -> str:
    """A name with underscores as words."""
    return " ".join(WORDS.get(word, word) for word in name.split("_") if word)


def parted(key: str) -> tuple[str, str | None]:
    """A key's quantity and unit, units of results alone included."""
    return (key[:-4], "mv2") if key.endswith("_mv2") else split_unit(key)


def quantity_words(key: str) -> str:
    """The quantity of a column or key as a reader says it, without its unit."""
    quantity = parted(key)[0]
    return PHRASES.get(key) or PHRASES.get(quantity) or plain_words(quantity)


def unit_words(key: str) -> str:
    """The unit of a key, as printed; nothing where it has none."""
    if key.endswith("temperature_c"):
        return "°C"
    return UNITS.get(parted(key)[1] or "", "")


def shown_as(column: str) -> tuple[str, str, float]:
    """Heading, unit and scale of a column: thresholds in mV, shares and yields in percent."""
    quantity, unit = parted(column)
    if unit == "v" and quantity.startswith("vth"):
        return quantity_words(column), "mV", 1e3
    if unit is None and quantity.split("_")[0] in RATIOS_IN_PERCENT or quantity.split("_")[-1] in RATIOS_IN_PERCENT:
        return quantity_words(column), "%", 100.0
    return quantity_words(column), unit_words(column), 1.0


def key_words(key: str, kind: str = "") -> str:
    """A key of a file in words, its unit behind a comma. kind : of the question it is a key of"""
    if f"{kind}.{key}" in ASKED:
        return ASKED[f"{kind}.{key}"]
    if key in ASKED:
        return ASKED[key]
    if key.endswith("temperature_c"):
        return "temperature, °C"
    return column_words(key)


def column_words(column: str) -> str:
    """A column's name in words, its unit behind a comma."""
    unit = unit_words(column)
    return f"{quantity_words(column)}, {unit}" if unit else quantity_words(column)


def table_words(name: str) -> str:
    """Title of a table."""
    return TABLES.get(name) or plain_words(name).capitalize()
