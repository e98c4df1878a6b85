"""Made-up measurements for the tests of the fit: devices of a known process, drawn level by level, with gross outliers."""

import tomllib

import numpy as np
import pandas as pd

from studies.population import Population
from studies.process_file import Process, ProcessFile
from studies.validated import validated

EDGES = {"field oxide": 'kind = "field oxide"\nshape = 0.6', "trench": 'kind = "trench"\nfield_oxide_nm = 250'}
TRUTH = """
title = "truth"
[device.n]
channel = "n"
oxide_thickness_nm = 4.0
gate = "n+ polysilicon"
doping_per_cm3 = 3e17
oxide_charge_per_cm2 = 4e10
width_bias_nm = -20
[device.n.edge]
{edge}
[device.n.short_channel]
kind = "quasi two-dimensional"
eta = 1.3
[device.n.variation]
flat_band = {{ lot_mv = 8.0, wafer_mv = 5.0, die_mv = 4.0, device_mv = 2.0 }}
[device.n.scatter]
remainder_pair_mv_um = 3.0
"""
START = {"oxide_charge_per_cm2 = 4e10": "oxide_charge_per_cm2 = 0.0", "eta = 1.3": "eta = 1.0", "shape = 0.6": "shape = 0.3",
         "field_oxide_nm = 250": "field_oxide_nm = 400", "width_bias_nm = -20": "width_bias_nm = 0",
         "remainder_pair_mv_um = 3.0": "remainder_pair_mv_um = 1.0",
         "flat_band = { lot_mv = 8.0, wafer_mv = 5.0, die_mv = 4.0, device_mv = 2.0 }": ""}  # fmt: skip
WIDTHS, LENGTHS = (0.2, 0.3, 0.5, 1.0, 3.0, 10.0), (0.18, 0.25, 0.5)


def truth_text(edge: str, changes=()) -> str:
    """The process that is drawn from; changes : pairs of text and its replacement."""
    text = TRUTH.format(edge=EDGES[edge])
    for old, new in dict(changes).items():
        assert old in text
        text = text.replace(old, new)
    return text


def start_text(edge: str) -> str:
    """A process that is not the truth, to begin with."""
    return truth_text(edge, {old: new for old, new in START.items() if old in truth_text(edge)})


def process(text: str, path) -> ProcessFile:
    """A process file that need not exist."""
    return ProcessFile(name="truth", path=path, process=validated(Process, tomllib.loads(text), path))


def measured(file: ProcessFile, seed: int, *, lots=5, wafers=3, dies=5, repeats=1, widths=WIDTHS, lengths=LENGTHS,
             outliers=0.05, body_bias_v=0.0, drain_v=0.05, device="n") -> pd.DataFrame:  # fmt: skip
    """Measured rows of every die: `repeats` matched devices of every size; outliers : share of rows 0.1 to 0.4 V off."""
    stream = np.random.default_rng(seed)
    population = Population(file, device, body_bias_v=body_bias_v)
    count = lots * wafers * dies
    of_die = {"lot": np.arange(count) // (wafers * dies), "wafer": np.arange(count) // dies, "die": np.arange(count)}
    shared = {
        item.name: stream.standard_normal(of_die[item.level].max() + 1)[of_die[item.level]]
        for item in population.inputs if item.level != "device"
    }  # fmt: skip
    tables = []
    for width in widths:
        for length in lengths:
            geometry = population.geometry(width, length)
            for _ in range(repeats):
                own = {item.name: stream.standard_normal(count) for item in population.inputs if item.level == "device"}
                draws = shared | own
                values = population.thresholds(draws, geometry, population.silicon(draws), drain_v)
                tables.append(pd.DataFrame({"device": device, "lot": of_die["lot"], "wafer": of_die["wafer"] % wafers,
                              "die": of_die["die"] % dies, "width_um": width, "length_um": length, "vth_v": values,
                              "body_bias_v": body_bias_v, "pair": f"{width}x{length}" if repeats == 2 else ""}))  # fmt: skip
    table = pd.concat(tables, ignore_index=True)
    gross = stream.random(len(table)) < outliers
    table.loc[gross, "vth_v"] += stream.choice([-1, 1], gross.sum()) * stream.uniform(0.1, 0.4, gross.sum())
    return table if repeats == 2 else table.drop(columns="pair")
