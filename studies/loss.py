"""Which share of narrow devices falls outside its limits, what that costs a chip, and which width gives most good chips.

The device's failure share over all causes comes from the rare-event estimator. Dies differ, so a chip's yield is the mean
over dies of the binomial probability at that die's own failure share p(die), never at the mean share. A threshold that
shifts makes one side fail more and the other less; on either side, on the scale of normal scores -Phi^-1(p), the die's
causes act nearly linearly. So the estimator is asked for each side on the nominal die and with one die-level cause at a
time moved by STEP sigmas both ways, and a parabola in each cause gives p(die) for every drawn die.
"""

from dataclasses import dataclass, fields, replace
from time import perf_counter

import numpy as np
import pandas as pd
from scipy.special import ndtr, ndtri

from mc.array_yield import array_failure, defect_yield
from mc.codec import storable
from mc.experiment import Inputs
from mc.intervals import Estimate, bounded_mean, fraction_exact
from mc.plan import Block
from mc.rare import RareEstimate, failure_probability
from mc.runner import Progress, results
from studies.answer import Answer, asked_columns, columns_of
from studies.edge_notes import edge_width_notes
from studies.errors import InputError
from studies.loss_question import Question
from studies.margins import SIDES, LimitState, Margins
from studies.notes import loss_notes, loss_sentences, model_notes
from studies.numbers import Number
from studies.population import Population
from studies.process_file import LEVELS, ProcessFile
from studies.settings import Settings, Workers
from studies.units import SUFFIXES, si

__all__ = ["Question", "answer", "check"]

STEP = 1.5  # sigmas by which one die-level cause is moved
DIES = 65_536
COUNTED = 200_000  # devices counted plainly beside the estimator
LEAST_SHARE = 1e-300
SQUARE_CENTIMETRE = 1e-4  # [m^2]
BETTER = {"device_failure": -1, "chip_yield": 1, "good_chips_per_cm2": 1}
RESOLVED = 1e-15  # smallest failure share spoken of: causes are held 8 sigmas out


@storable
@dataclass(frozen=True, kw_only=True)
class Side:
    """One side's failure share on a die, as a surface.

    nominal_die : failure share on the nominal die
    linear, curved : coefficients of the normal score in each die-level cause, shape (causes,)
    """

    nominal_die: RareEstimate
    linear: np.ndarray
    curved: np.ndarray

    def shares(self, dies, end: str = "value") -> np.ndarray:
        """Failure share of a device on every die. dies : normals (dies, causes); end : "value", "low" or "high"."""
        base = max(getattr(self.nominal_die, end), LEAST_SHARE)
        return ndtr(ndtri(base) - dies @ self.linear - (dies * dies) @ self.curved)


