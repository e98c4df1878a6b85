"""What the figures draw: no colour alone carries a meaning, titles state the conditions, the last nines can be read."""

import re

import matplotlib
import numpy as np
import pandas as pd
import pytest
from matplotlib.collections import LineCollection, PolyCollection
from matplotlib.colors import to_hex
from matplotlib.lines import Line2D

from studies import figures
from studies.figure_axes import yield_axis, yield_limits, yield_words, yields_with_interval
from studies.job import load_job
from studies.palette import DARK, INK, LIGHT
from studies.settings import Workers

EVERYTHING = """
title = "all"
[settings]
seed = 5
samples = 1000
[process]
a = "option_a.toml"
b = "option_b.toml"
[[question]]
ask = "spread"
process = ["a", "b"]
compare = true
device = "n"
length_um = 0.13
width_um = [0.12, 0.3, 1]
[[question]]
ask = "timing"
process = "a"
length_um = 0.13
width_um = [0.12, 0.2, 0.5]
period_ps = 5100
paths = 1500
stages = 40
supply_v = 0.6
[[question]]
ask = "pair"
process = "a"
device = "n"
kind = "differential pair"
limit_mv = 3
pairs = 8
yield = 0.9
length_um = 1
gm_over_i_per_v = 18
[[question]]
ask = "loss"
process = "a"
device = "n"
length_um = 0.13
width_um = [0.12, 0.2]
vth_window_mv = 45
leakage_ceiling_times = 20
supply_v = 1.2
devices = 10000
fixed_area_mm2 = 2
"""
KINDS = ("spread", "timing", "pair", "loss", "compare")


@pytest.fixture(scope="module")
def answered(tmp_path_factory):
    """One job with every kind of question, and its answers."""
    from studies.demo import write_demo

    folder = tmp_path_factory.mktemp("figures")
    write_demo(folder)
    (folder / "all.toml").write_text(EVERYTHING)
    job = load_job(folder / "all.toml", {})
    return job, job.answers(Workers(jobs=1), lambda *_: lambda *_: None)


@pytest.fixture(params=KINDS)
def made(request, answered):
    """A figure and its title, one a kind."""
    job, answers = answered
    number = [asked.kind for asked in job.asked].index(request.param)
    with figures.drawn(job.asked[number], answers[number]) as figure_and_title:
        yield figure_and_title


def marks_of(handle):
    """A legend's mark: kind, colour, and what else tells it apart."""
    parts = list(handle) if isinstance(handle, tuple) else [handle]
    if hasattr(handle, "has_yerr"):  # caps and bars
        line = handle.lines[0]
        return "interval", to_hex(line.get_color()), (line.get_marker(), line.get_linestyle())
    if hasattr(handle, "patches"):  # bars of one cause
        return "bar", to_hex(handle.patches[0].get_facecolor()), (handle.patches[0].get_hatch(),)
    part = parts[0]
    if isinstance(part, (PolyCollection, LineCollection)):
        return "band", to_hex(part.get_facecolor()[0]), ()
    return (
        "line",
        to_hex(part.get_color()),
        (part.get_marker(), str(part.get_linestyle()), str(part._unscaled_dash_pattern)),
    )


def test_no_colour_is_the_only_carrier_of_a_meaning(made):
    figure, _ = made
    for axes in figure.axes:
        handles, labels = axes.get_legend_handles_labels()
        looks = [(kind, *rest) for kind, _, rest in map(marks_of, handles)]
        assert len(set(map(str, looks))) == len(looks), dict(zip(labels, looks))
        assert len(set(labels)) == len(labels) > 0


def colours_of(artist):
    """Colours that an artist shows."""
    if isinstance(artist, Line2D):
        shown = [artist.get_color()] if artist.get_linestyle() != "None" else []
        if artist.get_marker() not in ("None", "", None):
            shown.append(artist.get_markeredgecolor())
            shown += (
                [artist.get_markerfacecolor()]
                if artist.get_fillstyle() != "none" and str(artist.get_marker()) in "o^vDs"
                else []
            )
        return shown
    names = [name for name in ("get_color", "get_facecolor", "get_edgecolor") if hasattr(artist, name)]
    values = [getattr(artist, name)() for name in names]
    return [each for value in values for each in ([value] if isinstance(value, str) or np.ndim(value) == 1 else value)]


