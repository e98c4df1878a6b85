"""What a fit refuses, in one line and with exit code 2, and what it says of files that are not quite right."""

import numpy as np
import pandas as pd
import pytest

from studies.fit_read import read_measured

START = """
title = "start"
[device.n]
channel = "n"
oxide_thickness_nm = 4.0
gate = "n+ polysilicon"
doping_per_cm3 = 3e17
[device.n.edge]
kind = "field oxide"
shape = 0.5
"""
TWO = START + START.replace('title = "start"\n', "").replace("device.n", "device.p").replace('"n"', '"p"').replace(
    "n+", "p+"
)
GOOD = "width_um,length_um,vth_mv\n" + "".join(
    f"{w},{1},{v}\n" for w, v in zip([0.2, 0.3, 0.5, 1, 2, 5, 10], [380, 360, 340, 330, 325, 322, 320])
)


@pytest.fixture
def run(run_widthwise, tmp_path):
    """A function that fits a text and gives the command's end."""

    def call(text, *flags, start=START, name="measured.csv", out="fitted.toml"):
        (tmp_path / "start.toml").write_text(start)
        if text is not None:
            (tmp_path / name).write_text(text)
        flags = ("--draws", 50, "--jobs", 1, *flags)
        return run_widthwise(
            "fit", tmp_path / name, "--start", tmp_path / "start.toml", "--out", tmp_path / out, *flags
        )

    return call


@pytest.fixture
def run_widthwise():
    """The command, run in this process."""
    import io
    from contextlib import redirect_stderr, redirect_stdout
    from typing import NamedTuple

    from studies.cli import main

    class End(NamedTuple):
        code: int
        out: str
        err: str

    def call(*arguments):
        out, err = io.StringIO(), io.StringIO()
        with redirect_stdout(out), redirect_stderr(err):
            code = main([str(argument) for argument in arguments])
        return End(code, out.getvalue(), err.getvalue())

    return call


def changed(old, new, text=GOOD):
    """A text with one part replaced, which must be there."""
    assert old in text
    return text.replace(old, new, 1)


REFUSED = [
    (None, (), "no such file"),
    ("", (), "empty file"),
    (GOOD.replace(",", ";"), (), "separated by semicolons"),
    (changed("vth_mv", "threshold"), (), "no column 'vth_v' or 'vth_mv'"),
    (changed("width_um", "width_nm"), (), "'width_nm' has the wrong unit; this one is given as 'width_um'"),
    (changed("vth_mv", "vth_uv"), (), "no column 'vth_v' or 'vth_mv'"),
    (changed("length_um", "len_um"), (), "no column 'length_um'"),
    (changed("vth_mv", "vth_v"), (), "this looks like 'vth_mv'"),
    (changed("380", "0.380"), (), "row 2, vth_mv = 0.38: others are near 325: mixed units (V and mV?)"),
    (changed("0.2,1", "-0.2,1"), (), "row 2, width_um = -0.2: must be above 0"),
    (changed("0.2,1", "2000,1"), (), "in nanometres?"),
    (changed("380", "high"), (), "row 2, vth_mv = 'high': a finite number is needed"),
    (changed("380", "inf"), (), "a finite number is needed"),
    ("width_um,length_um,vth_mv\n0.2,1,380\n", (), "1 complete row; two or more are needed"),
    ("width_um,length_um,vth_mv\n0.2,1,\n0.3,1,\n", (), "0 complete rows; two or more are needed"),
    ("width_um,length_um,vth_mv\n0.2,1,380\n0.5,1,370\n", ("--edge", "field oxide"), "2 rows for 2 parameters or more"),
    ("width_um,length_um,vth_mv\n" + "0.2,1,380\n0.2,1,381\n" * 9, ("--edge", "trench"), "one width only (0.2 um)"),
    (GOOD, ("--edge", "field"), "no such form; did you mean 'field oxide'?"),
    (GOOD, ("--parameters", "doping"), "--parameters doping: cannot be fitted here"),
    (GOOD, ("--device", "q"), "--device q: not in the start"),
    (GOOD, ("--column", "vth=x"), "--column vth=x: no such column of ours"),
    (GOOD, ("--column", "vth_v"), "OURS=THEIRS is needed"),
    (GOOD, ("--column", "pair=mate"), "no column 'mate'"),
    (GOOD, ("--draws", "3"), "--draws 3: 50 to 100000 are needed"),
    (GOOD, ("--jobs", "0"), "--jobs 0: 1 or more is needed"),
    (GOOD.replace("0.3,1", "0,3,1"), (), "a decimal comma?"),
    (GOOD.replace("0.2,1", "0,2,1").replace("0.3,1", "0,3,1"), (), "a decimal comma?"),
    (changed("\n0.2", ",count\n0.2").replace("380", "380,0.5", 1), (), "a whole number of devices"),
]  # fmt: skip


@pytest.mark.parametrize("text, flags, said", REFUSED, ids=[case[2][:40] for case in REFUSED])
def test_refused_in_one_line(run, tmp_path, text, flags, said):
    end = run(text, *flags)
    assert end.code == 2, end
    assert said in end.err and len(end.err.splitlines()) == 1
    assert not (tmp_path / "fitted.toml").exists() and not (tmp_path / "fit.csv").exists()


def test_two_devices_must_be_told_apart(run):
    assert "choose one by --device" in run(GOOD, start=TWO).err
    both = "device," + GOOD.replace("\n", "\nn,").removesuffix("n,") + "p,0.2,1,-400\n"
    assert "holds the devices n, p; choose one by --device" in run(both, start=TWO).err
    assert run(both, "--device", "n", start=TWO).code == 0


