"""A process file is either understood or refused in one line that names file, key, value and what is allowed."""

import math

import pytest

from studies.process_file import Process, load_process

NUMBER = "device.n.oxide_thickness_nm"


@pytest.fixture
def refused(refusal, make_demo_process):
    """A function giving what is said when the demo's keys are changed so."""
    return lambda changes: refusal(make_demo_process, changes)


def test_the_demo_is_valid(tmp_path, demo_text):
    path = tmp_path / "option_a.toml"
    path.write_text(demo_text)
    file = load_process(path)
    assert isinstance(file.process, Process)
    assert (file.name, file.path) == ("option_a", path)
    assert load_process(path, "other").name == "other"


def test_a_process_is_frozen(make_demo_process):
    with pytest.raises(ValueError, match="frozen"):
        make_demo_process().process.temperature_c = 30.0


@pytest.mark.parametrize(
    "key, value, said",
    [
        (NUMBER, -3.2, "input should be greater than 0.2"),
        (NUMBER, 0, "input should be greater than 0.2"),
        (NUMBER, math.nan, "input should be a finite number"),
        (NUMBER, math.inf, "input should be a finite number"),
        (NUMBER, "3.2", "input should be a valid number"),
        (NUMBER, True, "input should be a valid number"),
        (NUMBER, 10**400, "input should be a valid number"),
        ("device.n.junction_depth_nm", -60.0, "input should be greater than or equal to 1"),
        ("device.n.doping_per_cm3", 9e12, "input should be greater than or equal to 1"),
        ("device.n.doping_per_cm3", 2e21, "input should be less than or equal to 1"),
        ("device.n.mobility_cm2_per_vs", 0.0, "input should be greater than or equal to 1"),
        ("device.n.channel", "N", "input should be 'n' or 'p'"),
        ("device.n.edge.kind", "locos", "input should be 'none', 'field oxide', 'trench' or 'table'"),
        ("device.n.scatter.gate_edge_nm", -1.0, "input should be greater than or equal to 0"),
        ("device.n.scatter.dopants", "on", "input should be 'counted', 'normal' or 'off'"),
        ("device.n.quantum_shift", 1, "input should be a valid boolean"),
        ("device.n.variation.doping.die_percent", 31, "input should be less than or equal to 30"),
        ("temperature_c", -273.0, "input should be greater than or equal to -70"),
        ("title", "", "string should have at least 1 character"),
    ],
)
def test_a_bad_value_is_shown_with_what_is_allowed(refused, key, value, said):
    message = refused({key: value})
    assert "option_a.toml: " + key in message
    shown = repr(value)
    assert f" = {shown if len(shown) < 100 else shown[:50]}" in message
    assert said in message


@pytest.mark.parametrize("value", [[3.2], {"nm": 3.2}])
def test_a_table_or_list_for_a_number(refused, value):
    assert f"{NUMBER}: input should be a valid number" in refused({NUMBER: value})


@pytest.mark.parametrize(
    "key, said",
    [
        ("device.n.oxide_thicknes_nm", "device.n: unknown key 'oxide_thicknes_nm'; did you mean 'oxide_thickness_nm'?"),
        ("device.n.oxide_thickness", "unknown key 'oxide_thickness'; did you mean 'oxide_thickness_nm'?"),
        ("device.n.oxide_thickness_um", "key 'oxide_thickness_um' has the wrong unit; this quantity is given as"),
        ("device.n.width_bias_um", "this quantity is given as 'width_bias_nm'"),
        ("device.n.variation.doping.die_nm", "device.n.variation.doping: key 'die_nm' has the wrong unit"),
        ("device.n.variation.width.die_percent", "this quantity is given as 'die_nm'"),
        ("temperature_k", "unknown key 'temperature_k'; did you mean 'temperature_c'?"),
        ("device.n.scatter.zzz", "unknown key 'zzz'; known: dopants, fringe_dopants, gate_edge_nm"),
    ],
)
def test_an_unknown_key_meets_the_nearest(refused, key, said):
    message = refused({key: 1.0})
    assert message.startswith("/") and "option_a.toml: " in message
    assert said in message


