"""The output folder: what is in it."""

import csv
import hashlib
import json
import math
import platform
from importlib.metadata import version

import pytest

from studies.keeping import LEDGER
from studies.record import plain

TABLES = ("spread.csv", "spread_shares.csv", "timing.csv")
QUESTIONS = ("spread_1_option_a", "spread_1_option_b", "timing_2_option_a", "timing_2_option_b")


def rows_of(path):
    """A CSV as a list of dictionaries."""
    with open(path, newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def contents(folder):
    """Every file's bytes by name, but for the ledger of finished work."""
    return {path.name: path.read_bytes() for path in folder.iterdir() if path.name != LEDGER}


def test_what_is_written(small_results):
    finished, folder = small_results
    assert finished.err == f"Written to {folder}\n"
    figures = [f"{name}.{kind}" for name in QUESTIONS for kind in ("png", "svg")]
    assert sorted(contents(folder)) == sorted([*TABLES, *figures, "answers.json", "record.json", "report.html"])
    for name, content in contents(folder).items():
        start = {"png": b"\x89PNG\r\n", "svg": b"<?xml", "json": b"{\n", "html": b"<!DOCTYPE html>"}
        assert content.lstrip().startswith(start.get(name.split(".")[1], b"process,")), name


def test_exit_code_1_when_a_target_is_missed(small_results):
    assert small_results.finished.code == 1
    answers = json.loads((small_results.folder / "answers.json").read_text())["answers"]
    assert {answer["name"]: answer["met"] for answer in answers} == dict(zip(QUESTIONS, (True, True, False, True)))


def test_columns_that_were_promised(small_results):
    """Other programs read these: the first columns keep their names and their order."""
    start = {
        "spread.csv": "process,device,width_um,length_um,samples,vth_mean_v,vth_mean_low_v,vth_mean_high_v,vth_sigma_mv,"
        "vth_sigma_low_mv,vth_sigma_high_mv,vth_skew,vth_p0_1_v,vth_p99_9_v,",
        "timing.csv": "process,width_um,period_ps,yield,yield_low,yield_high,slowest_mean_ps,slowest_sigma_ps,"
        "period_at_target_ps,",
        "spread_shares.csv": "process,device,width_um,length_um,part,samples,vth_sigma_mv,vth_sigma_low_mv,"
        "vth_sigma_high_mv,share,share_low,share_high",
    }
    for name in TABLES:
        assert (small_results.folder / name).read_text().startswith(start[name])


VALUES = {
    "spread.csv": ["vth_mean_v", "vth_sigma_mv", "vth_skew", "vth_p0_1_v", "vth_p99_9_v", "vth_device_sigma_mv"],
    "spread_shares.csv": ["vth_sigma_mv", "share"],
    "timing.csv": ["yield", "slowest_mean_ps", "slowest_sigma_ps", "period_at_target_ps"],
}
UNITS = ("v", "mv", "ps")


@pytest.mark.parametrize("name", TABLES)
def test_every_value_has_its_interval(small_results, name):
    for row in rows_of(small_results.folder / name):
        for column in VALUES[name]:
            quantity, _, unit = column.rpartition("_")
            unit = unit if unit in UNITS else ""
            quantity = quantity if unit else column
            value, low, high = (
                float(row["_".join(filter(None, [quantity, bound, unit]))]) for bound in ("", "low", "high")
            )
            if column.startswith("vth_p"):  # 2000 samples do not bound a 0.1 % quantile on its far side
                assert low <= value + 2e-3 and value - 2e-3 <= high
            else:
                assert low <= value <= high


def test_the_shares_in_both_tables_are_the_same(small_results):
    """The wide table's shares have their intervals in the tidy one."""
    shares = {
        (row["process"], row["width_um"], f"share_{row['part']}"): row["share"]
        for row in rows_of(small_results.folder / "spread_shares.csv")
    }
    wide = rows_of(small_results.folder / "spread.csv")
    found = {
        (row["process"], row["width_um"], name): value
        for row in wide
        for name, value in row.items()
        if name.startswith("share_") and not name.startswith("share_sum") and not name.endswith(("_low", "_high"))
    }
    assert found == shares and len(found) > 20


def test_every_headline_says_how_well_it_is_known(small_results):
    text = (small_results.folder / "answers.json").read_text(encoding="utf-8")

    def refuse(constant):
        raise AssertionError(f"{constant} is not JSON")

    answers = json.loads(text, parse_constant=refuse)["answers"]  # NaN and Infinity would not be valid
    assert [answer["name"] for answer in answers] == list(QUESTIONS)
    for answer in answers:
        assert answer["kind"] == answer["name"].split("_")[0] and answer["sentences"] and answer["notes"]
        for name, headline in answer["headlines"].items():
            assert list(headline) == ["value", "low", "high", "level", "n", "method"], name
            assert headline["level"] == 0.95 and headline["n"] == 2000 and headline["method"]
    missed = answers[2]["headlines"]["min_width_um"]
    assert missed["value"] is None and missed["high"] is None  # no width asked for meets the period
    assert answers[3]["headlines"]["min_width_um"]["value"] == 0.12
    assert answers[0]["question"]["width_um"] == [0.12, 0.4]


def test_plain_values():
    assert plain({"a": (1, math.inf, -math.inf, math.nan, "x", None, True)}) == {
        "a": [1, None, None, None, "x", None, True]
    }


def test_a_record_says_how_to_repeat_it(small_results):
    record = json.loads((small_results.folder / "record.json").read_text(encoding="utf-8"))
    assert record["settings"] == {"seed": 7, "samples": 2000, "precision": None}
    assert record["workers"] == {"jobs": 1, "backend": "loky"}
    assert len(record["fingerprint"]) == len(hashlib.sha256().hexdigest())
    assert [question["name"] for question in record["questions"]] == list(QUESTIONS)
    for question, block in zip(record["questions"], (65536, 65536, 512, 512)):
        assert question["samples"] == 2000 and question["block_size"] == block
        assert question["device_evaluations"] > 2000 and question["seconds"] > 0
    assert record["processes"]["option_b"]["device"]["n"]["oxide_thickness_nm"] == 2.6
    assert record["versions"]["python"] == platform.python_version()
    assert record["versions"]["numpy"] == version("numpy") and record["versions"]["widthwise"] == version("widthwise")
    assert sorted(record["files"]) == sorted(contents(small_results.folder))
