"""The output folder: whose results it may replace, and when it is refused."""

import pytest


def contents(folder):
    """Every file's bytes by name."""
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_the_same_job_again_gives_the_same_bytes(widthwise, one_spread, tmp_path):
    folder = tmp_path / "results"
    assert widthwise("run", one_spread(), "--out", folder, "--jobs", 1).code == 0
    before = contents(folder)
    assert widthwise("run", one_spread(), "--out", folder, "--jobs", 1).code == 0
    after = contents(folder)
    assert before.keys() == after.keys()
    differ = {name for name in before if before[name] != after[name]}
    assert differ <= {"record.json", "report.html"}  # they have the time in them


def test_another_job_s_results_are_kept_unless_replace(widthwise, one_spread, tmp_path):
    folder = tmp_path / "results"
    widthwise("run", one_spread(), "--out", folder, "--jobs", 1)
    (folder / "notes.txt").write_text("mine")
    before = contents(folder)
    renamed = one_spread({'"option_a"\ndevice': '"b"\ndevice', "option_b =": "b ="})
    finished = widthwise("run", renamed, "--out", folder, "--jobs", 1)
    assert (finished.code, finished.out) == (2, "")
    said = f"{folder}: holds the results of another job; choose another folder or add --replace\n"
    assert finished.err == said
    assert contents(folder) == before
    assert widthwise("run", renamed, "--out", folder, "--jobs", 1, "--replace").code == 0
    after = contents(folder)
    assert "spread_1_b.png" in after and "spread_1_option_a.png" not in after  # nothing of the old job is left among it
    assert after["notes.txt"] == b"mine"


@pytest.mark.parametrize("content", ["", "{", "{}", '{"fingerprint": "0"}', "\xff"])
def test_a_record_that_is_not_ours_is_another_job_s(widthwise, one_spread, tmp_path, content):
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "record.json").write_text(content, encoding="latin-1")
    finished = widthwise("run", one_spread(), "--out", tmp_path / "results", "--jobs", 1)
    assert finished.code == 2 and "holds the results of another job" in finished.err
    assert widthwise("run", one_spread(), "--out", tmp_path / "results", "--jobs", 1, "--replace").code == 0


def test_a_file_is_no_folder(widthwise, one_spread, tmp_path):
    (tmp_path / "results").write_text("mine")
    finished = widthwise("run", one_spread(), "--out", tmp_path / "results", "--jobs", 1)
    assert (finished.code, finished.err) == (2, f"{tmp_path / 'results'}: is a file, a folder is needed\n")
    assert (tmp_path / "results").read_text() == "mine"


def test_a_folder_that_cannot_be_written_is_refused_before_the_work(widthwise, one_spread, tmp_path, monkeypatch):
    monkeypatch.setattr("os.access", lambda *_: False)  # a mode would not keep root out
    monkeypatch.setattr("studies.job.Job.answers", lambda *_: pytest.fail("the work was begun"))
    finished = widthwise("run", one_spread(), "--out", tmp_path / "deep" / "results")
    assert (finished.code, finished.err) == (2, f"{tmp_path / 'deep' / 'results'}: cannot be written\n")


def test_a_full_disk_is_said_in_one_line(widthwise, one_spread, tmp_path, monkeypatch):
    def full(path, content):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("pathlib.Path.write_bytes", full)
    finished = widthwise("run", one_spread(), "--out", tmp_path / "results", "--jobs", 1)
    assert finished.err == f"{tmp_path / 'results'}: cannot be written (No space left on device)\n"
    assert finished.code == 2 and {path.name for path in (tmp_path / "results").iterdir()} <= {"blocks.sqlite"}
