"""What every question hands back: a read-only record of tables, headline numbers and notes."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import pandas as pd

from mc.intervals import Estimate
from mc.plan import Plan
from studies.numbers import Number
from studies.settings import Settings
from studies.validated import Record

MOST_SAMPLES = 10**10  # where a precision-driven run gives up


@dataclass(frozen=True, kw_only=True)
class Answer:
    """The answer to one question.

    kind : the question's kind
    process : short name of the process option
    question : the question as it was asked, plain values
    table : tidy table, one row per width; every number's interval beside it
    tables : further tidy tables by name
    drawn : arrays that only the figure shows, by name
    numbers : what can be compared with another process option's answer
    headlines : estimates by name, units at the end of the names
    sentences : the answer in words
    notes : approximations used and warnings, in words
    met : False when a target that was asked for cannot be met
    samples : samples used
    block_size : samples per block
    evaluations : devices evaluated
    seconds : wall time
    """

    kind: str
    process: str
    question: Mapping[str, object]
    table: pd.DataFrame
    headlines: Mapping[str, Estimate]
    sentences: tuple[str, ...]
    notes: tuple[str, ...]
    samples: int
    block_size: int
    evaluations: int
    seconds: float
    met: bool = True
    tables: Mapping[str, pd.DataFrame] = field(default_factory=dict)
    numbers: tuple[Number, ...] = ()
    drawn: Mapping[str, object] = field(default_factory=dict)


def columns_of(name: str, estimate: Estimate, unit: str = "") -> dict[str, float]:
    """An estimate as three columns, the unit at the end of each name: name_unit, name_low_unit, name_high_unit."""
    end = f"_{unit}" if unit else ""
    return {f"{name}{end}": estimate.value, f"{name}_low{end}": estimate.low, f"{name}_high{end}": estimate.high}


def asked_columns(question: Record, row: dict) -> dict[str, object]:
    """What else was asked, so that rows of two questions can be told apart: the question's keys that `row` lacks."""
    asked = question.model_dump()
    return {key: value for key, value in asked.items() if key not in row and not isinstance(value, list)}


def precision_notes(settings: Settings, samples: int) -> list[str]:
    """A note when a precision was asked for and the most that is spent on it did not reach it."""
    if settings.precision is not None and samples >= MOST_SAMPLES:
        return [
            f"The precision of {settings.precision:g} was not reached with {samples} samples, the most that is spent."
        ]
    return []


def make_plan(settings: Settings, *, default_samples: int, block_size: int) -> Plan:
    """The plan that the settings ask for."""
    if settings.precision is not None:
        return Plan(samples=MOST_SAMPLES, block_size=block_size, precision=settings.precision)
    return Plan(samples=settings.samples or default_samples, block_size=block_size)