def test_every_colour_is_of_the_palette(made):
    """Otherwise the report's dark page could not change it, nor the test of colours hold it."""
    known = {color.lower() for color in LIGHT.values()} | {"#000000"}
    seen = set()
    for artist in made[0].findobj():
        for color in colours_of(artist) if artist.get_visible() else ():
            rgba = matplotlib.colors.to_rgba(color)
            if rgba[3] > 0:
                assert to_hex(rgba[:3]) in known, (artist, color)
                seen.add(to_hex(rgba[:3]))
    assert INK in seen and len(seen) >= 3
    assert set(LIGHT) == set(DARK)


def test_titles_state_the_conditions(made):
    figure, title = made
    assert "27 °C" in title and title.count("L = ") == 1 and re.search(r"\ba\b", title)
    assert figure.get_suptitle() == title
    asked = {
        "differential": ("gm/I 18 per V", "body bias 0 V"),
        "paths": ("supply 0.6 V",),
        "devices": ("supply 1.2 V",),
    }
    for word, stated in asked.items():
        assert word not in title or all(each in title for each in stated)


def test_every_axis_says_what_and_in_which_unit(made):
    for axes in made[0].axes:
        labels = axes.get_xlabel(), axes.get_ylabel()
        if labels[0] != "drawn width (µm)":  # bars that lie: what they are stands beside each
            assert labels[0].endswith(")") and all(label.get_text() for label in axes.get_yticklabels())
            continue
        assert axes.get_ylabel().endswith(")") or "devices outside" in axes.get_ylabel() or "cm²" in axes.get_ylabel()


def test_a_kind_without_a_drawer_has_no_figure(answered, monkeypatch):
    job, answers = answered
    monkeypatch.setattr(figures, "DRAWERS", {})
    assert figures.draw_all(job, answers) == {}
    with figures.drawn(job.asked[0], answers[0]) as made:
        assert made is None


@pytest.mark.parametrize(
    "share, words",
    [(0.001, "0.1"), (0.01, "1"), (0.5, "50"), (0.9, "90"), (0.99, "99"), (0.999, "99.9"), (0.9999, "99.99")],
)
def test_yields_in_words(share, words):
    assert yield_words(share) == words
    assert yield_words(1 - 1e-9) == "99.9999999"


def test_three_and_four_nines_stand_apart():
    """On a linear axis of 0 to 100 % they would be a thousandth of its height apart."""
    figure, axes = matplotlib.pyplot.subplots()
    yields = pd.DataFrame({"width_um": [1, 2, 3, 4], "yield": [0.2, 0.999, 0.9999, 1.0]})
    yields["yield_low"] = [0.19, 0.9985, 0.9998, 0.9997]
    yields["yield_high"] = [0.21, 0.9993, 0.99995, 1.0]
    limits = yield_limits(yields["yield"], yields.yield_low, 0.99)
    yields_with_interval(axes, yields, "yield", label="yield", limits=limits)
    yield_axis(axes, limits)
    height = [axes.transData.transform((1, share))[1] for share in (0.999, 0.9999)]
    assert (height[1] - height[0]) / axes.bbox.height > 0.1
    assert [label.get_text() for label in axes.get_yticklabels()][-2:] == ["99.9", "99.99"]
    beyond = [line for line in axes.get_lines() if line.get_marker() == "^"]
    assert list(beyond[0].get_xdata()) == [4] and beyond[0].get_markerfacecolor() == "none"
    matplotlib.pyplot.close(figure)


@pytest.mark.parametrize("values", ([1.0, 1.0], [0.0, 0.0], [0.0, 1.0], [0.5, np.nan], [0.9999999999999, 1.0]))
@pytest.mark.parametrize("target", (None, 0.5, 0.999999))
def test_limits_of_an_axis_of_yields_are_in_order(values, target):
    bottom, top = yield_limits(values, [max(0.0, value - 0.01) for value in values], target)
    assert 0 < bottom < top < 1
    assert target is None or bottom < target < top
