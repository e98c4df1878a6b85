"""What a comparison says: the verdict in one sentence, where the options cross over, and why they differ."""

from dataclasses import dataclass, replace

import numpy as np

from mc.intervals import Estimate
from studies.controlled import METHOD
from studies.differences import Difference
from studies.why import Share


@dataclass(frozen=True, kw_only=True)
class Decider:
    """The number that decides a kind of question.

    name : of `studies.numbers.Number`; words : what it is; unit : of it
    verb : what the better option does; curve : the number against width that crossings are told of
    narrowest : width asked for; a smallest width that equals it is a bound [um]
    """

    name: str
    words: str
    unit: str
    verb: str
    curve: str
    narrowest: float = 0.0


SIGMA = Decider(name="vth_sigma_mv", words="sigma(Vth)", unit=" mV", verb="spreads less", curve="vth_sigma_mv")
PERIOD = Decider(
    name="period_at_target_ps",
    words="the period of the target",
    unit=" ps",
    verb="is faster",
    curve="period_at_target_ps",
)
DECIDERS = {
    "spread": SIGMA,
    "timing": Decider(
        name="min_width_um",
        words="the smallest width that meets the target",
        unit=" um",
        verb="needs narrower gates",
        curve="period_at_target_ps",
    ),
    "pair": Decider(
        name="area_um2",
        words="the gate area of a pair",
        unit=" um2",
        verb="needs smaller pairs",
        curve="",
    ),
    "loss": Decider(
        name="most_good_chips_per_cm2",
        words="good chips per cm2 at the best width asked for",
        unit="",
        verb="gives more good chips",
        curve="good_chips_per_cm2",
    ),
}


def decider_of(kind: str, found: list[Difference]) -> Decider:
    """What decides; for timing the period where both options meet the target at every width asked for, or at none."""
    decider = DECIDERS[kind]
    if kind == "pair":  # a differential pair has an offset, a mirror an error
        return replace(decider, curve=next(each.name for each in found if "_sigma_" in each.name))
    if kind == "timing":
        (widths,) = (each for each in found if each.name == decider.name)
        narrowest = min(each.width_um for each in found if each.width_um is not None)
        ends = {widths.first.value, widths.second.value}
        if ends in ({np.inf}, {narrowest}):
            return PERIOD
    return decider


def verdict(decider: Decider, found: list[Difference], names: tuple[str, str], same: bool) -> str:
    """One sentence: which option is better, or that no difference can be shown, and what would show one."""
    deciding = [each for each in found if each.name == decider.name]
    decider = replace(
        decider, narrowest=min((each.width_um for each in found if each.width_um is not None), default=0.0)
    )
    if same:
        return f"No difference: {names[0]} and {names[1]} are the same process."
    winners = [_winner(each) for each in deciding]
    if all(winner == 0 for winner in winners):
        return f"No difference that these samples can show: {_numbers(decider, deciding[0], names)}{_needed(deciding)}."
    shown = sorted(set(winners) - {0})
    if len(shown) == 1 and 0 not in winners:
        everywhere = " at every width asked for" if len(deciding) > 1 else ""
        return f"{_name(shown[0], names)} {decider.verb}{everywhere}: {_numbers(decider, deciding[0], names)}."
    parts = [
        f"{_name(winner, names)} {decider.verb} at W = {_widths(each for each, won in zip(deciding, winners) if won == winner)}"
        for winner in shown
    ]
    open_ones = [each for each, winner in zip(deciding, winners) if winner == 0]
    if open_ones:
        parts.append(f"no difference can be shown at W = {_widths(open_ones)}{_needed(open_ones)}")
    return f"{'; '.join(parts)}. {_numbers(decider, deciding[0], names).capitalize()}."


def _winner(each: Difference) -> int:
    """-1 where the first option is better, +1 where the second is, 0 where it cannot be told."""
    one, other = each.first.value, each.second.value
    if not np.isfinite(one - other) and one != other:
        return each.better * int(np.sign(other - one)) if not np.isnan(one) and not np.isnan(other) else 0
    return each.better * each.sign


def _name(winner: int, names: tuple[str, str]) -> str:
    return names[1] if winner > 0 else names[0]


def _widths(each) -> str:
    return ", ".join(f"{one.width_um:g}" for one in each) + " um"


def _numbers(decider: Decider, each: Difference, names: tuple[str, str]) -> str:
    place = f" at W = {each.width_um:g} um" if each.width_um is not None else ""
    one, other = (_value(end.value, decider.unit) for end in (each.first, each.second))
    bounds = [each.name == "min_width_um" and end.value == decider.narrowest for end in (each.first, each.second)]
    one, other = (f"{value} or less" if bound else value for value, bound in zip((one, other), bounds))
    text = f"{decider.words}{place} {one} ({names[0]}) and {other} ({names[1]})"
    if np.isfinite(each.change.value) and any(bounds):
        text += f", a difference of {abs(each.change.value):.3g}{decider.unit} or more"
    elif np.isfinite(each.change.value):
        change = each.change
        digits = _digits(change)
        text += f", a difference of {change.value:+.{digits}f}{decider.unit} [{change.low:+.{digits}f}, {change.high:+.{digits}f}]"
    return text


