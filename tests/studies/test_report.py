"""The report as a whole: what is in it, where it comes from, and that a new kind of answer needs no change."""

import json
import re
from dataclasses import replace

import pandas as pd
import pytest

from studies import cli
from studies.answer import Answer
from studies.job import load_job
from studies.report import report_html, short_units
from studies.report_options import options_of
from studies.report_sources import source_in, sources_of

RECORD = {
    "settings": {"seed": 0, "samples": None, "precision": 0.01},
    "questions": [{"name": "new_1_a", "samples": 5, "device_evaluations": 12, "seconds": 0.25}],
    "fingerprint": "f" * 64,
    "written": "2026-01-01T00:00:00+00:00",
    "workers": {"jobs": 2, "backend": "loky"},
    "versions": {"widthwise": "1", "python": "3"},
}


@pytest.fixture(scope="module")
def page(small_results):
    """The small job's report."""
    return (small_results.folder / "report.html").read_text(encoding="utf-8")


def visible(page):
    """Text of a page, spaces made one."""
    page = re.sub(r"<(script|style|svg).*?</\1>", "", page, flags=re.S)
    return " ".join(re.sub(r"<[^>]+>", " ", page).replace("&#39;", "'").split())


def test_every_sentence_and_note_is_in_it(page, small_results):
    answers = json.loads((small_results.folder / "answers.json").read_text(encoding="utf-8"))
    text = visible(page)
    for answer in answers["answers"]:
        for said in [*answer["sentences"], *answer["notes"]]:
            assert " ".join(short_units(said).split()) in text.replace("&#34;", '"'), said
    assert text.count(answers["caution"]) == 2
    assert "option_a: a target cannot be met." in text and "option_b: a target cannot be met." not in text


def test_the_record_is_in_it(page, small_results):
    record = json.loads((small_results.folder / "record.json").read_text(encoding="utf-8"))
    text = visible(page)
    assert record["fingerprint"] in text and record["written"] in text and "seed of the random numbers 7" in text
    assert all(f"{name} {number}" in text for name, number in record["versions"].items())
    assert all(question["name"] in text for question in record["questions"])


def test_answers_to_one_question_share_a_section(page):
    assert re.findall(r'<section id="(question-\d)"', page) == ["question-1", "question-2"]
    text = visible(page)
    assert text.count("Length: quasi-two-dimensional form") == 2  # once a question, not once an option


def test_it_forbids_itself_the_network(page):
    (policy,) = re.findall(r'http-equiv="Content-Security-Policy" content="([^"]+)"', page)
    assert policy.startswith("default-src &#39;none&#39;") or policy.startswith("default-src 'none'")
    assert "img-src data:;" in policy and "unsafe-eval" not in policy  # solved fields are pictures inside the drawing
    assert not re.findall(r"https?://(?!www\.w3\.org)", page)


@pytest.mark.parametrize("given, words", [({"seed": 0}, "numbers 0"), ({"samples": 1000}, "1000 samples")])
def test_a_new_kind_of_answer_needs_no_change(make_job, given, words):
    job = load_job(make_job(), {})
    job = replace(job, asked=job.asked[:1])
    table = pd.DataFrame({"width_um": [1.0], "gain_v": [2.0], "gain_low_v": [1.5], "gain_high_v": [2.5]})
    answer = Answer(
        kind="brand_new",
        process="a",
        question={"inner": {"depth_nm": 3.0, "sure": True}, "list": [1, 2]},
        table=table,
        tables={"brand_new_more": table},
        headlines={},
        sentences=("All is well.",),
        notes=("Nothing was assumed.",),
        samples=5,
        block_size=5,
        evaluations=12,
        seconds=0.25,
    )
    record = RECORD | {"settings": RECORD["settings"] | given}
    text = visible(report_html(job, [answer], record).decode())
    for said in ("1. Brand new", "All is well.", "Nothing was assumed.", "gain V", "2.00 ± 0.50", "Brand new more"):
        assert said in text
    assert "inner: depth, nm 3" in text and "inner: sure yes" in text and "list 1, 2" in text and words in text


def test_single_commands_write_it_too(widthwise, make_job, tmp_path):
    process = make_job().parent / "option_a.toml"
    words = ["--device", "n", "--width-um", 0.2, "--length-um", 0.13, "--samples", 1000, "--out", tmp_path / "out"]
    assert widthwise("spread", process, *words).code == cli.DONE
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "Process options side by side" not in visible(page) and 'id="only-differences"' not in page


def test_options_side_by_side(make_job):
    job = load_job(make_job(), {})
    options = options_of([asked.file for asked in job.asked])
    assert options.names == ("option_a", "option_b") and options.files == ("option_a.toml", "option_b.toml")
    rows = {row.key: row for group in options.groups for row in group.rows}
    thickness = rows["device.n.oxide_thickness_nm"]
    assert (thickness.words, thickness.values, thickness.differs) == ("oxide thickness, nm", ("3.2", "2.6"), True)
    assert rows["device.n.surface_doping_per_cm3"].values[0] == "–"
    assert not rows["device.n.channel"].differs and "device.n.quantum_shift" not in rows
    assert options.differences == sum(row.differs for row in rows.values()) > 20


def formulas(make_demo_process, question, **changes):
    return " ".join(
        f"{each.formula}: {each.source}" for each in sources_of([(make_demo_process(changes), "spread", question)])
    )


def test_only_sources_that_were_used(make_demo_process):
    spread = formulas(make_demo_process, {"device": "n", "length_um": 0.13})
    assert "Neamen, 4th ed., eq. 11.28" in spread and "Liu et al" in spread and "Sproul" in spread
    assert not any(word in spread for word in ("Akers", "Enz", "Kinget", "Na, E. J.", "Yau", "Misiakos", "van Dort"))
    timing = formulas(make_demo_process, {"n_device": "n", "p_device": "p", "stages": 40, "supply_v": 0.6})
    assert "Enz" in timing and "Na, E. J." in timing and "Kinget" not in timing
    pair = formulas(make_demo_process, {"question": {"device": "n", "limit_mv": 3.0, "limit_percent": None}})
    assert "Kinget" in pair and "(gm/I) dV_T" not in pair
    other = formulas(
        make_demo_process,
        {"device": "n"},
        **{"intrinsic_density": "misiakos tsamakis", "device.n.quantum_shift": True, "device.n.short_channel": {}},
        **{"device.n.edge": {"kind": "trench", "field_oxide_nm": 300}},
    )
    assert "Akers" in other and "Misiakos" in other and "van Dort" in other
    assert not any(word in other for word in ("Sproul", "Liu et al", "11.28"))


def test_what_needs_no_source_has_none():
    def formula():
        """Nothing.

        Source: definition.
        """

    assert source_in(formula) == ""
    assert source_in(lambda: None) == ""


def test_units_in_sentences():
    assert short_units("W = 8.3 um [8.08, 8.565] at L = 1 um, area 16.6 um2, 21.65 per cm2 [21.6, 21.7]") == (
        "W = 8.3 µm [8.08, 8.565] at L = 1 µm, area 16.6 µm², 21.65 per cm² [21.6, 21.7]"
    )
    assert short_units("a_um summum 3 umbra") == "a_um summum 3 umbra"
