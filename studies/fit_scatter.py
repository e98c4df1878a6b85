"""How measured thresholds scatter: variance components lot, wafer, die, device, and arrays of devices.

The dopants' part and whatever else the start says of single devices is computed; only the remainder is fitted.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy import stats

from mc.components import Nested, fit_components
from mc.intervals import Estimate
from physics.threshold import electrostatics, threshold_voltage
from studies.fit_mean import Problem
from studies.fit_model import Start
from studies.fit_read import Measured
from studies.fit_rows import RESOLUTION
from studies.units import SUFFIXES

LARGEST_SPREAD = 4.0  # squared sigma over n kT/q beyond which an array's variance is not followed
APART = 2.0  # largest over smallest area from which on a part that does not shrink with area can be told
QUANTITIES = {"oxide_thickness": "percent", "doping": "percent", "width": "nm", "length": "nm"}
FEWEST_PAIRS = 10
MANY = 40  # rows without levels from which on the part that shrinks with area is told from the one that does not


@dataclass(frozen=True, kw_only=True)
class Scatter:
    """Fitted components and what follows from them.

    levels : variance of each level that could be told [V^2], coarsest first; declared : of the start's other variation [V^2]
    remainder : squared pair coefficient [V^2 m^2]; device : variance of one device whatever its size [V^2], or None
    site : variance that the devices of a pair share but others of their die do not [V^2], or None
    pairs : squared pair coefficient from matched pairs alone, or None; notes : in words
    local : variance of one device of every cell [V^2]; between : of everything that devices of a die share [V^2]
    """

    levels: Mapping[str, Estimate]
    declared: Mapping[str, float]
    remainder: Estimate | None
    device: Estimate | None
    site: Estimate | None
    pairs: Estimate | None
    notes: tuple[str, ...]
    local: np.ndarray
    between: float

    def rows(self, share, of_row) -> np.ndarray:
        """Sigma of every row [V]. share : see `array_share`"""
        return np.sqrt(np.maximum(self.between + self.local[of_row] * share, RESOLUTION**2))


def array_shift(measured: Measured, local, weak_voltage: float, of_row) -> np.ndarray:
    """How far an array's threshold lies below the mean of its devices [V].

    local : variance of one device of every cell [V^2]; weak_voltage : n kT/q [V]
    Currents add in weak inversion, so an array shows -(n kT/q) ln mean exp(-V/(n kT/q)); for normal scatter its mean lies
    sigma^2 (1 - 1/N)/(2 n kT/q) below (cumulant expansion, own derivation).
    """
    return (1 - 1 / measured.count) * local[of_row] / (2 * weak_voltage)


def array_share(measured: Measured, local, weak_voltage: float, of_row) -> np.ndarray:
    """Variance of every row over that of one device [1]: 1 for one device; for an array by the law of its summed current.

    Arguments as in `array_shift`. Currents are lognormal; the relative variance of the mean of N is (exp(x) - 1)/N with
    x = sigma^2/(n kT/q)^2, and a threshold is n kT/q times the logarithm (first order, own derivation).
    """
    spread = np.clip(local[of_row] / weak_voltage**2, 1e-9, LARGEST_SPREAD)
    return np.where(measured.count > 1, np.expm1(spread) / spread, 1.0) / measured.count


def declared_variance(start: Start, problem: Problem, inner) -> dict[str, np.ndarray]:
    """Variance of every cell by what the start says of thickness, doping, width and length, by level [V^2]."""
    found = {level: np.zeros(len(start.cells)) for level in ("lot", "wafer", "die", "device")}
    for mine, device in start.devices(problem.law, problem.values(inner)):
        for quantity, unit in QUANTITIES.items():
            spread = getattr(start.record.variation, quantity)
            sigmas = {level: getattr(spread, f"{level}_{unit}") * SUFFIXES[unit] for level in found}
            if any(sigmas.values()):
                slope = _slope(device, quantity, start.cells.drain_v[mine])
                for level, sigma in sigmas.items():
                    found[level][mine] += (slope * sigma) ** 2
    return found


def _slope(device, quantity, drain):
    """Derivative of the threshold by a quantity, by its logarithm for one given in percent."""
    ends, step = [], 1e-4 if QUANTITIES[quantity] == "percent" else 1e-10
    for sign in (1, -1):
        if quantity == "doping":
            other = device.varied(profile=device.profile.scaled(1 + sign * step))
        elif quantity == "oxide_thickness":
            other = device.varied(oxide_thickness=device.oxide_thickness * (1 + sign * step))
        else:
            other = device.varied(**{quantity: getattr(device, quantity) + sign * step})
        ends.append(threshold_voltage(other, electrostatics(other), drain))
    return (ends[0] - ends[1]) / (2 * step)


def fit_scatter(
    measured: Measured, problem: Problem, inner, residual, weight, share, *, intervals: bool, begin=None
) -> Scatter:
    """Variance components of the residuals [V] of rows with weight; intervals : whether they are wanted yet.

    share : see `array_share`; begin : a Scatter of nearly the same rows, which saves time, or None
    """
    start, of_row, good = problem.start, problem.start.cells.of_row, weight > 0
    computed, area = start.sigmas(problem.law, problem.values(inner))
    declared = declared_variance(start, problem, inner)
    known = computed**2 + declared["device"]
    levels, degrees, notes = _levels(measured, good)
    paired = bool(levels) and (measured.pair >= 0).any()
    shapes = {"remainder": 0.5 / area}
    if np.ptp(np.log(area)) > np.log(APART):
        shapes["device"] = np.ones(len(area))
        if not levels and not (measured.pair >= 0).any() and good.sum() < MANY:
            del shapes["remainder"]  # few single devices do not tell how scatter goes with area
    if paired:
        shapes["site"] = np.ones(len(area))
    rows = of_row[good]
    freedom = int(good.sum()) - len(inner) - sum(degrees)
    if freedom < 3:
        notes.append("Too few rows to fit how devices scatter: variation and scatter are the start's.")
        spread = max(float((residual[good] ** 2).mean()), RESOLUTION**2)
        return Scatter(levels={}, declared={}, remainder=None, device=None, site=None, pairs=None, notes=tuple(notes),
                       local=np.full(len(area), spread), between=0.0)  # fmt: skip
    found = fit_components(
        _nested(measured, problem, inner, residual, good, share, levels, known, shapes), degrees, intervals=intervals,
        begin=None if begin is None else [part.value for part in (*begin.levels.values(), *(getattr(begin, name) for name in shapes))],
    )  # fmt: skip
    names = tuple(levels)
    level = dict(zip(names, found.levels))
    sizes = dict(zip(shapes, found.local))
    local = known + sum(sizes[name].value * shape for name, shape in shapes.items() if name != "site")
    site = sizes.get("site")
    if not measured.levels:
        notes.append("No lot, wafer or die is given: the scatter of single devices contains theirs.")
    averaged = {name: float(declared[name][rows].mean()) for name in ("lot", "wafer", "die") if name in level}
    for name, variance in averaged.items():
        if variance > level[name].high:
            notes.append(
                f"The start's variation of thickness, doping and dimensions gives {1e3 * np.sqrt(variance):.3g} mV between "
                f"{name}s; measured are at most {1e3 * np.sqrt(level[name].high):.3g} mV. It was kept: lower it by hand."
            )
    return Scatter(
        levels=level, declared=averaged, remainder=sizes.get("remainder"), device=sizes.get("device"),
        pairs=_from_pairs(measured, of_row, residual, good, share, known, area, "device" in sizes) if intervals else None,
        notes=tuple(notes), local=local, between=sum(estimate.value for estimate in (*level.values(), *([site] if site else []))), site=site,
    )  # fmt: skip


def widened(scatter: Scatter, moved: list[Scatter]) -> Scatter:
    """The scatter with intervals of its local parts that contain the error of the electrical dimensions and the doping.

    moved : fitted again, each with one of those parameters one standard error off; errors add up in squares, as logarithms
    """
    changes = {}
    for name in ("remainder", "device"):
        estimate = getattr(scatter, name)
        if estimate is None or estimate.low <= 0:
            continue
        others = [getattr(each, name).value for each in moved]
        off = [np.log(max(other, estimate.low) / estimate.value) for other in others]
        extra = stats.norm.ppf((1 + estimate.level) / 2) * float(np.sqrt(np.sum(np.square(off))))
        down, up = np.log(estimate.value / estimate.low), np.log(estimate.high / estimate.value)
        changes[name] = replace(
            estimate,
            low=estimate.value * float(np.exp(-np.hypot(down, extra))),
            high=estimate.value * float(np.exp(np.hypot(up, extra))),
        )
    return replace(scatter, **changes)


def _levels(measured: Measured, good):
    """The levels whose units can be told apart, as whole numbers from 0, their degrees of freedom, and notes."""
    levels, degrees, notes = {}, [], []
    above = 1
    places = dict(measured.levels)
    for name, codes in places.items():
        units = np.unique(codes[good], return_inverse=True)[1]
        count = units.max() + 1
        if count <= above:
            kept = f"as many {name}s as units above them" if above > 1 else f"one {name} only"
            notes.append(f"No variance between {name}s can be told: {kept}.")
            continue
        if count >= good.sum() - 1:
            notes.append(f"No variance between {name}s can be told from that of devices: one row each.")
            continue
        levels[name] = units
        degrees.append(int(count - above))
        above = count
    return levels, tuple(degrees), notes


def _nested(measured: Measured, problem: Problem, inner, residual, good, share, levels, known, shapes) -> Nested:
    """The residuals for the components: a complete pair as its mean and its difference, which are independent.

    Its mean has half the local variance, and all of what the two devices of a pair share but others of their die do not.
    """
    jacobian = problem.jacobian(inner)
    jacobian = jacobian / np.maximum(np.abs(jacobian).max(axis=0), 1e-300)
    of_row = problem.start.cells.of_row
    value, keep = residual.copy(), good.copy()
    first, second, difference = np.zeros(0, int), np.zeros(0, int), None
    if "site" in shapes:
        first, second = paired_rows(measured, good)
        difference = residual[first] - residual[second]
        value[first] = (residual[first] + residual[second]) / 2
        keep[second] = False
    half = np.ones(len(value))
    half[first] = 0.5
    rows = of_row[keep]
    single = share[keep] * half[keep]
    twice = 2 * share[first]
    return Nested(
        residuals=value[keep],
        fixed=jacobian[rows],
        levels=tuple(codes[keep[good]] for codes in levels.values()),
        known=known[rows] * single,
        shapes=tuple(shape[rows] * (1.0 if name == "site" else single) for name, shape in shapes.items()),
        differences=difference,
        difference_known=known[of_row[first]] * twice,
        difference_shapes=tuple(
            shape[of_row[first]] * (0.0 if name == "site" else twice) for name, shape in shapes.items()
        ),
    )


def paired_rows(measured: Measured, good) -> tuple[np.ndarray, np.ndarray]:
    """First and second rows of the matched pairs of which both have weight."""
    order = np.argsort(measured.pair, kind="stable")
    order = order[measured.pair[order] >= 0]
    first, second = order[::2], order[1::2]
    both = good[first] & good[second]
    return first[both], second[both]


def pair_differences(measured: Measured, residual, good):
    """First rows and differences [V] of the complete matched pairs."""
    first, second = paired_rows(measured, good)
    return first, residual[first] - residual[second]


def _from_pairs(measured, of_row, residual, good, share, known, area, device) -> Estimate | None:
    """The squared pair coefficient from matched pairs alone, the computed part taken off."""
    first, difference = pair_differences(measured, residual, good)
    if len(first) < FEWEST_PAIRS:
        return None
    cells, shapes = of_row[first], [1 / area]
    if device:
        shapes.append(np.full(len(area), 2.0))
    found = fit_components(
        Nested(residuals=difference, fixed=np.zeros((len(first), 0)), levels=(),
               known=2 * known[cells] * share[first], shapes=tuple(shape[cells] * share[first] for shape in shapes)),
        (),
    )  # fmt: skip
    return found.local[0]
