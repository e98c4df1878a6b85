"""Figures, one a kind of question.

A drawer makes an answer's figure and says its title; kinds without a drawer have no figure.
"""

from collections.abc import Iterator
from contextlib import contextmanager
from io import BytesIO
from typing import Any

import matplotlib

matplotlib.use("Agg")

import matplotlib.pyplot as plt
import numpy as np
import seaborn as sns

from studies.answer import Answer
from studies.atoms_figure import draw_atoms
from studies.compare_curves import difference_against_width, shares_of_change
from studies.edge_figure import draw_edge
from studies.errors import inert
from studies.figure_curves import (
    chip_yield_against_width,
    error_against_width,
    failures_against_width,
    good_chips_against_width,
    period_against_width,
    shares_against_width,
    sigma_against_width,
    threshold_against_width,
    working_chips_against_width,
    yield_against_width,
)
from studies.job import Asked, Job
from studies.palette import INK

DRAWING = {
    "svg.hashsalt": "widthwise",  # fixed, and no date, so that the same answers give the same bytes
    "svg.fonttype": "none",
    "hatch.linewidth": 0.5,
} | {f"{what}color": INK for what in ("text.", "axes.edge", "axes.label", "xtick.", "ytick.")}
CONDITIONS = {  # key of a question: how a figure's title states it
    "supply_v": "supply {:g} V",
    "drain_v": "drain {:g} V",
    "body_bias_v": "body bias {:g} V",
    "gm_over_i_per_v": "gm/I {:g} per V",
    "drain_current_ua": "{:g} µA",
    "current_per_square_ua": "{:g} µA per square",
    "charge_level": "criterion {:g} C_ox kT/q",
    "mesh_nm": "boxes of {:g} nm",
}


def _draw_spread(answer: Answer):
    figure, axes = plt.subplots(1, 3, figsize=(15, 5.2), width_ratios=(1, 1, 0.9))
    threshold_against_width(axes[0], answer.table)
    sigma_against_width(axes[1], answer.table)
    shares = answer.tables["spread_shares"]
    causes = [part for part in shares.part.unique() if not part.startswith("level_")]
    shares_against_width(axes[2], shares, causes)
    question = answer.question
    return figure, f"{answer.process}, device {question['device']}, L = {question['length_um']:g} µm"


def _draw_timing(answer: Answer):
    figure, axes = plt.subplots(1, 2, figsize=(11, 4.6))
    question = answer.question
    yield_against_width(axes[0], answer.table, question["yield"])
    period_against_width(axes[1], answer.table, question["yield"])
    size = f"{question['paths']} paths of {question['stages']} stages, L = {question['length_um']:g} µm"
    return figure, f"{answer.process}: {size}"


def _draw_pair(answer: Answer):
    question = answer.question
    error, unit = ("offset", "mv") if question["kind"] == "differential pair" else ("error", "percent")
    shown = answer.tables["pair_shares"].length_um.iloc[0]
    curve = answer.table[answer.table.length_um == shown]
    figure, axes = plt.subplots(1, 2, figsize=(11, 4.6))
    error_against_width(axes[0], curve, error, unit)
    chip_yield_against_width(axes[1], curve, question["yield"])
    return figure, f"{answer.process}: {question['kind']}, L = {shown:g} µm, {question['pairs']} pairs a chip"


def _draw_loss(answer: Answer):
    figure, axes = plt.subplots(1, 3, figsize=(15.5, 4.6))
    failures_against_width(axes[0], answer.table)
    working_chips_against_width(axes[1], answer.table)
    good_chips_against_width(axes[2], answer.table)
    question = answer.question
    where = f"device {question['device']}, L = {question['length_um']:g} µm, {question['devices']} devices a chip"
    return figure, f"{answer.process}, {where}"


def _draw_compare(answer: Answer):
    """The deciding curve's difference where there is one, and what makes the threshold's mean and variance differ."""
    question = answer.question
    names = tuple(answer.table[["first", "second"]].iloc[0])
    curve = answer.table[(answer.table.quantity == question["curve"]) & np.isfinite(answer.table.difference)]
    shares = answer.tables.get("compare_shares")
    panels = int(len(curve) > 0) + 2 * int(shares is not None)
    figure, axes = plt.subplots(1, max(panels, 1), figsize=(2 + 4.7 * max(panels, 1), 4.6), squeeze=False)
    axes = list(axes[0])
    if len(curve):
        difference_against_width(axes.pop(0), curve, names)
    if shares is not None:
        shares_of_change(axes[0], shares, "vth_mean{}_mv", "change of the mean threshold (mV)")
        shares_of_change(axes[1], shares, "vth_variance{}_mv2", "change of the threshold's variance (mV²)")
    return figure, f"{question['question']}: from {names[0]} to {names[1]}, device {question['device']}"


DRAWERS: dict[str, Any] = {
    "atoms": draw_atoms,
    "compare": _draw_compare,
    "edge": draw_edge,
    "loss": _draw_loss,
    "spread": _draw_spread,
    "timing": _draw_timing,
    "pair": _draw_pair,
}


def conditions(asked: Asked, question) -> str:
    """Temperature, bias and supply of a question, for a figure's title."""
    temperature = question.get("temperature_c")
    if temperature is None:
        temperature = asked.file.process.temperature_c
    said = [f"{temperature:g} °C"]
    for key, words in CONDITIONS.items():
        value = question.get(key)
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            said.append(words.format(value))
    return ", ".join(said)


def length_words(question) -> str:
    """The one drawn length of a question, for a title that does not say it."""
    length = question.get("length_um")
    return f"L = {length:g} µm, " if isinstance(length, (int, float)) else ""


@contextmanager
def drawn(asked: Asked, answer: Answer) -> Iterator[tuple[Any, str] | None]:
    """An answer's figure and its title, closed in the end; None for a kind that has no figure."""
    draw = DRAWERS.get(answer.kind)
    if draw is None:
        yield None
        return
    with sns.axes_style("ticks"), sns.plotting_context("notebook"):
        with matplotlib.rc_context(DRAWING):
            figure, title = draw(answer)
            try:
                length = "" if "L = " in title else length_words(answer.question)
                title = f"{inert(title)}\n{length}{conditions(asked, answer.question)}"
                figure.suptitle(title.replace("$", r"\$"), fontsize="medium")
                sns.despine(figure)
                figure.tight_layout()
                yield figure, title
            finally:
                plt.close(figure)


def as_file(figure, kind: str, box="tight") -> bytes:
    """A figure as the bytes of a PNG or SVG file. box : the part of it to be kept, in inches; "tight" for all"""
    buffer = BytesIO()
    metadata = {"Date": None} if kind == "svg" else None
    figure.savefig(buffer, format=kind, dpi=110, metadata=metadata, bbox_inches=box)
    return buffer.getvalue()


def draw_all(job: Job, answers: list[Answer]) -> dict[str, bytes]:
    """Every answer's figure as PNG and SVG, by file name."""
    files = {}
    for asked, answer in zip(job.asked, answers):
        with drawn(asked, answer) as made:
            if made:
                files |= {f"{asked.name}.{kind}": as_file(made[0], kind) for kind in ("png", "svg")}
    return files
