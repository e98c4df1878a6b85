"""The unit at the end of a key's name, and what it is worth."""

from types import SimpleNamespace
from typing import get_args

import pytest

from studies.process_file import Correlation, Device, Edge, Length, Process, Relative, Scatter, ShortChannel, Voltage
from studies.questions import SUMMARIES, question_module
from studies.settings import Settings
from studies.units import SUFFIXES, micrometres, si, split_unit

RECORDS = (Process, Device, Edge, ShortChannel, Scatter, Relative, Length, Voltage, Correlation, Settings)
# keys of floats that are pure numbers
NUMBERS = {"shape", "eta", "cut_sigmas", "value", "precision", "fan_out", "width_ratio", "target_yield", "table_factor"}
NUMBERS |= {"leakage_ceiling_times", "clustering", "charge_level"}


@pytest.mark.parametrize(
    "key, given, expected",
    [
        ("oxide_thickness_nm", 3.2, 3.2e-9),
        ("width_um", 0.12, 1.2e-7),
        ("doping_per_cm3", 4e17, 4e23),
        ("oxide_charge_per_cm2", 3e10, 3e14 * 1.602176634e-19),
        ("grain_area_nm2", 25.0, 25e-18),
        ("cell_area_um2", 0.4, 4e-13),
        ("fixed_area_mm2", 2.0, 2e-6),
        ("edge_exclusion_mm", 3.0, 3e-3),
        ("flat_band_mv", 5.0, 5e-3),
        ("gate_work_function_ev", 4.6, 4.6),
        ("body_bias_v", 1.5, 1.5),
        ("mobility_cm2_per_vs", 320.0, 0.032),
        ("mobility_degradation_per_v", 0.3, 0.3),
        ("saturation_velocity_cm_per_s", 8e6, 8e4),
        ("overlap_capacitance_ff_per_um", 0.28, 2.8e-10),
        ("wire_capacitance_ff", 0.4, 4e-16),
        ("remainder_pair_mv_um", 1.2, 1.2e-9),
        ("current_factor_pair_percent_um", 0.9, 0.9e-8),
        ("die_percent", 0.5, 0.005),
        ("period_ps", 5000.0, 5e-9),
        ("drain_current_ua", 2.0, 2e-6),
        ("leakage_ceiling_na", 5.0, 5e-9),
        ("gradient_uv_per_um", 3.0, 3.0),  # 1 uV/um is 1 V/m
    ],
)
def test_every_unit_in_si(key, given, expected):
    assert si(SimpleNamespace(**{key: given}), key) == pytest.approx(expected, rel=1e-14, abs=0)


def test_every_suffix_is_tried_above():
    tried = next(mark for mark in test_every_unit_in_si.pytestmark).args[1]
    assert {split_unit(key)[1] for key, _, _ in tried} == set(SUFFIXES)


def test_temperature_is_absolute():
    assert si(SimpleNamespace(temperature_c=27.0), "temperature_c") == pytest.approx(300.15, rel=1e-14, abs=0)


def test_a_key_without_a_unit_has_none():
    assert split_unit("shape") == ("shape", None)
    with pytest.raises(KeyError, match="shape ends in no known unit"):
        si(SimpleNamespace(shape=1.0), "shape")


def test_longest_ending_wins():
    assert split_unit("remainder_pair_mv_um") == ("remainder_pair", "mv_um")
    assert split_unit("doping_per_cm3") == ("doping", "per_cm3")
    for suffix in SUFFIXES:
        assert split_unit(f"quantity_{suffix}") == ("quantity", suffix)


def test_micrometres():
    assert micrometres(1.2e-7) == pytest.approx(0.12, rel=1e-14, abs=0)


@pytest.mark.parametrize("record", [*RECORDS, *(question_module(kind).Question for kind in SUMMARIES)], ids=str)
def test_every_key_of_a_number_says_its_unit(record):
    """Only pure numbers go without: a key whose unit is forgotten would be read as SI by one, as nm by another."""
    for key, field in record.model_fields.items():
        kinds = str(field.annotation) if get_args(field.annotation) else getattr(field.annotation, "__name__", "")
        if "float" in kinds:
            assert key in NUMBERS or key.endswith("temperature_c") or split_unit(key)[1], key
