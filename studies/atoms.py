"""Devices whose dopants are placed one by one: mean lowering of the threshold and its sigma, beside the fast model's.

Every device is one named result with a random stream of its own, so neither the workers nor the number of devices change
it, and a stopped run goes on. The same dopants are put into the fast model: what it says of them sharpens the estimates.
"""

from dataclasses import dataclass, field
from functools import partial
from time import perf_counter
from typing import Annotated

import numpy as np
import pandas as pd
from pydantic import Field

from mc.control import controlled
from mc.intervals import Estimate, Summary
from mc.runner import Progress, results
from mc.tally import Grid, Moments
from physics.atom_mesh import atom_mesh
from physics.threshold import flat_band_voltage, oxide_capacitance
from studies.answer import Answer, asked_columns, columns_of
from studies.atoms_devices import Kind, Solved, only_dopants, prepared_kind, solved, uniform_of
from studies.atoms_words import atoms_notes, atoms_sentences
from studies.population import Population
from studies.process_file import ProcessFile
from studies.question import WidthQuestion
from studies.settings import Settings, Workers
from studies.units import SUFFIXES, split_unit

GROWING = ("devices",)  # keys of which more only adds to what is kept
NORMALS = np.linspace(-4.5, 4.5, 181)  # at which the fast model's law is drawn


class Question(WidthQuestion):
    """Dopants placed one by one in three dimensions: lowering and sigma of the threshold, beside the fast model's."""

    device: str
    """device of the process file"""
    devices: Annotated[int, Field(ge=20, le=1_000_000)] = 200
    """devices solved at each width; more only add to the first ones"""
    charge_level: Annotated[float, Field(ge=0.01, le=3)] = 1.0
    """inversion charge at threshold over C_ox kT/q; 0.1 is well below threshold, where the mean is lowered more"""
    mesh_nm: Annotated[float, Field(ge=0.3, le=10)] = 1.0
    """side of the boxes; half of it takes some ten times as long"""
    field_nm: Annotated[float, Field(ge=0, le=5000)] | None = None
    """what is solved beside each edge, up to a mirror; 0 leaves the edges away; without it two depletion widths"""
    body_bias_v: Annotated[float, Field(ge=0, le=20)] = 0.0
    """reverse body bias, a magnitude"""


@dataclass(frozen=True, kw_only=True)
class Row:
    """One width's answer. found : estimates by column name; level : threshold with continuous doping, signed [V]"""

    kind: Kind
    level: float
    found: dict[str, Estimate]
    correlation: float
    shifts: np.ndarray = field(repr=False)


def check(question: Question, file: ProcessFile) -> None:
    """Raise InputError for what can be known to be wrong before anything is solved."""
    _prepared(question, file)


def _prepared(question: Question, file: ProcessFile) -> tuple[Population, list[Kind]]:
    population = only_dopants(file, question)
    return population, [prepared_kind(population, question, width) for width in question.width_um]


def answer(
    question: Question, file: ProcessFile, settings: Settings, workers: Workers, progress: Progress = lambda *_: None
) -> Answer:
    """Answer an atoms question. Raises InputError where a device has no solution."""
    started = perf_counter()
    population, kinds = _prepared(question, file)
    uniform = [uniform_of(kind) for kind in kinds]
    items = {
        f"{kind.width_um:.15g} um, device {number}": (place, number)
        for place, kind in enumerate(kinds)
        for number in range(question.devices)
    }
    task = partial(solved, kinds, uniform, settings.seed)
    done = results(
        task, items, jobs=workers.jobs, backend=workers.backend, progress=progress, ledger=workers.ledger, name="atoms"
    )
    rows = []
    for place, (kind, level) in enumerate(zip(kinds, uniform)):
        mine = done[place * question.devices : (place + 1) * question.devices]
        rows.append(_row(population, kind, level.threshold, mine))
    return Answer(
        kind="atoms",
        process=file.name,
        question=question.model_dump(by_alias=True),
        table=pd.DataFrame([_columns(question, file, row) for row in rows]),
        headlines={
            f"{name} at width_um {row.kind.width_um:.15g}": row.found[name]
            for row in rows
            for name in ("lowering_mv", "vth_sigma_mv", "sigma_ratio")
        },
        sentences=atoms_sentences(file.name, question, rows),
        notes=atoms_notes(population, question, rows),
        samples=question.devices,
        block_size=1,
        evaluations=question.devices * len(kinds),
        seconds=perf_counter() - started,
        drawn=_picture(population, settings.seed, rows[0], done[0]),
    )


