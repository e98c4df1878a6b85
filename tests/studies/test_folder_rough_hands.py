"""The output folder in rough hands: nothing of a person is lost, nothing is left half done."""

import pytest


@pytest.fixture
def runs(widthwise, tmp_path):
    """A function that runs a job into a folder of results: done, or refused in one line with nothing said besides."""

    def run(job, *words):
        finished = widthwise("run", job, "--jobs", 1, "--out", tmp_path / "results", *words)
        assert finished.code == 0 or (finished.code, finished.out, finished.err[:-1].isprintable()) == (2, "", True)
        return finished

    return run


@pytest.mark.parametrize(
    "content, words",
    [
        ("[]", []),
        ('"x"', []),
        (20_000 * "[", []),
        ('{"files": [1]}', ["--replace"]),
        ('{"files": null}', ["--replace"]),
        (r'{"files": ["a\u0000b"]}', ["--replace"]),
    ],
    ids=["list", "string", "deep", "number", "null", "nul"],
)
def test_any_record_in_the_folder(runs, one_spread, tmp_path, content, words):
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "record.json").write_text(content)
    assert runs(one_spread(), *words).code == (0 if words else 2)


def test_a_missing_measured_file_beside_old_results(runs, one_spread, tmp_path):
    assert runs(one_spread()).code == 0
    process = tmp_path / "option_a.toml"
    measured = 'doping = { law = "empirical", values_csv = "no.csv", values_column = "a", values_level = "lot" }\n'
    process.write_text(
        process.read_text().replace(
            "doping = { lot_percent = 1.5, wafer_percent = 1.0, die_percent = 0.8 }\n", measured
        )
    )
    assert "no.csv: cannot be read" in runs(one_spread()).err


def test_a_person_s_own_files_are_kept(runs, one_spread, tmp_path):
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "spread.csv").write_text("mine")
    runs(one_spread())
    assert (tmp_path / "results" / "spread.csv").read_text() == "mine"


def test_old_results_survive_until_the_new_ones_are_there(runs, one_spread, tmp_path, monkeypatch):
    assert runs(one_spread()).code == 0

    def fails(*_):
        raise RuntimeError("drawing failed")

    monkeypatch.setattr("studies.figures.draw_all", fails)
    with pytest.raises(RuntimeError):
        runs(one_spread())
    assert (tmp_path / "results" / "spread.csv").exists()
