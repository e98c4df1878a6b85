"""The channel's edge solved numerically: what it does to the threshold and to the dopants' scatter at each width.

No random numbers: the interval beside a number is its numerical error, from halving the mesh and, where the process
file's method is "solved", from the table's sections held out.
"""

from dataclasses import dataclass, replace
from time import perf_counter
from typing import Annotated

import numpy as np
import pandas as pd
from joblib import parallel_config
from pydantic import Field

from mc.intervals import Estimate
from mc.runner import Progress
from physics.cross_section import solve_threshold
from physics.cross_section_dopants import dopant_weights
from physics.device import Device
from physics.edge_surface import SolvedEdge
from physics.edges import Edge
from physics.section_geometry import Section
from physics.threshold import electrostatics, oxide_capacitance
from studies.answer import Answer, asked_columns, columns_of
from studies.edge_notes import agrees, edge_question_notes, edge_sentences
from studies.edge_solutions import ANY_LENGTH, Solutions, closed_scatter, solved_widths
from studies.errors import InputError, one_line
from studies.geometry import check_edge_table, electrical
from studies.nominal import closed_form_edge, nominal_device
from studies.numbers import Number
from studies.process_edge import GEOMETRY
from studies.process_file import ProcessFile
from studies.question import WidthQuestion
from studies.section import edge_section
from studies.settings import Settings, Workers
from studies.units import SUFFIXES, micrometres, split_unit

FINE = 2.0  # density of the finer mesh's lines over the standard one's
MESH, TABLE = "mesh halved", "mesh halved, table held out"
COMPARED = ("edge_shift_mv", "dopant_sigma_mv_um")


class Question(WidthQuestion):
    """The channel's edge solved: threshold shift and dopant scatter against width, and how far closed forms hold."""

    device: str
    """device of the process file"""
    length_um: Annotated[float, Field(gt=0, le=1000)] | None = None
    """drawn length; given, the dopants' sigma of one device is told in mV"""
    body_bias_v: Annotated[float, Field(ge=0, le=20)] = 0.0
    """reverse body bias, a magnitude"""


@dataclass(frozen=True, kw_only=True)
class Prepared:
    """What is asked, in SI: the nominal device, its section, its closed form, electrical widths and length [m]."""

    nominal: Device
    section: Section
    closed: Edge
    widths: tuple[float, ...]
    length: float | None


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before anything is solved."""
    _prepared(question, file)


def _prepared(question: Question, file: ProcessFile) -> Prepared:
    record, where = file.device(question.device), f"{one_line(file.path)}: device.{one_line(question.device)}"
    nominal = nominal_device(
        file, question.device, body_bias_v=question.body_bias_v, temperature_c=question.temperature_c
    )
    section = edge_section(nominal, record, where)
    if section is None:
        if record.edge.kind not in GEOMETRY:
            raise InputError(
                f'{where}.edge.kind = "{record.edge.kind}": nothing to solve; a "field oxide" or a "trench" is needed'
            )
        raise InputError(
            f"{where}.edge: '{GEOMETRY[record.edge.kind]}' is needed to solve a {record.edge.kind}; it is missing"
        )
    widths = tuple(electrical(record, where, width, "width") for width in question.width_um)
    check_edge_table(replace(nominal, width=widths[0]), record, where)
    length = None if question.length_um is None else electrical(record, where, question.length_um, "length")
    return Prepared(
        nominal=nominal, section=section, closed=closed_form_edge(record.edge), widths=widths, length=length
    )


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer an edge question. Raises InputError where the section has no solution."""
    started = perf_counter()
    with parallel_config(n_jobs=workers.jobs, backend=workers.backend):
        asked = _prepared(question, file)
        standard = solved_widths(asked.section, asked.widths)
        fine = solved_widths(asked.section, asked.widths, FINE, progress)
    estimates = [_estimates(asked, place, standard, fine) for place in range(len(asked.widths))]
    rows = []
    for width, electrical_width, mine in zip(question.width_um, asked.widths, estimates):
        row = {"process": file.name, "device": question.device, "width_um": width}
        row["electrical_width_um"] = micrometres(electrical_width)
        row |= _columns(mine) | _closed_columns(asked, electrical_width, mine["edge_shift_mv"])
        rows.append(row | asked_columns(question, row))
    compared = [(width, name, mine[name]) for width, mine in zip(question.width_um, estimates) for name in COMPARED]
    return Answer(
        kind="edge",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=pd.DataFrame(rows),
        headlines={f"{name} at width_um {width:.15g}": estimate for width, name, estimate in compared},
        sentences=edge_sentences(file.device(question.device).edge, rows),
        notes=(*dict.fromkeys((*standard.notes, *fine.notes)), *edge_question_notes(asked.nominal.edge, rows)),
        samples=0,
        block_size=0,
        evaluations=2 * len(asked.widths) + 1,
        seconds=perf_counter() - started,
        numbers=tuple(
            Number(name=name, width_um=width, better=0, estimate=estimate) for width, name, estimate in compared
        ),
        drawn=_picture(asked),
    )


