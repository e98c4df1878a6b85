"""Tables of the report: every number with its interval in one cell, and nothing lost on the clipboard."""

import numpy as np
import pandas as pd

from studies.report_tables import bounds_of, tables_shown
from studies.report_words import key_words, shown_as

TABLE = pd.DataFrame(
    {
        "process": ["a", "a"],
        "width_um": [0.12, 0.2],
        "vth_mean_v": [0.2331, 0.2115],
        "vth_mean_low_v": [0.2330, 0.2114],
        "vth_mean_high_v": [0.2332, 0.2116],
        "failure_vth_low": [5e-6, 1e-8],  # a quantity whose name ends as a bound's does
        "failure_vth_low_low": [4e-6, 0.9e-8],
        "failure_vth_low_high": [6e-6, 1.1e-8],
        "supply_v": [0.6, 0.6],
        "gate_v": [0.28, 0.2896],
        "yield": [0.99, np.nan],
        "yield_method": ["gamma", "gamma"],
        "temperature_c": [None, None],
        "is_minimum": [False, True],
    }
)


def shown_of(table=TABLE, question=None, beside=()):
    return tables_shown("some_kind", table, question or {"supply_v": 0.6}, dict.fromkeys(beside))


def test_columns_and_what_is_said_once():
    (shown,) = shown_of()
    assert [(column.raw, column.unit) for column in shown.columns] == [
        ("width_um", "µm"),
        ("vth_mean_v", "mV"),
        ("failure_vth_low", ""),
        ("gate_v", "V"),
        ("yield", "%"),
        ("is_minimum", ""),
    ]
    assert shown.constants == (("interval of the yield by", "gamma"),)
    assert [row.marked for row in shown.rows] == [False, True]
    assert shown.title == "Some kind" and shown.file == "some_kind.csv"


def test_value_and_interval_stand_in_one_cell():
    (shown,) = shown_of()
    cell, copied = shown.rows[0].cells[1]
    assert (cell.text, cell.interval) == ("233.10", "± 0.10")
    assert copied == "0.2331\t0.233\t0.2332"
    assert shown.columns[1].copied == "vth_mean_v\tvth_mean_low_v\tvth_mean_high_v"
    assert shown.rows[1].cells[4][0].text == "–"


def test_copied_rows_have_as_many_cells_as_the_heading():
    (shown,) = shown_of()
    wide = sum(column.copied.count("\t") + 1 for column in shown.columns)
    assert {sum(copied.count("\t") + 1 for _, copied in row.cells) for row in shown.rows} == {wide}


def test_a_name_cannot_break_a_copied_table():
    table = pd.DataFrame({"device": ["n\tx\ny", "p"], "width_um": [1.0, 2.0]})
    (shown,) = shown_of(table)
    assert shown.rows[0].cells[0][1] == "n\\x09x\\x0ay" and shown.rows[0].cells[0][0].text == "n\\x09x\\x0ay"


def test_shares_get_a_column_a_cause_and_levels_a_table_of_their_own():
    rows = [
        {"width_um": width, "part": part, "share": share, "share_low": share * 0.9, "share_high": share * 1.1}
        for width in (0.1, 1.0)
        for part, share in (
            ("doping", 0.2),
            ("dopants", 0.7),
            ("grains", 0.001),
            ("level_die", 0.4),
            ("level_lot", 0.1),
        )
    ]
    causes, levels = tables_shown("spread_shares", pd.DataFrame(rows), {})
    assert [column.heading for column in causes.columns] == ["drawn width", "dopants", "doping"]
    assert causes.left_out == ("grains",)
    assert [column.heading for column in levels.columns] == ["drawn width", "die", "lot"]
    one = tables_shown("pair_shares", pd.DataFrame(rows[:3]), {})
    assert [row.cells[0][0].text for row in one[0].rows] == ["dopants", "doping", "grains"]


def test_shares_that_have_their_own_table_are_not_said_twice():
    table = TABLE.assign(share_doping=0.1, share_doping_low=0.1, share_doping_high=0.1)
    assert "share_doping" in [column.raw for column in shown_of(table)[0].columns]
    assert "share_doping" not in [column.raw for column in shown_of(table, beside=["some_kind_shares"])[0].columns]


def test_words_of_columns_and_keys():
    assert shown_as("vth_sigma_mv") == ("threshold, sigma", "mV", 1.0)
    assert shown_as("chip_yield") == ("chips that work", "%", 100.0)
    assert shown_as("crossover_width_um") == ("crossover width", "µm", 1.0)  # unknown: its own words
    assert shown_as("vth_difference_v") == ("threshold difference", "mV", 1e3)
    assert key_words("doping_per_cm3") == "doping, per cm³" and key_words("gate") == "gate"
    assert key_words("temperature_c") == "temperature, °C"


def test_bounds_are_found_by_their_names():
    columns = {
        "vth_variance_mv2",
        "vth_variance_low_mv2",
        "vth_variance_high_mv2",
        "failure_vth_low",
        "vth_low_v",
        "vth_high_v",
    }
    assert bounds_of("vth_variance_mv2", columns) == ("vth_variance_low_mv2", "vth_variance_high_mv2")
    assert bounds_of("failure_vth_low", columns) is None  # a name that ends as a bound's does
    assert bounds_of("width_um", columns) is None


def test_quantities_below_each_other_are_named_and_rounded_each_in_its_manner():
    rows = {"quantity": ["vth_mean_mv", "chip_yield"], "first_value": [10.0, 0.9], "first_value_low": [9.0, 0.7]}
    (shown,) = shown_of(pd.DataFrame(rows | {"first_value_high": [11.0, 0.95]}))
    assert [row.cells[0][0].text for row in shown.rows] == ["threshold, mean, mV", "chips that work"]
    assert [row.cells[1][0].interval for row in shown.rows] == ["± 1.0", "0.70 to 0.95"]
