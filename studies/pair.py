"""The smallest width of a matched pair that keeps its offset or current error inside a limit on enough chips.

The same draws serve every width, so the yield is a smooth function of the width and the search needs few evaluations.
"""

from dataclasses import replace
from functools import partial
from time import perf_counter

import numpy as np
import pandas as pd

from mc.experiment import Inputs
from mc.plan import Plan
from mc.runner import Progress, run
from studies.answer import Answer, make_plan, precision_notes
from studies.biasing import Biasing
from studies.edge_notes import edge_width_notes
from studies.notes import model_notes, pair_notes, pair_sentences
from studies.pair_numbers import pair_numbers
from studies.pair_question import Question
from studies.pair_search import Search
from studies.pairing import Arrangement
from studies.population import Population
from studies.process_file import ProcessFile
from studies.settings import Settings, Workers
from studies.units import SUFFIXES, si

__all__ = ["Question", "answer", "check"]

DRAWS_AT_ONCE = 200_000  # a slice's chips times its random numbers
BLOCK = 4096
FEWEST_AT_ONCE = 256  # chips evaluated at once, however many pairs they have
DEVICES_A_BLOCK = 65_536  # pairs times fingers of a block's chips, so that few chips of many pairs still share out
MOST_PAIRS = 2_000_000  # pairs (times fingers) drawn at a width by default; beyond what they can count, rare events
FEWEST_CHIPS = 1000
FAILURES_EXPECTED = 100  # chips outside at the target yield, unless samples are given


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before any sampling."""
    population = _population(question, file)
    for length in question.length_um:
        biasing = Biasing(question, _arrangement(question, population), length)
        for width in (question.width_min_um, question.width_max_um):
            biasing.candidate(width)


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer a pair question. Raises InputError where the physics has no answer."""
    started = perf_counter()
    population = _population(question, file)
    arrangement = _arrangement(question, population)
    searches = []
    for length in question.length_um:
        search = Search(
            question=question,
            arrangement=arrangement,
            biasing=Biasing(question, arrangement, length),
            plan=_plan(question, settings),
            inputs=_inputs(arrangement, settings),
            evaluate=partial(
                run, jobs=workers.jobs, backend=workers.backend, progress=progress, ledger=workers.ledger
            ),
        )
        search.run()
        searches.append(search)
    rows = pd.DataFrame([row for search in searches for row in search.rows(file)])
    lengths = pd.DataFrame([search.summary(file) for search in searches])
    best = min(searches, key=lambda search: (not search.met, search.area(search.width.value)))
    shares = best.shares(file)
    whole = _as_one_finger(best) if question.fingers > 1 else None
    return Answer(
        kind="pair",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=rows,
        tables={"pair_lengths": lengths, "pair_shares": shares},
        headlines=best.headlines(),
        sentences=pair_sentences(question, file.name, best, [search for search in searches if search.met]),
        notes=(
            *model_notes(population),
            *edge_width_notes(population, (best.finger_geometry(),)),
            *pair_notes(question, population, best, whole, rows),
            *precision_notes(settings, best.samples),
        ),
        samples=best.samples,
        block_size=best.plan.block_size,
        evaluations=sum(search.evaluations for search in searches),
        seconds=perf_counter() - started,
        met=best.met,
        numbers=pair_numbers(best),
    )


def _as_one_finger(best: Search) -> Search:
    """The answer's width as one finger, on draws of its own, for what splitting costs or gains."""
    question = best.question.model_copy(update={"fingers": 1})
    arrangement = replace(best.arrangement, fingers=1)
    whole = replace(
        best,
        question=question,
        arrangement=arrangement,
        biasing=Biasing(question, arrangement, best.biasing.length_um),
        inputs=replace(best.inputs, names=(*arrangement.die_names(), *arrangement.pair_names())),
        judged={},
        grouped={},
        tail={},
        evaluations=0,
    )
    whole.judge([best.shown_width()])
    best.evaluations += whole.evaluations
    return whole


def _population(question: Question, file: ProcessFile) -> Population:
    return Population(file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c)


def _arrangement(question: Question, population: Population) -> Arrangement:
    distance = question.distance_um * SUFFIXES["um"]
    scatter = population.record.scatter
    gradient = 0.0 if question.layout == "common centroid" else si(scatter, "gradient_uv_per_um")
    return Arrangement(
        population=population,
        mirror=question.kind == "current mirror",
        pairs=question.pairs,
        fingers=question.fingers,
        drain_voltage=question.drain_v,
        distance_sigma=si(scatter, "distance_pair_uv_per_um") * distance,
        gradient_sigma=gradient * distance,
    )


def _plan(question: Question, settings: Settings) -> Plan:
    wanted = float(np.clip(FAILURES_EXPECTED / (1 - question.target_yield), 20_000, 1_000_000))
    affordable = max(MOST_PAIRS / (question.pairs * question.fingers), FEWEST_CHIPS)
    wanted = round(min(wanted, affordable))
    block = int(np.clip(DEVICES_A_BLOCK // (question.pairs * question.fingers), FEWEST_AT_ONCE, BLOCK))
    return make_plan(settings, default_samples=wanted, block_size=block)


def _inputs(arrangement: Arrangement, settings: Settings) -> Inputs:
    names = (*arrangement.die_names(), *arrangement.pair_names())
    return Inputs(
        seed=settings.seed,
        names=names,
        copula=arrangement.population.copula,
        slice_size=max(FEWEST_AT_ONCE, min(BLOCK, DRAWS_AT_ONCE // len(names))),
    )