def _estimate(value: float, error: float, method: str = MESH) -> Estimate:
    """A number and the bound of its numerical error; no sample enters."""
    return Estimate(value=value, low=value - error, high=value + error, level=1.0, n=1, method=method)


def _halved(standard: np.ndarray, fine: np.ndarray, place: int) -> Estimate:
    return _estimate(float(fine[place]), abs(float(fine[place] - standard[place])))


def _estimates(asked: Prepared, place: int, standard: Solutions, fine: Solutions) -> dict[str, Estimate]:
    """Numbers of one width by name; the unit at the end of the names."""
    width, depletion = asked.widths[place], float(electrostatics(asked.nominal).depletion_width)
    section = replace(asked.section, width=width)
    coefficient = closed_scatter(section, ANY_LENGTH)[0] * np.sqrt(width * ANY_LENGTH) / SUFFIXES["mv_um"]
    shift = _halved(standard.shift, fine.shift, place).scaled(1 / SUFFIXES["mv"])
    ratio = _halved(standard.sigma_ratio, fine.sigma_ratio, place)
    found = {
        "edge_shift_mv": shift,
        "equivalent_shape": _halved(
            *((each.charge_factor - 1) * (width / depletion) for each in (standard, fine)), place
        ),
        "dopant_sigma_mv_um": ratio.scaled(coefficient),
        "dopant_sigma_ratio": ratio,
        "dopant_skew_ratio": _halved(standard.skewness_ratio, fine.skewness_ratio, place),
    }
    if asked.length is not None:
        found["dopant_sigma_mv"] = ratio.scaled(closed_scatter(section, asked.length)[0] / SUFFIXES["mv"])
    if isinstance(edge := asked.nominal.edge, SolvedEdge):
        mesh = shift.high - shift.value
        tabled = _shift_mv(asked, edge, width)
        found["table_shift_mv"] = _estimate(tabled, mesh + edge.charge_error * abs(tabled), TABLE)
        tabled = float(edge.sigma_ratio(width))
        error = ratio.high - ratio.value + edge.sigma_error * tabled
        found["table_dopant_sigma_ratio"] = _estimate(tabled, error, TABLE)
    return found


def _columns(estimates: dict[str, Estimate]) -> dict[str, float]:
    columns = {}
    for name, estimate in estimates.items():
        quantity, unit = split_unit(name)
        columns |= columns_of(quantity, estimate, unit or "")
    return columns


def _shift_mv(asked: Prepared, edge: Edge, width: float) -> float:
    """Shift of the nominal threshold's magnitude by an edge [mV], without any short-channel effect."""
    nominal, state = asked.nominal, electrostatics(asked.nominal)
    factor = edge.charge_factor(state.depletion_width, width, nominal.oxide_thickness)
    return float((factor - 1) * state.bulk_charge / oxide_capacitance(nominal.oxide_thickness)) / SUFFIXES["mv"]


def _closed_columns(asked: Prepared, width: float, shift: Estimate) -> dict[str, object]:
    """The closed form's shift, how many times the solved one it is, and whether it agrees."""
    closed = _shift_mv(asked, asked.closed, width)
    ratio = closed / shift.value if shift.value else np.inf
    return {"closed_form_shift_mv": closed, "closed_form_over_solved": ratio, "closed_form_agrees": agrees(ratio)}


def _picture(asked: Prepared) -> dict[str, object]:
    """The section of the narrowest width, on the standard mesh: what the figure draws."""
    solved = solve_threshold(replace(asked.section, width=asked.widths[0]))
    return {
        "lateral_nm": solved.mesh.lateral / SUFFIXES["nm"],
        "depth_nm": solved.mesh.depth / SUFFIXES["nm"],
        "potential_v": solved.potential,
        "inversion_per_cm3": solved.inversion_density / SUFFIXES["per_cm3"],
        "dopant_weight": dopant_weights(solved),
        "is_silicon": solved.mesh.silicon_area > 0,
        "half_width_nm": asked.widths[0] / 2 / SUFFIXES["nm"],
        "depletion_nm": float(electrostatics(asked.nominal).depletion_width) / SUFFIXES["nm"],
    }
