"""Two process options asked the same question on the same random numbers: what differs, where they cross over, and why."""

from dataclasses import dataclass, replace
from time import perf_counter

import numpy as np
import pandas as pd

from mc.runner import Progress
from physics.short_channel import ChannelTooShort
from studies.answer import Answer, columns_of
from studies.compare_words import (
    Decider,
    compare_notes,
    crossing_sentences,
    decider_of,
    verdict,
    why_sentences,
)
from studies.controlled import METHOD, NUMBERS, threshold_changes
from studies.differences import Difference, crossings, differences
from studies.errors import InputError
from studies.process_content import same_process
from studies.process_file import ProcessFile
from studies.settings import Settings, Workers
from studies.why import Place, Share, breakdown

DEVICE_KEYS = ("device", "n_device")  # a question's device; of a gate the one that pulls down


@dataclass(frozen=True, kw_only=True)
class Compared:
    """The same question answered for two options."""

    kind: str
    question: object
    first: ProcessFile
    second: ProcessFile
    answers: tuple[Answer, Answer]

    @property
    def same(self) -> bool:
        """Whether both options are the same but for what they are called."""
        return same_process(self.first, self.second)

    @property
    def names(self) -> tuple[str, str]:
        """What the options are called."""
        return self.first.name, self.second.name


def compare(compared: Compared, settings: Settings, workers: Workers, progress: Progress = lambda *_: None) -> Answer:
    """The comparison as an answer of its own."""
    started = perf_counter()
    found = differences(*(answer.numbers for answer in compared.answers), compared.same)
    if compared.kind == "spread" and not compared.same:
        found = _better_known(compared, found, settings, workers)
    decider = decider_of(compared.kind, found)
    crossed = {name: crossings(curve) for name, curve in _curves(found).items()}
    place = _place(compared)
    notes = []
    try:
        parts, evaluations = breakdown(compared.first, compared.second, place, settings, workers, progress)
    except (InputError, ChannelTooShort, FloatingPointError) as error:
        parts, evaluations = [], 0
        notes.append(f"Why they differ is not broken down: a mixture of both options has no physical answer ({error}).")
    curve = _curves(found).get(decider.curve, [])
    return Answer(
        kind="compare",
        process=", ".join(compared.names),
        question=_asked(compared, decider, place),
        table=_table(compared, found),
        tables=_tables(compared, crossed, parts),
        headlines=_headlines(decider, found),
        sentences=(
            verdict(decider, found, compared.names, compared.same),
            *crossing_sentences(crossed.get(decider.curve, []), curve, compared.names),
            *why_sentences(parts, compared.names, place.neighbours),
        ),
        notes=(*notes, *compare_notes(found, parts, place.neighbours)),
        samples=min(answer.samples for answer in compared.answers),
        block_size=compared.answers[0].block_size,
        evaluations=evaluations + _controlled_devices(found),
        seconds=perf_counter() - started,
    )


def _better_known(
    compared: Compared, found: list[Difference], settings: Settings, workers: Workers
) -> list[Difference]:
    """The differences, those of the threshold's mean and sigma from a run of both options with a control."""
    samples = min(answer.samples for answer in compared.answers)
    changes = threshold_changes(compared.first, compared.second, compared.question, samples, settings, workers)
    return [
        replace(each, change=changes[each.name, each.width_um], paired=True)
        if (each.name, each.width_um) in changes
        else each
        for each in found
    ]


def _controlled_devices(found: list[Difference]) -> int:
    """Devices evaluated for the changes that have a control: both options', once for all numbers of a width."""
    return sum(2 * each.change.n for each in found if each.change.method == METHOD) // len(NUMBERS)


def _asked(compared: Compared, decider: Decider, place: Place) -> dict[str, object]:
    asked = compared.question.model_dump(by_alias=True)
    return asked | {"question": compared.kind, "decides": decider.name, "curve": decider.curve, "device": place.device}


def _curves(found: list[Difference]) -> dict[str, list[Difference]]:
    """Differences against width of every quantity of which more, or less, is better."""
    curves: dict[str, list[Difference]] = {}
    for each in found:
        if each.width_um is not None and each.better:
            curves.setdefault(each.name, []).append(each)
    return curves


def _place(compared: Compared) -> Place:
    """Where the threshold is taken apart: the question's device, its narrowest and its widest width."""
    question = compared.question
    widths = sorted({number.width_um for number in compared.answers[0].numbers if number.width_um is not None})
    if compared.kind == "pair":  # at the answers themselves
        found = [number for answer in compared.answers for number in answer.numbers if number.name == "min_width_um"]
        widths = sorted(number.estimate.value for number in found if np.isfinite(number.estimate.value)) or widths
    device = next(getattr(question, key) for key in DEVICE_KEYS if hasattr(question, key))
    length = question.length_um
    if isinstance(length, list):
        length = float(compared.answers[0].tables["pair_shares"].length_um.iloc[0])
    return Place(
        device=device,
        width_um=tuple(dict.fromkeys((widths[0], widths[-1]))),
        length_um=length,
        body_bias_v=getattr(question, "body_bias_v", 0.0),
        drain_v=getattr(question, "drain_v", 0.05),
        temperature_c=question.temperature_c,
        neighbours=compared.kind == "pair",
    )


def _identity(compared: Compared) -> dict[str, str]:
    first, second = compared.names
    return {"first": first, "second": second, "question": compared.kind}


def _table(compared: Compared, found: list[Difference]) -> pd.DataFrame:
    rows = []
    for each in found:
        better = {0: "", 1: compared.names[1], -1: compared.names[0]}[each.better * each.sign]
        rows.append(
            _identity(compared)
            | {"quantity": each.name, "width_um": each.width_um}
            | columns_of("first_value", each.first)
            | columns_of("second_value", each.second)
            | columns_of("difference", each.change)
            | {"interval": "paired" if each.paired else "separate", "better": better, "samples": each.change.n}
        )
    return pd.DataFrame(rows)


def _tables(compared: Compared, crossed, parts: list[Share]) -> dict[str, pd.DataFrame]:
    tables = {}
    rows = [
        _identity(compared) | {"quantity": name} | columns_of("crossing_width", crossing, "um")
        for name, found in crossed.items()
        for crossing in found
    ]
    if rows:
        tables["compare_crossings"] = pd.DataFrame(rows)
    rows = [
        _identity(compared)
        | {"width_um": part.width_um, "ingredient": part.ingredient}
        | columns_of("vth_mean", part.mean_mv, "mv")
        | columns_of("vth_variance", part.variance_mv2, "mv2")
        for part in parts
    ]
    if rows:
        tables["compare_shares"] = pd.DataFrame(rows)
    return tables


def _headlines(decider: Decider, found: list[Difference]):
    return {
        f"difference of {each.name}"
        + (f" at width_um {each.width_um:.15g}" if each.width_um is not None else ""): each.change
        for each in found
        if each.name == decider.name
    }