@dataclass(frozen=True, kw_only=True)
class Width:
    """What one width gives: failure shares by reason, the sides' surfaces over dies, and a plain count.

    whole : failure share over all causes, by reason and "any"
    sides : surfaces of p(die); a device cannot fail on both, so their shares add
    unresolved : whether a side's failures are too rare to be met (below RESOLVED, or impossible) and left out of it
    counted : devices outside among COUNTED
    """

    margins: Margins
    whole: dict[str, RareEstimate]
    sides: tuple[Side, ...]
    unresolved: bool
    counted: int
    calls: int

    def shares(self, dies, end: str = "value") -> np.ndarray:
        """Failure share of a device on every die, see `Side.shares`."""
        return sum((side.shares(dies, end) for side in self.sides), np.zeros(len(dies)))

    def doubts(self) -> tuple[str, ...]:
        """What the estimator says against its own results, each once."""
        found = (self.whole["any"], *(side.nominal_die for side in self.sides))
        return tuple(dict.fromkeys(note for estimate in found for note in estimate.notes))


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before any sampling."""
    _margins(question, file)


def _margins(question: Question, file: ProcessFile) -> list[Margins]:
    population = Population(
        file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c
    )
    if question.supply_v is not None and population.record.mobility_cm2_per_vs is None:
        raise InputError(f"{population.where}: drive and leakage need 'mobility_cm2_per_vs'")
    if not population.names(level="device"):
        raise InputError(f"{population.where}.scatter: a tail needs some scatter between devices")
    geometries = [population.geometry(width, question.length_um) for width in question.width_um]
    return [Margins.of(population, geometry, question) for geometry in geometries]


def die_names(population: Population) -> tuple[str, ...]:
    """Causes that all devices of a die share."""
    return tuple(name for level in LEVELS[:-1] for name in population.names(level=level))


def study(margins: Margins, seed: int) -> Width:
    """Everything that one width needs of the estimator and of plain counting."""
    population = margins.population
    local, above = population.names(level="device"), die_names(population)
    calls = 0

    def share(names, fixed, reasons):
        nonlocal calls
        state = LimitState(margins=margins, names=names, fixed=fixed, reasons=reasons)
        found = failure_probability(state, len(names), seed=seed)
        calls += found.calls
        return found

    def side(reasons):
        nominal = share(local, {}, reasons)
        if nominal.value < RESOLVED:
            return None
        middle = _score(nominal)
        moved = [[_score(share(local, {name: sign * STEP}, reasons)) for sign in (-1, 1)] for name in above]
        low, high = np.array(moved).reshape(-1, 2).T
        # where a moved die's share is too small to be met, the other side of the cause is continued straight
        low, high = np.where(np.isnan(low), 2 * middle - high, low), np.where(np.isnan(high), 2 * middle - low, high)
        low, high = np.nan_to_num(low, nan=middle), np.nan_to_num(high, nan=middle)
        curved = (high + low - 2 * middle) / (2 * STEP**2)
        return Side(nominal_die=nominal, linear=(high - low) / (2 * STEP), curved=curved)

    # the die-level causes of one kind of device are independent of each other, so independent normals serve as they are
    whole = {reason: share((*local, *above), {}, (reason,)) for reason in margins.reasons}
    several = len(margins.reasons) > 1
    whole["any"] = share((*local, *above), {}, margins.reasons) if several else whole[margins.reasons[0]]
    grouped = [tuple(reason for reason in group if reason in margins.reasons) for group in SIDES.values()]
    sides = [side(reasons) for reasons in grouped if reasons]
    return Width(
        margins=margins,
        whole=whole,
        sides=tuple(each for each in sides if each is not None),
        unresolved=None in sides,
        counted=_count(margins, (*local, *above), seed),
        calls=calls,
    )


def _parts_of_study(item: tuple[Margins, int]) -> dict:
    """What `study` finds, without the margins that the caller has."""
    width = study(*item)
    return {each.name: getattr(width, each.name) for each in fields(width) if each.name != "margins"}


def _score(share: RareEstimate) -> float:
    """Normal score of a failure share; NaN where it is too small to be met."""
    return float(-ndtri(share.value)) if share.value >= RESOLVED else np.nan


def _count(margins: Margins, names, seed: int) -> int:
    outside = 0
    for draws in Inputs(seed=seed, names=names).slices(Block(0, COUNTED)):
        outside += int((np.minimum.reduce(list(margins.by_reason(draws).values())) <= 0).sum())
    return outside


def chip_yield(width: Width, dies, question: Question) -> Estimate:
    """Chip yield over dies; the interval holds that of the dies drawn and that of the device's failure share."""

    def at(end):
        shares = np.minimum(width.shares(dies, end), 1)
        loss = array_failure(shares, question.devices, question.blocks, question.spares)
        return bounded_mean(float(loss.sum()), float((loss * loss).sum()), len(loss)).complement()

    value, worst, best = at("value"), at("high"), at("low")
    return replace(value, low=worst.low, high=best.high, method="binomial on every die; dies and failure share")


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer a loss question. Raises InputError where the physics has no answer."""
    started = perf_counter()
    margins = _margins(question, file)
    population = margins[0].population
    found = results(
        _parts_of_study,
        {f"{width!r} um": (each, settings.seed) for width, each in zip(question.width_um, margins)},
        jobs=workers.jobs,
        backend=workers.backend,
        progress=progress,
        ledger=workers.ledger,
        name="widths",
    )
    widths = [Width(margins=each, **parts) for each, parts in zip(margins, found)]
    names = die_names(population)
    count = settings.samples or DIES
    slices = Inputs(seed=settings.seed, names=names).slices(Block(0, count)) if names else ()
    dies = np.vstack([np.column_stack([draws[name] for name in names]) for draws in slices] or [np.zeros((1, 0))])
    yields = [chip_yield(width, dies, question) for width in widths]
    table = _table(question, file, widths, yields)
    headlines = {
        f"{kind} at width_um {width:.15g}": estimate
        for width, each, chips in zip(question.width_um, widths, yields)
        for kind, estimate in (("device_failure", _plain(each.whole["any"])), ("chip_yield", chips))
    }
    return Answer(
        kind="loss",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=table,
        headlines=headlines,
        sentences=loss_sentences(question, table.to_dict("records")),
        notes=(
            *model_notes(population),
            *edge_width_notes(population, tuple(each.geometry for each in margins)),
            *loss_notes(question, widths),
        ),
        samples=len(dies),
        block_size=len(dies),
        evaluations=sum(width.calls + COUNTED for width in widths),
        seconds=perf_counter() - started,
        numbers=_numbers(table),
    )


def _numbers(table: pd.DataFrame) -> tuple[Number, ...]:
    """Numbers of every width, and the most good chips of all; failure shares of two options share no samples."""

    def number(name, row, width):
        quantity, _, unit = name.partition("_per_")
        value, low, high = (row[f"{quantity}{end}{unit and f'_per_{unit}'}"] for end in ("", "_low", "_high"))
        estimate = Estimate(value=value, low=low, high=high, level=0.95, n=0, method="rare events")
        return Number(name=name, width_um=width, better=BETTER[name], estimate=estimate)

    rows = table.to_dict("records")
    numbers = [number(name, row, row["width_um"]) for name in BETTER for row in rows]
    best = max(rows, key=lambda row: row["good_chips_per_cm2"])
    return (*numbers, replace(number("good_chips_per_cm2", best, None), name="most_good_chips_per_cm2"))


def _plain(share: RareEstimate) -> Estimate:
    return Estimate(
        value=share.value, low=share.low, high=share.high, level=share.level, n=share.calls, method=share.method
    )


def _table(question: Question, file: ProcessFile, widths: list[Width], yields: list[Estimate]) -> pd.DataFrame:
    rows = []
    for drawn, width, chips in zip(question.width_um, widths, yields):
        area = _chip_area(question, drawn)
        area_cm2 = area / SQUARE_CENTIMETRE
        good = chips.scaled(
            defect_yield(area_cm2 * question.defects_per_cm2, question.clustering) * _used_share(question) / area_cm2
        )
        row = {"process": file.name, "device": question.device, "width_um": drawn, "length_um": question.length_um}
        row |= columns_of("device_failure", _plain(width.whole["any"]))
        for reason in width.margins.reasons:
            row |= columns_of(f"failure_{reason}", _plain(width.whole[reason]))
        counted = fraction_exact(width.counted, COUNTED)
        row |= columns_of("counted_failure", counted) | columns_of("chip_yield", chips)
        row |= {"chip_area_mm2": area / SUFFIXES["mm2"]} | columns_of("good_chips", good, "per_cm2")
        row |= {"doubtful": bool(width.doubts())}
        rows.append(row | asked_columns(question, row))
    return pd.DataFrame(rows)


def _chip_area(question: Question, width_um: float) -> float:
    """Chip area [m^2]: a fixed part and the cells, which grow with the drawn width."""
    cell = si(question, "cell_area_um2") + si(question, "cell_length_um") * width_um * SUFFIXES["um"]
    return si(question, "fixed_area_mm2") + question.devices * cell


def _used_share(question: Question) -> float:
    """Share of the wafer's area inside its rim."""
    if question.wafer_diameter_mm is None:
        return 1.0
    return (1 - 2 * question.edge_exclusion_mm / question.wafer_diameter_mm) ** 2