def _row(population: Population, kind: Kind, threshold: float, devices: list[Solved]) -> Row:
    polarity = population.nominal.polarity
    shifts = np.array([each.shift for each in devices])
    said = np.array([each.fast_shift for each in devices])
    mean, sigma = (each.scaled(1 / SUFFIXES["mv"]) for each in controlled(shifts, said, kind.fast_channel_sigma))
    skew = Summary(Moments.of(Grid.from_pilot(polarity * shifts[None]), [polarity * shifts[None]])).skew()
    return Row(
        kind=kind,
        level=_flat_band(population) + polarity * threshold,
        found={
            "lowering_mv": _negative(mean),
            "vth_sigma_mv": sigma,
            "vth_skew": skew,
            "sigma_ratio": sigma.scaled(SUFFIXES["mv"] / kind.fast_sigma),
        },
        correlation=float(np.corrcoef(shifts, said)[0, 1]),
        shifts=polarity * shifts,
    )


def _negative(estimate: Estimate) -> Estimate:
    return Estimate(**vars(estimate) | {"value": -estimate.value, "low": -estimate.high, "high": -estimate.low})


def _flat_band(population: Population) -> float:
    nominal, state = population.nominal, population.silicon({}).state
    difference = nominal.gate_work_function + nominal.flat_band_shift - state.silicon_work_function
    capacitance = oxide_capacitance(nominal.oxide_thickness)
    return float(flat_band_voltage(difference, nominal.oxide_charge, capacitance))


def _columns(question: Question, file: ProcessFile, row: Row) -> dict[str, object]:
    columns: dict[str, object] = {"process": file.name, "device": question.device, "width_um": row.kind.width_um}
    columns |= {"length_um": question.length_um, "devices": question.devices, "threshold_uniform_v": row.level}
    for name in ("lowering_mv", "vth_sigma_mv", "vth_skew"):
        quantity, unit = split_unit(name)
        columns |= columns_of(quantity, row.found[name], unit or "")
    columns["fast_sigma_mv"] = row.kind.fast_sigma / SUFFIXES["mv"]
    columns |= columns_of("sigma_ratio", row.found["sigma_ratio"])
    return columns | asked_columns(question, columns)


def _picture(population: Population, seed: int, row: Row, first: Solved) -> dict[str, object]:
    """What the figure draws of the narrowest width: one device's surface, all thresholds, and the fast model's law."""
    kind, mesh = row.kind, atom_mesh(row.kind.device)
    places, silicon = kind.placed(seed, 0), mesh.is_silicon[mesh.surface][:, None]
    return {
        "across_nm": (np.arange(mesh.plane[0]) - (mesh.plane[0] - 1) / 2) * mesh.box_width / SUFFIXES["nm"],
        "along_nm": (np.arange(mesh.plane[1]) + 0.5) * mesh.box_length / SUFFIXES["nm"],
        "surface_potential_v": np.where(silicon, population.nominal.polarity * first.surface, np.nan),
        "half_width_nm": kind.device.width / 2 / SUFFIXES["nm"],
        "dopant_across_nm": places.across / SUFFIXES["nm"],
        "dopant_along_nm": places.along / SUFFIXES["nm"],
        "dopant_depth_nm": places.depth / SUFFIXES["nm"],
        "shift_mv": row.shifts / SUFFIXES["mv"],
        "normal": NORMALS,
        "fast_shift_mv": kind.fast_law(population, NORMALS) / SUFFIXES["mv"],
    }
