"""The verdict of a comparison in words, for made-up differences."""

import numpy as np
import pytest

from mc.intervals import Estimate
from studies.compare_words import DECIDERS, crossing_sentences, decider_of, verdict
from studies.differences import Difference

NAMES = ("one", "two")


def estimate(value, low, high):
    return Estimate(value=value, low=low, high=high, level=0.95, n=1000, method="given")


def made_up(name, first, second, change, width_um=None, better=-1):
    ends = [estimate(value, value, value) for value in (first, second)]
    return Difference(
        name=name,
        width_um=width_um,
        better=better,
        first=ends[0],
        second=ends[1],
        change=estimate(*change),
        paired=True,
    )


def sigmas(*changes):
    return [
        made_up("vth_sigma_mv", 10.0, 10.0 + change[0], change, width)
        for width, change in zip((0.1, 0.2, 0.4, 0.8), changes)
    ]


@pytest.mark.parametrize("change, better", [((-2, -3, -1), "two"), ((2, 1, 3), "one")])
def test_one_option_is_better(change, better):
    words = verdict(DECIDERS["spread"], sigmas(change, change), NAMES, False)
    assert words.startswith(f"{better} spreads less at every width asked for: sigma(Vth) at W = 0.1 um 10 mV (one) and")
    assert f"a difference of {change[0]:+.1f} mV [{change[1]:+.1f}, {change[2]:+.1f}]" in words


def test_more_good_chips_are_better():
    found = [made_up("most_good_chips_per_cm2", 20.0, 23.0, (3, 2, 4), better=1)]
    assert verdict(DECIDERS["loss"], found, NAMES, False).startswith("two gives more good chips: ")


def test_nothing_can_be_shown():
    words = verdict(DECIDERS["spread"], sigmas((-0.1, -0.3, 0.1), (0.2, -0.1, 0.5)), NAMES, False)
    assert words.startswith("No difference that these samples can show: sigma(Vth) at W = 0.1 um 10 mV (one)")
    # 2.04 * 1000 * (0.3/0.2)^2 = 4600, fewer than for the other width
    assert words.endswith("; about 5e+03 samples would show one of this size.")


def test_each_is_better_somewhere():
    words = verdict(DECIDERS["spread"], sigmas((-2, -3, -1), (-1, -2, 0.5), (1, 0.5, 2), (2, 1, 3)), NAMES, False)
    assert words.startswith(
        "one spreads less at W = 0.4, 0.8 um; two spreads less at W = 0.1 um; no difference can be shown at W = 0.2 um"
    )


def test_only_one_meets_the_target():
    found = [made_up("min_width_um", np.inf, 0.2, (-np.inf, -np.inf, np.inf)), *periods()]
    assert verdict(DECIDERS["timing"], found, NAMES, False).startswith(
        "two needs narrower gates: the smallest width that meets the target none (one) and 0.2 um (two)"
    )


def periods():
    return [made_up("period_at_target_ps", 900.0, 800.0, (-100, -110, -90), width) for width in (0.1, 0.2)]


@pytest.mark.parametrize(
    "first, second, decides",
    [
        (0.1, 0.1, "period_at_target_ps"),
        (np.inf, np.inf, "period_at_target_ps"),
        (0.1, 0.15, "min_width_um"),
        (0.15, np.inf, "min_width_um"),
    ],
)
def test_what_decides_timing(first, second, decides):
    found = [made_up("min_width_um", first, second, (0, 0, 0)), *periods()]
    assert decider_of("timing", found).name == decides


def test_a_crossing_names_the_better_option_below_it():
    curve = sigmas((-2, -3, -1), (-1, -2, -0.5), (1, 0.5, 2))
    (words,) = crossing_sentences([estimate(0.28, 0.25, 0.31)], curve, NAMES)
    assert words.startswith("The options cross over at W = 0.28 um [0.25, 0.31]") and words.endswith(
        "below it two is better."
    )
    (unsure,) = crossing_sentences([estimate(0.28, 0.0, 0.31)], curve, NAMES)
    assert unsure.startswith("The options may cross over near W = 0.28 um, two being better below it")
