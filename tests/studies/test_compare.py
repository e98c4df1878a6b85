"""Two process options compared: with themselves, with one ingredient changed, and as a person asks for it."""

from importlib.resources import files

import numpy as np
import pandas as pd
import pytest

from mc.plan import Block
from mc.streams import Streams
from studies import cli, why
from studies.compare import Compared, compare
from studies.errors import InputError
from studies.ingredients import MOST, Between
from studies.job import load_job
from studies.population import Population
from studies.pair_search import CURVE
from studies.process_file import load_process
from studies.questions import question_module
from studies.settings import Settings, Workers
from studies.why import REST, Place, _moments_of, breakdown

OPTIONS = [load_process(files("studies.examples") / f"option_{letter}.toml") for letter in "ab"]
HERE, SETTINGS = Workers(jobs=1), Settings(seed=3, samples=65_536)
SPREAD = {"device": "n", "width_um": [0.12, 0.3, 1.0], "length_um": 0.13}
TIMING = {"width_um": [0.12, 0.16, 0.2], "length_um": 0.13, "paths": 100, "stages": 10, "supply_v": 0.6}
LOSS = {"device": "n", "width_um": [0.12, 0.2], "length_um": 0.13, "vth_window_mv": 50, "devices": 1000}
PLACE = Place(
    device="n", width_um=(0.12, 2.0), length_um=0.13, body_bias_v=0, drain_v=0.05, temperature_c=None, neighbours=False
)


@pytest.fixture(autouse=True)
def few_samples(monkeypatch):
    monkeypatch.setattr(why, "SAMPLES", 2**12)


def compared(kind, asked, first, second, settings=SETTINGS):
    module = question_module(kind)
    question = module.Question(**asked)
    answers = tuple(module.answer(question, file, settings, HERE) for file in (first, second))
    return compare(Compared(kind=kind, question=question, first=first, second=second, answers=answers), settings, HERE)


def changed(file, **device):
    record = file.process.device["n"].model_copy(update=device)
    process = file.process.model_copy(update={"device": file.process.device | {"n": record}})
    return type(file)(name="changed", path=file.path, process=process)


CASES = [("spread", SPREAD), ("timing", TIMING | {"period_ps": 1270}), ("loss", LOSS | {"cell_area_um2": 1})]


@pytest.mark.parametrize("kind, asked", CASES, ids=[kind for kind, _ in CASES])
def test_an_option_compared_with_itself(kind, asked):
    answer = compared(kind, asked, OPTIONS[0], OPTIONS[0], Settings(seed=3, samples=2048))
    assert np.all(answer.table[["difference", "difference_low", "difference_high"]] == 0)
    assert set(answer.table.better) == {""}
    assert "compare_crossings" not in answer.tables and "compare_shares" not in answer.tables
    assert answer.sentences[0].startswith("No difference") and len(answer.sentences) == 1


def test_one_changed_ingredient_makes_the_whole_difference():
    other = changed(OPTIONS[0], oxide_thickness_nm=2.9)
    answer = compared("spread", SPREAD, OPTIONS[0], other)
    table, parts = answer.table, answer.tables["compare_shares"]
    assert set(parts.ingredient) == {"oxide"}
    for width in (0.12, 1.0):
        part = parts[parts.width_um == width].iloc[0]
        row = table[(table.width_um == width) & (table.quantity == "vth_mean_mv")].iloc[0]
        assert part.vth_mean_low_mv < row.difference_high and row.difference_low < part.vth_mean_high_mv
    assert answer.sentences[0].startswith("changed spreads less at every width")