def _value(value: float, unit: str) -> str:
    return f"{value:.4g}{unit}" if np.isfinite(value) else "none"


def _digits(change: Estimate) -> int:
    """Decimals that show the interval with two digits."""
    width = change.high - change.low
    return int(np.clip(1 - np.floor(np.log10(width)), 0, 12)) if np.isfinite(width) and width > 0 else 4


def _needed(deciding: list[Difference]) -> str:
    """How many samples would show a difference of the size found."""
    samples = [each.samples_to_show() for each in deciding if np.isfinite(each.samples_to_show())]
    return f"; about {min(samples):.1g} samples would show one of this size" if samples else ""


def crossing_sentences(crossings: list[Estimate], curve: list[Difference], names) -> list[str]:
    """Where the better option changes, when that is shown on both sides."""
    sentences = []
    for crossing in crossings:
        below = [each for each in curve if each.width_um < crossing.value][-1]
        better = _name(-1 if below.change.value * below.better < 0 else 1, names)
        if crossing.low == 0 or not np.isfinite(crossing.high):
            sentences.append(
                f"The options may cross over near W = {crossing.value:.4g} um, {better} being better below it; the widths "
                "asked for do not show it on both sides."
            )
            continue
        sentences.append(
            f"The options cross over at W = {crossing.value:.4g} um [{crossing.low:.4g}, {crossing.high:.4g}], interpolated "
            f"between the widths asked for: below it {better} is better."
        )
    return sentences


def why_sentences(shares: list[Share], names: tuple[str, str], neighbours: bool) -> list[str]:
    """Which ingredients make the difference, at the narrowest width. neighbours : only the spread between them matters"""
    if not shares:
        return []
    width = shares[0].width_um
    here = [share for share in shares if share.width_um == width]
    variance = sum(share.variance_mv2.value for share in here)
    mean = sum(share.mean_mv.value for share in here)
    spread, moved = (
        sorted(here, key=lambda share: -abs(getattr(share, part).value))[:2] for part in ("variance_mv2", "mean_mv")
    )
    whose = "neighbours' thresholds" if neighbours else "the threshold"
    sentence = (
        f"From {names[0]} to {names[1]} at W = {width:g} um the variance of {whose} changes by {variance:+.4g} mV2, most by "
        f"{_parts(spread, 'variance_mv2', 'mV2')}"
    )
    if neighbours:
        return [f"{sentence}."]
    return [f"{sentence}; its mean moves by {mean:+.4g} mV, most by {_parts(moved, 'mean_mv', 'mV')}."]


def _parts(shares: list[Share], part: str, unit: str) -> str:
    return " and ".join(f"{share.ingredient} ({getattr(share, part).value:+.3g} {unit})" for share in shares)


def compare_notes(found: list[Difference], shares: list[Share], neighbours: bool) -> list[str]:
    """How the differences were measured, and what the break-down means."""
    notes = []
    narrower = [
        np.hypot(each.first.high - each.first.low, each.second.high - each.second.low)
        / (each.change.high - each.change.low)
        for each in found
        if each.paired and each.change.high > each.change.low
    ]
    if narrower and np.median(narrower) > 1:
        notes.append(
            "Both options saw the same random numbers, so that what moves both alike drops out of their difference: its "
            f"intervals are {np.median(narrower):.2g} times narrower (median) than two separate ones would be."
        )
    if any(each.change.method == METHOD for each in found):
        notes.append(
            "Differences of the threshold's mean and sigma come from both options on the same draws with a control: chance in the "
            "linear part of the thresholds, whose mean and variance are known exactly, is taken off. They are much better "
            "known than the two values beside them: by hand these differ from them as far as their own intervals allow."
        )
    if not all(each.paired for each in found):
        notes.append(
            "Differences marked s (in files: separate) come from two separate intervals: tails found by the rare-event "
            "estimator, yields that few samples carry, short runs, and widths or periods that no sample reaches."
        )
    if shares:
        whose = "of neighbours " if neighbours else ""
        notes.append(
            f"The break-down swaps one ingredient after another from the first option to the second, in all orders, and "
            f"averages (Shapley shares): its parts add up to the whole change of the threshold's mean and variance {whose}"
            "exactly. What an ingredient does depends on the others; the share is its mean over the orders."
        )
    return notes