def test_signs_of_p_devices_are_one_or_the_other(run):
    start = TWO.replace("device.n", "device.q")
    mixed = changed("380", "-380")
    assert "negative in some rows and positive in others (row 2)" in run(mixed, "--device", "p", start=start).err
    negative = GOOD.replace(",1,", ",1,-")
    ends = [run(text, "--device", "p", "--json", "--replace", start=start) for text in (GOOD, negative)]
    assert [end.code for end in ends] == [0, 0], ends
    charges = [line for end in ends for line in end.out.splitlines() if '"value"' in line][:: len(ends[0].out)]
    assert charges
    values = [end.out.split('"value": ')[1].split(",")[0] for end in ends]
    assert float(values[0]) == pytest.approx(float(values[1]))


def read(folder, text, **devices):
    """The measurements of a text."""
    (folder / "measured.csv").write_text(text)
    return read_measured(
        folder / "measured.csv", {}, devices or {"n": "n"}, None, {"drain_v": 0.05, "temperature_c": 27.0}
    )[1]


def test_rows_without_a_value_are_left_out_and_told(tmp_path):
    measured = read(tmp_path, changed("380", ""))
    assert list(measured.row) == [3, 4, 5, 6, 7, 8]
    assert measured.notes == ("Left out for want of vth_mv: row 2.",)


def test_equal_rows_are_told(tmp_path):
    twice = GOOD + GOOD.splitlines()[1] + "\n"
    assert "kept, since no site tells devices apart: row 9" in read(tmp_path, twice).notes[0]
    sites = "\n".join(line + (",site" if "width" in line else ",a") for line in twice.splitlines())
    measured = read(tmp_path, sites)
    assert len(measured.row) == 7 and "Counted once" in measured.notes[0] and "row 9" in measured.notes[0]


def test_wafers_are_those_of_their_lot(tmp_path):
    text = "lot,wafer,width_um,length_um,vth_mv\n" + "".join(
        f"{lot},{wafer},1,1,{300 + lot}\n" for lot in (1, 2) for wafer in (1, 2)
    )
    levels = read(tmp_path, text).levels
    assert list(levels["lot"]) == [0, 0, 1, 1] and sorted(levels["wafer"]) == [0, 1, 2, 3]


def test_pairs_are_two_equal_devices_of_a_die(tmp_path):
    text = "die,pair,width_um,length_um,vth_mv\n1,a,1,1,300\n1,a,1,1,302\n2,a,1,1,301\n2,a,1,1,303\n2,b,1,1,303\n2,,2,1,303\n"
    measured = read(tmp_path, text)
    assert list(measured.pair) == [0, 0, 1, 1, -1, -1]
    assert "No matched pair" in measured.notes[0] and "row 6" in measured.notes[0]


def test_columns_of_other_names(run):
    text = changed("width_um", "W").replace("vth_mv", "threshold")
    assert run(text, "--column", "width_um=W", "--column", "vth_mv=threshold").code == 0


def test_parquet(run, tmp_path):
    pytest.importorskip("pyarrow")
    pd.read_csv(pd.io.common.StringIO(GOOD)).to_parquet(tmp_path / "measured.parquet")
    assert run(None, name="measured.parquet").code == 0


def test_parquet_without_its_library_is_refused_in_words(run, tmp_path, monkeypatch):
    def missing(*arguments, **options):
        raise ImportError

    monkeypatch.setattr(pd, "read_parquet", missing)
    (tmp_path / "measured.parquet").write_bytes(b"PAR1")
    assert "needs pyarrow" in run(None, name="measured.parquet").err


def test_nothing_is_overwritten_unasked(run, tmp_path):
    assert run(GOOD).code == 0
    again = run(GOOD)
    assert again.code == 2 and "is there already" in again.err
    assert run(GOOD, "--replace").code == 0
    assert "would overwrite the input start.toml" in run(GOOD, "--replace", out="start.toml").err


def test_all_files_or_none(run, tmp_path, monkeypatch):
    from pathlib import Path

    real, calls = Path.replace, []

    def failing(self, target):
        calls.append(target)
        if len(calls) == 4:
            raise OSError(28, "No space left on device")
        return real(self, target)

    monkeypatch.setattr(Path, "replace", failing)
    end = run(GOOD)
    assert end.code == 2 and "No space left" in end.err
    assert sorted(path.name for path in tmp_path.iterdir()) == ["measured.csv", "start.toml"]


def test_few_widths_are_told(run):
    one = "width_um,length_um,vth_mv\n" + "".join(f"1,1,{300 + 3 * np.sin(k)}\n" for k in range(12))
    end = run(one)
    assert end.code == 0 and "1 width only" in end.out
    two = one + "".join(f"2,1,{290 + 3 * np.sin(k)}\n" for k in range(12))
    end = run(two, "--replace")
    assert end.code == 0 and "2 widths only" in end.out


def test_outliers_are_listed_by_row_with_their_weight(run):
    rows = [f"{w},1,{300 + 40 / w + 4 * np.sin(7 * k)}\n" for k in range(12) for w in (0.2, 0.4, 1, 3, 8)]
    rows[10] = "0.2,1,900\n"
    end = run("width_um,length_um,vth_mv\n" + "".join(rows))
    assert "Gross outliers, weight 0: row 12" in end.out


def test_no_form_fits_is_exit_code_1(run):
    values = [600, 655, 670, 610, 560, 565, 630, 660]
    rows = [f"{w},1,{v}\n" for w, v in zip([0.4, 0.6, 0.9, 1.4, 2.2, 4, 7, 15], values)]
    end = run("width_um,length_um,vth_mv\n" + "".join(rows))
    assert end.code == 1 and "the data are not monotone in width" in end.out.replace("\n", " ")