def test_shares_add_up_to_the_change():
    parts, evaluations = breakdown(*OPTIONS, PLACE, SETTINGS, HERE, lambda *_: None)
    assert evaluations == (64 + 9) * 2 * why.SAMPLES  # all mixtures of six, and each of eight alone beside none
    assert len({part.ingredient for part in parts}) == MOST and REST in {part.ingredient for part in parts}
    between = Between(*OPTIONS, "n")
    ends = [_moments_of((between.option(chosen), PLACE, SETTINGS.seed))[0] for chosen in ((), between.names())]
    for row, name in enumerate(("mean_mv", "variance_mv2")):
        for column, width in enumerate(PLACE.width_um):
            total = sum(getattr(part, name).value for part in parts if part.width_um == width)
            assert total == pytest.approx((ends[1] - ends[0])[row, column], rel=1e-9)


def test_with_all_ingredients_the_first_option_is_the_second():
    between = Between(*OPTIONS, "n")
    mixture, second = (Population(file, "n") for file in (between.option(between.names()), OPTIONS[1]))
    draws = Streams(1, Block(0, 100).number, second.names()).take(100)
    thresholds = [
        each.thresholds(draws, each.geometry(0.2, 0.13), each.silicon(draws), 0.05) for each in (mixture, second)
    ]
    assert np.array_equal(*thresholds)


def test_with_no_ingredient_the_first_option_stays():
    between = Between(*OPTIONS, "n")
    assert between.option(()).process.device["n"] == OPTIONS[0].process.device["n"]
    assert Between(OPTIONS[0], OPTIONS[0], "n").names() == []


def test_measured_values_keep_their_own_folder(tmp_path):
    for folder in ("one", "two"):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "t.csv").write_text("t\n3.1\n3.2\n3.3\n" if folder == "one" else "t\n3.0\n3.2\n3.4\n")
        text = (files("studies.examples") / "option_a.toml").read_text()
        law = '{ law = "empirical", values_csv = "t.csv", values_column = "t", values_level = "wafer" }'
        lines = [
            f"oxide_thickness = {law}" if line.startswith("oxide_thickness =") else line for line in text.splitlines()
        ]
        lines = lines[: next(k for k, line in enumerate(lines) if "same oxidation" in line)]
        (tmp_path / folder / "p.toml").write_text("\n".join(lines))
    first, second = (load_process(tmp_path / folder / "p.toml", folder) for folder in ("one", "two"))
    between = Between(first, second, "n")
    assert between.names() == ["oxide thickness variation"]
    for chosen, folder in (((), "one"), (between.names(), "two")):
        assert between.option(chosen).measured_files() == [tmp_path / folder / "t.csv"]


def test_timing_says_both_minimum_widths_and_their_difference():
    answer = compared("timing", TIMING | {"period_ps": 1120, "yield": 0.9}, *OPTIONS, Settings(seed=3, samples=2048))
    row = answer.table[answer.table.quantity == "min_width_um"].iloc[0]
    assert row.difference == pytest.approx(row.second_value - row.first_value) and row.better == "option_b"
    assert "needs narrower gates" in answer.sentences[0]


def test_the_faster_option_wins_where_both_meet_the_target_everywhere():
    answer = compared("timing", TIMING | {"period_ps": 3000, "yield": 0.9}, *OPTIONS, Settings(seed=3, samples=2048))
    assert answer.sentences[0].startswith("option_b is faster at every width")


def test_paired_intervals_are_narrower_than_separate_ones():
    table = compared("spread", SPREAD, *OPTIONS).table
    wide = table[(table.width_um == 1.0) & (table.quantity == "vth_mean_mv")].iloc[0]
    separate = np.hypot(wide.first_value_high - wide.first_value_low, wide.second_value_high - wide.second_value_low)
    assert (wide.difference_high - wide.difference_low) < separate / 3


def job(tmp_path, entry):
    for letter in "ab":
        (tmp_path / f"{letter}.toml").write_text((files("studies.examples") / f"option_{letter}.toml").read_text())
    (tmp_path / "job.toml").write_text(
        f'title = "t"\n[settings]\nsamples = 2000\n[process]\na = "a.toml"\nb = "b.toml"\n[[question]]\nask = "spread"\n'
        f'device = "n"\nlength_um = 0.13\nwidth_um = [0.2, 0.5]\n{entry}\n'
    )
    return tmp_path / "job.toml"


