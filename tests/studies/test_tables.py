"""Tables, headlines and sentences: no number cut, every number with its interval, rows that can be told apart."""

import csv
import json

import numpy as np
import pytest
from scipy.special import ndtr

from mc.intervals import bounded_mean

SPREAD = ["--device", "n", "--length-um", "0.13", "--samples", "1000", "--jobs", "1"]
TIMING = [
    "--width-um",
    "0.12",
    "--length-um",
    "0.13",
    "--paths",
    "1500",
    "--supply-v",
    "0.6",
    "--samples",
    "1000",
    "--jobs",
    "1",
]


@pytest.fixture
def option_a(make_job):
    """The demo's option A, as a file."""
    return make_job().parent / "option_a.toml"


@pytest.mark.filterwarnings("ignore::UserWarning")
def test_a_process_without_scatter_between_neighbours(widthwise, option_a):
    head, _, tail = option_a.read_text().partition("[device.n.scatter]")
    option_a.write_text(head + "[device.n.scatter]\ndopants = 'off'\n" + tail[tail.index("[device.p]") :])
    assert widthwise("spread", option_a, *SPREAD, "--width-um", "0.12").code == 0


@pytest.mark.parametrize("case", ["long periods", "wide spread"])
def test_no_number_is_cut(widthwise, option_a, case):
    if case == "long periods":
        finished = widthwise("timing", option_a, *TIMING, "--stages", "9000", "--period-ps", "1000000")
    else:
        finished = widthwise("spread", option_a, *SPREAD, "--width-um", "0.1", "--length-um", "0.08")
    assert finished.code in (0, 1) and "…" not in finished.out


def test_rows_of_two_questions_can_be_told_apart(widthwise, make_job, tmp_path):
    text = make_job({'["option_a", "option_b"]\ndevice': '"option_a"\ndevice'}).read_text()
    text = text[: text.rindex("[[question]]")]
    text += text[text.index("[[question]]") :] + "temperature_c = 85\n"
    assert widthwise("run", make_job(text=text), "--out", tmp_path / "results", "--jobs", 1).code == 0
    with open(tmp_path / "results" / "spread.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    # columns of what was asked, not of what was answered
    asked = [tuple(row[key] for key in row if not key.startswith(("vth", "share", "samples"))) for row in rows]
    assert len(set(asked)) == len(rows)


def test_every_number_of_the_wide_table_has_its_interval(small_results):
    with open(small_results.folder / "spread.csv", newline="") as file:
        columns = csv.DictReader(file).fieldnames
    identity = {"process", "device", "width_um", "length_um", "samples", "body_bias_v", "drain_v", "temperature_c"}
    exact = {"vth_nominal_v", "vth_nominal_without_edges_v"}  # no samples in them
    bounds = {name for name in columns if "_low" in name or "_high" in name}
    for name in set(columns) - identity - exact - bounds:
        stem, unit = (
            (name.rsplit("_", 1)[0], "_" + name.rsplit("_", 1)[1]) if name.endswith(("_v", "_mv")) else (name, "")
        )
        assert {f"{stem}_low{unit}", f"{stem}_high{unit}"} <= bounds, name


def test_widths_that_differ_in_the_seventh_digit(widthwise, option_a):
    finished = widthwise("spread", option_a, *SPREAD, "--width-um", "0.12", "0.12000001", "--json")
    (answer,) = json.loads(finished.out)["answers"]
    assert len(answer["headlines"]) == 2


def test_a_question_in_the_answers_can_be_asked_again(small_results):
    answers = json.loads((small_results.folder / "answers.json").read_text())["answers"]
    assert "yield" in answers[2]["question"]


@pytest.mark.parametrize("distance, most_misses", [(3.5, 0.1), (4.0, 0.1)])
def test_a_yield_near_one_is_covered_by_its_interval(distance, most_misses):
    """Dies whose slowest path spreads a tenth as much within a die as between dies: the demo's filter is such a chip.

    With 1000 dies and a loss of 2e-4 nearly all intervals lie wholly below the truth: "yield 100.00 % [100.00, 100.00]".
    """
    within = 0.1
    truth = ndtr(-distance / np.sqrt(1 + within**2))
    generator = np.random.default_rng(1)
    misses = 0
    for _ in range(200):
        loss = ndtr((generator.standard_normal(1000) - distance) / within)
        estimate = bounded_mean(loss.sum(), (loss * loss).sum(), loss.size)
        misses += not estimate.low <= truth <= estimate.high
    assert misses / 200 <= most_misses
