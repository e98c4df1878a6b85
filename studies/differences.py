"""What differs between two process options' answers, how well that is known, and where they cross over."""

from dataclasses import dataclass

import numpy as np

from mc.groups import jackknife_half_width
from mc.intervals import Estimate
from studies.numbers import Number

POWER = 2.04  # samples times this show a difference of the size found in four of five repeats: (1.96 + 0.84)^2/1.96^2


@dataclass(frozen=True, kw_only=True)
class Difference:
    """One number of two process options.

    name, width_um, better : as in `studies.numbers.Number`
    first, second : the options' own estimates
    change : second less first
    paired : whether the interval of `change` comes from the draws that both share; else from two separate intervals
    """

    name: str
    width_um: float | None
    better: int
    first: Estimate
    second: Estimate
    change: Estimate
    paired: bool

    @property
    def sign(self) -> int:
        """+1 where the second is shown to be larger, -1 where it is shown to be smaller, else 0."""
        return int(self.change.low > 0) - int(self.change.high < 0)

    def samples_to_show(self) -> float:
        """Samples after which a difference of the size found would show; infinite where there is none."""
        half = (self.change.high - self.change.low) / 2
        if self.change.value == 0:
            return np.inf
        return POWER * self.change.n * (half / self.change.value) ** 2


def difference(first: Number, second: Number, same: bool) -> Difference:
    """Difference of the same number of two options. same : whether the options are the same; it is then exactly zero"""
    one, other = first.estimate, second.estimate
    value = 0.0 if same else other.value - one.value
    paired = _share_samples(first, second)
    if same:
        low, high, method = 0.0, 0.0, "the same process"
    elif not np.isfinite(value):
        low, high, method = -np.inf, np.inf, "no bound"
    elif paired:
        half = float(jackknife_half_width(value, second.without - first.without, first.sizes, one.level))
        low, high, method = value - half, value + half, "paired, delete-a-group jackknife"
    else:
        low = value - np.hypot(other.value - other.low, one.high - one.value)
        high = value + np.hypot(other.high - other.value, one.value - one.low)
        method = "separate intervals, errors added in squares"
    return Difference(
        name=first.name,
        width_um=first.width_um,
        better=first.better,
        first=one,
        second=other,
        change=Estimate(value=value, low=low, high=high, level=one.level, n=min(one.n, other.n), method=method),
        paired=paired and np.isfinite(value),
    )


def differences(first: tuple[Number, ...], second: tuple[Number, ...], same: bool) -> list[Difference]:
    """Differences of all numbers that both options have, in the first's order."""
    others = {(number.name, number.width_um): number for number in second}
    pairs = [(number, others.get((number.name, number.width_um))) for number in first]
    return [difference(number, other, same) for number, other in pairs if other is not None]


def _share_samples(first: Number, second: Number) -> bool:
    if first.without is None or second.without is None:
        return False
    return np.array_equal(first.sizes, second.sizes) and bool(np.all(np.isfinite(second.without - first.without)))


def crossings(curve: list[Difference]) -> list[Estimate]:
    """Widths [um] at which the better option changes.

    curve : differences of one quantity, by increasing width
    Returns an estimate a crossing: it lies where the difference, linear in the logarithm of the width, is zero, between
    the nearest widths on either side at which its interval excludes zero; an end is infinite (or 0) where there is none.
    """
    places = np.log([each.width_um for each in curve])
    values, lows, highs = (np.array([getattr(each.change, end) for each in curve]) for end in ("value", "low", "high"))
    found = []
    for left in range(len(curve) - 1):
        sign = np.sign(values[left])
        if sign == 0 or not sign * values[left + 1] < 0:
            continue
        middle = _zero(places, values, left)
        # before the crossing the bound nearer to zero ends the certainty, behind it the other bound begins it
        before, behind = (lows, highs) if sign > 0 else (highs, lows)
        starts = [place for place in range(left + 1) if sign * before[place] > 0 >= sign * before[place + 1]]
        ends = [place for place in range(left, len(curve) - 1) if sign * behind[place] >= 0 > sign * behind[place + 1]]
        n, level = curve[left].change.n, curve[left].change.level
        found.append(
            Estimate(
                value=float(np.exp(middle)),
                low=float(np.exp(_zero(places, before, starts[-1]))) if starts else 0.0,
                high=float(np.exp(_zero(places, behind, ends[0]))) if ends else np.inf,
                level=level,
                n=n,
                method="crossing of the difference and its bounds with zero",
            )
        )
    return found


def _zero(places, values, left: int) -> float:
    """Where a curve that changes sign behind place number `left` is zero."""
    return places[left] + (places[left + 1] - places[left]) * values[left] / (values[left] - values[left + 1])