def test_a_job_compares_and_writes_it(tmp_path, capsys):
    path = job(tmp_path, 'process = ["a", "b"]\ncompare = true')
    assert cli.main(["run", str(path), "--out", str(tmp_path / "out"), "--jobs", "1"]) == 0
    capsys.readouterr()
    table = pd.read_csv(tmp_path / "out" / "compare.csv")
    assert set(table["first"]) == {"a"} and set(table["second"]) == {"b"} and len(table) == 10
    assert {"compare_1_a_b.png", "compare_shares.csv"} <= {file.name for file in (tmp_path / "out").iterdir()}


def test_a_question_asked_twice_is_answered_once(tmp_path):
    path = job(
        tmp_path,
        'process = "a"\n[[question]]\nask = "spread"\ndevice = "n"\nlength_um = 0.13\nwidth_um = [0.2, 0.5]\nprocess = "a"',
    )
    first, second = load_job(path, {}).answers(HERE, lambda *_: lambda *_: None)
    assert first is second


@pytest.mark.parametrize(
    "entry, words",
    [
        ('process = "a"\ncompare = true', "two process options are needed, 1 named"),
        ('process = ["a", "b"]\ncompare = "yes"', "true or false is needed"),
    ],
)
def test_what_cannot_be_compared(tmp_path, entry, words):
    with pytest.raises(InputError, match=words):
        load_job(job(tmp_path, entry), {})


def test_the_command(tmp_path, capsys):
    paths = [str(tmp_path / f"{letter}.toml") for letter in "ab"]
    job(tmp_path, 'process = "a"')
    asked = ["--question", "spread", "--device", "n", "--width-um", "0.2", "1", "--length-um", "0.13"]
    assert cli.main(["compare", *paths, *asked, "--samples", "40000", "--jobs", "1"]) == 0
    printed = capsys.readouterr().out
    assert "b spreads less at every width" in printed and "Why, at W = 0.2 um" in printed
    assert max(map(len, printed.splitlines())) <= 80


@pytest.mark.parametrize(
    "arguments, words",
    [
        (["--device", "n"], "--question"),
        (["--question", "spred"], "invalid choice"),
        (["--question", "timing", "--device", "n"], "unknown argument --device"),
    ],
)
def test_a_command_that_lacks_something(tmp_path, capsys, arguments, words):
    job(tmp_path, 'process = "a"')
    assert cli.main(["compare", str(tmp_path / "a.toml"), str(tmp_path / "b.toml"), *arguments]) == 2
    message = capsys.readouterr().err
    assert words in message and message.count("\n") == 1


PAIR = {"device": "n", "pairs": 2, "yield": 0.9, "length_um": [1.0], "gm_over_i_per_v": 15}


@pytest.mark.parametrize(
    "kind, limit, curve",
    [
        ("differential pair", {"limit_mv": 3}, "offset_sigma_mv"),
        ("current mirror", {"limit_percent": 5}, "error_sigma_percent"),
    ],
)
def test_pairs_are_compared_by_their_own_error(kind, limit, curve):
    answer = compared("pair", PAIR | {"kind": kind} | limit, *OPTIONS, Settings(seed=3, samples=2000))
    assert answer.question["curve"] == curve and (answer.table.quantity == curve).sum() == CURVE
    assert answer.sentences[0].startswith("option_b needs smaller pairs")


def test_the_devices_evaluated_are_counted():
    other = changed(OPTIONS[0], oxide_thickness_nm=2.9)
    answer = compared("spread", SPREAD, OPTIONS[0], other, Settings(seed=3, samples=16_384))
    controlled, mixtures = 2 * 3 * 16_384, 2 * 2 * why.SAMPLES
    assert answer.evaluations == controlled + mixtures
