"""What a person reads: 80 columns, nothing cut, and text from files printed as text."""

import json
import xml.etree.ElementTree as ElementTree

import pytest

SPREAD = ["--width-um", "0.12", "0.4", "--length-um", "0.13", "--samples", "1000", "--jobs", "1"]
TIMING = ["--width-um", "0.12", "--length-um", "0.13", "--period-ps", "4500", "--paths", "1500", "--stages", "40"]
TIMING += ["--supply-v", "0.6", "--samples", "1000", "--jobs", "1"]


def assert_fits(text):
    """80 columns, and no number cut off: rich marks a cut with an ellipsis."""
    assert max(map(len, text.splitlines())) <= 80
    assert "…" not in text


def test_tables_fit_80_columns(small_results):
    assert_fits(small_results.finished.out)


@pytest.mark.parametrize("device", ["n", "p"])
@pytest.mark.parametrize("option", ["option_a", "option_b"])
def test_tables_of_both_devices_fit(widthwise, make_job, option, device):
    finished = widthwise("spread", make_job().parent / f"{option}.toml", "--device", device, *SPREAD)
    assert finished.code == 0
    assert_fits(finished.out)
    assert finished.err == ""  # progress is silent when nobody watches


def test_tables_show_what_the_files_hold(small_results):
    """The table's first sigma and yield with their bounds are those of the headlines."""
    answers = json.loads((small_results.folder / "answers.json").read_text())["answers"]
    sigma = answers[0]["headlines"]["vth_sigma_mv at width_um 0.12"]
    assert "{value:.2f} [{low:.2f}, {high:.2f}]".format(**sigma) in small_results.finished.out
    share = {
        key: 100 * value
        for key, value in answers[2]["headlines"]["yield at width_um 0.12"].items()
        if key in ("value", "low", "high")
    }
    assert "{value:.2f} [{low:.2f}, {high:.2f}]".format(**share) in small_results.finished.out
    for answer in answers:
        for sentence in answer["sentences"]:
            assert sentence in " ".join(small_results.finished.out.split())


def test_the_caution_ends_it(small_results):
    caution = json.loads((small_results.folder / "answers.json").read_text())["caution"]
    assert " ".join(small_results.finished.out.split()).endswith(caution)
    assert "Sign-off belongs to the foundry" in caution


def test_a_missed_target_is_said(small_results):
    assert "Cannot be met: option_a, 99 % of chips within 4500 ps is not reached at any width" in (
        " ".join(small_results.finished.out.split())
    )


@pytest.mark.parametrize(
    "words, code", [(TIMING, 1), ([*TIMING, "--period-ps", "9000"], 0), (["--device", "n", *SPREAD], 0)]
)
def test_json_for_machines(widthwise, make_job, words, code):
    kind = "spread" if "--device" in words else "timing"
    finished = widthwise(kind, make_job().parent / "option_a.toml", *words, "--json")
    assert (finished.code, finished.err) == (code, "")
    (answer,) = json.loads(finished.out)["answers"]
    assert (answer["kind"], answer["met"]) == (kind, code == 0)


MARKUP = "[red]<script>alert(1)</script> $x$ :smile: [/]"


def test_markup_in_a_title_is_inert(widthwise, make_job, tmp_path):
    process = make_job().parent / "option_a.toml"
    title = f'title = "{MARKUP}\\u001b[31m"'
    process.write_text(process.read_text().replace('title = "Option A: grown field oxide, uniform well"', title))
    finished = widthwise("spread", process, "--device", "n", *SPREAD, "--json")
    assert finished.code == 0
    assert json.loads(finished.out)["title"] == f"spread: {MARKUP}\x1b[31m"
    assert "\x1b" not in finished.out
    finished = widthwise("spread", process, "--device", "n", *SPREAD)
    assert finished.code == 0 and "\x1b" not in finished.out


def test_markup_in_a_name_is_printed_as_it_is(widthwise, make_job, tmp_path):
    """In a device's name, which stands in sentences, tables and figures."""
    process = make_job().parent / "option_a.toml"
    process.write_text(
        process.read_text().replace("[device.n", f"[device.'{MARKUP}'").split("# The two devices of a die")[0]
    )
    finished = widthwise("spread", process, "--device", MARKUP, *SPREAD, "--out", tmp_path / "results")
    assert finished.code == 0, finished.err
    assert " ".join(finished.out.split()).count(MARKUP) == 2  # in a sentence and in a table's title
    text = (tmp_path / "results" / "spread_1_option_a.svg").read_text()
    assert "<script" not in text
    written = "".join(ElementTree.fromstring(text).itertext())
    assert "[red]<script>alert(1)</script> $x$ :smile: [/]" in written