@pytest.mark.parametrize("key", ["title", "device", NUMBER, "device.n.edge", "device.n.edge.kind", "device.p.channel"])
def test_a_missing_key_is_named(refused, key):
    assert refused({key: None}).endswith(f"option_a.toml: {key} is missing")


TRENCH = {"kind": "trench", "field_oxide_nm": 300.0}
TABLE = {"kind": "table", "table_width_um": [0.1, 1.0], "table_factor": [1.2, 1.02]}


@pytest.mark.parametrize(
    "changes, said",
    [
        ({"device.n.edge": {"kind": "trench"}}, "kind = \"trench\" needs 'field_oxide_nm'"),
        ({"device.n.edge": TRENCH | {"shape": 1.0}}, "'shape' has no effect with kind = \"trench\"; remove it"),
        ({"device.n.edge": {"kind": "none", "shape": 1.0}}, "'shape' has no effect with kind = \"none\""),
        ({"device.n.edge.trench_depth_nm": 300}, "'trench_depth_nm' has no effect with kind = \"field oxide\""),
        ({"device.n.edge": {"kind": "table"}}, "kind = \"table\" needs 'table_width_um'"),
        ({"device.n.edge": TABLE | {"table_factor": [1.2]}}, "the same number of entries, two or more"),
        ({"device.n.edge": TABLE | {"table_width_um": [1.0, 0.1]}}, "table_width_um must increase"),
        ({"device.n.short_channel": {"kind": "none", "eta": 1.0}}, "'eta' has no effect with kind = \"none\""),
        (
            {"device.n.short_channel": {"kind": "charge sharing"}, "device.n.junction_depth_nm": None},
            "'junction_depth_nm'",
        ),
        ({"device.n.gate": None}, "exactly one of 'gate' and 'gate_work_function_ev' is needed"),
        ({"device.n.gate_work_function_ev": 4.6}, "exactly one of 'gate' and 'gate_work_function_ev' is needed"),
        ({"device.n.surface_depth_nm": 10.0}, "'surface_doping_per_cm3' and 'surface_depth_nm' go together"),
        ({"device.n.scatter.gate_edge_correlation_nm": None}, "'gate_edge_nm' needs 'gate_edge_correlation_nm'"),
        ({"device.n.scatter.grain_mv": 30.0}, "'grain_mv' needs 'grain_area_nm2'"),
        ({"device.n.scatter.fringe_dopants": True, "device.n.edge": TRENCH}, 'needs edge.kind = "field oxide"'),
        ({"device.n.scatter.fringe_dopants": True, "device.n.scatter.dopants": "off"}, 'dopants that are not "off"'),
        ({"device.n.variation.doping.cut_sigmas": 3.0}, "'cut_sigmas' and law = \"truncated normal\" go together"),
        ({"device.n.variation.doping.law": "truncated normal"}, "'cut_sigmas' and law = \"truncated normal\""),
        ({"device.n.variation.doping.law": "empirical"}, "needs values_csv, values_column and values_level"),
        ({"device.n.variation.doping.values_csv": "a.csv"}, "needs values_csv, values_column and values_level"),
        ({"device.n.variation.width.law": "lognormal"}, "width: a lognormal law needs a quantity given in percent"),
    ],
)
def test_keys_that_do_not_go_together(refused, changes, said):
    message = refused(changes)
    assert "option_a.toml: device.n" in message
    assert said in message


def test_controls_in_names_and_values_are_shown_not_obeyed(refused):
    assert "unknown key '\\x1b[31m\\x0a'" in refused({"\x1b[31m\n": 1})
    assert "'\\x1b[31mred\\n'" in refused({"device.n.channel": "\x1b[31mred\n"})
    assert "device.\\x07\\x0a.channel = 'x'" in refused({"device.\x07\n": {"channel": "x"}})
    assert "\\x202e" in refused({"\u202e": 1})  # right-to-left override: prints the rest of the line backwards


def test_a_very_long_value_is_cut(refused):
    assert len(refused({"device.n.channel": "x" * 100_000})) < 400
    assert len(refused({"x" * 10_000: 1})) < 400
