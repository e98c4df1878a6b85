"""Tables of the report: a tidy table becomes headings in words, and cells that hold a number with its interval."""

from collections.abc import Collection, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd

from studies.errors import inert
from studies.report_numbers import NOTHING, Cell, alike, is_symmetric, number_with_interval, plain_number
from studies.report_words import column_words, plain_words, shown_as, table_words

LEAST_SHARE = 0.005  # parts below it at every width are left out
LEAST_SHOWN = 0.01  # percent; a smaller share of a variance is as good as none
CONSTANT = {"process", "samples"}  # said once elsewhere
LEVEL = "level_"
NAMED = {"part": plain_words, "quantity": column_words}  # columns whose values are names of ours


@dataclass(frozen=True, kw_only=True)
class Column:
    """A column as shown. raw : its name in the CSV; copied : names under which its numbers are copied"""

    heading: str
    unit: str
    raw: str
    copied: str
    is_number: bool


@dataclass(frozen=True, kw_only=True)
class Row:
    """Cells of a row, and what each puts on the clipboard. marked : the row is the answer"""

    cells: tuple[tuple[Cell, str], ...]
    marked: bool


@dataclass(frozen=True, kw_only=True)
class Shown:
    """A table as shown. constants : what is the same in every row; left_out : parts too small to be shown"""

    title: str
    file: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    constants: tuple[tuple[str, str], ...] = ()
    left_out: tuple[str, ...] = ()


def bounds_of(column: str, columns: Collection[str]) -> tuple[str, str] | None:
    """Names of the columns that hold a column's interval, "low" and "high" before the unit; None where there are none."""
    words = column.split("_")
    for end in range(len(words), 0, -1):
        low, high = ("_".join([*words[:end], bound, *words[end:]]) for bound in ("low", "high"))
        if low in columns and high in columns:
            return low, high
    return None


def tables_shown(name: str, table: pd.DataFrame, question: Mapping, beside: Mapping = {}) -> list[Shown]:
    """One tidy table as one or two shown ones. beside : the answer's further tables, whose numbers are not said twice"""
    if {"part", "share", "width_um"} <= set(table) and table.width_um.nunique() > 1:
        return [shown for levels in (False, True) for shown in _parts_by_width(name, table, levels)]
    if {"part", "share"} <= set(table):
        table = table.sort_values("share", ascending=False, kind="stable")
    if f"{name}_shares" in beside:
        table = table[[column for column in table if not column.startswith("share_")]]
    return [_shown(name, table, question)]


def _parts_by_width(name: str, table: pd.DataFrame, levels: bool) -> list[Shown]:
    """Shares with a column a part: the causes, or the levels at which they vary."""
    rows = table[table.part.str.startswith(LEVEL) == levels]
    if rows.empty:
        return []
    largest = rows.groupby("part").share.max()
    largest = largest if levels else largest.sort_values(ascending=False)
    kept = [part for part in (largest.index if not levels else rows.part.unique()) if largest[part] >= LEAST_SHARE]
    left_out = tuple(inert(plain_words(part.removeprefix(LEVEL))) for part in largest.index if part not in kept)
    wide = pd.DataFrame({"width_um": rows.width_um.unique()})
    names = {}
    for part in kept:
        column = f"share_{part}"
        names[column] = plain_words(part.removeprefix(LEVEL))
        of_part = rows[rows.part == part].set_index("width_um")
        for end in ("", "_low", "_high"):
            wide[column + end] = of_part[f"share{end}"].reindex(wide.width_um).to_numpy()
    shown = _shown(name, wide, {}, names)
    if levels:
        shown = Shown(
            **vars(shown) | {"title": "The same variance by level: how much lots, wafers, dies and neighbours differ"}
        )
    return [Shown(**vars(shown) | {"left_out": left_out})]


def _shown(name: str, table: pd.DataFrame, question: Mapping, names: Mapping = {}) -> Shown:
    columns, cells, constants = [], [], []
    ends_of = {column: bounds_of(column, table.columns) for column in table}
    bounds = {bound for pair in ends_of.values() if pair for bound in pair}
    groups = table.quantity if "quantity" in table else pd.Series("", table.index)
    for column in table:
        heading, unit, scale = shown_as(column)
        heading = names.get(column, heading)
        if column in bounds:
            continue
        values = table[column]
        if ends_of[column]:
            low, high = (table[bound] for bound in ends_of[column])
            ends = {"least": LEAST_SHOWN} if column.startswith("share") else {"whole": 100.0} if unit == "%" else {}
            made = _interval_cells(values, low, high, scale, ends, groups)
            copied = "\t".join(map(inert, (column, *ends_of[column])))
        elif _said_elsewhere(column, values, question):
            continue
        elif len(table) > 1 and values.nunique(dropna=False) == 1:
            is_text = isinstance(values.iloc[0], str)
            constants.append((heading, f"{_value_cell(values.iloc[0], scale).text} {'' if is_text else unit}".strip()))
            continue
        else:
            made = _plain_cells(values.map(NAMED[column]) if column in NAMED else values, scale)
            made = [(cell, _raw(kept)) for cell, kept in zip(made, values)]
            copied = inert(column)
        is_number = pd.api.types.is_numeric_dtype(values) and not pd.api.types.is_bool_dtype(values)
        columns.append(Column(heading=inert(heading), unit=unit, raw=inert(column), copied=copied, is_number=is_number))
        cells.append(made)
    marks = table.is_minimum if "is_minimum" in table else [False] * len(table)
    rows = tuple(Row(cells=tuple(row), marked=bool(mark)) for row, mark in zip(zip(*cells), marks))
    return Shown(
        title=inert(table_words(name)),
        file=f"{name}.csv",
        columns=tuple(columns),
        rows=rows,
        constants=tuple((inert(heading), inert(value)) for heading, value in constants),
    )


def _said_elsewhere(column: str, values: pd.Series, question: Mapping) -> bool:
    """Whether a column only repeats what was asked, or holds nothing."""
    if values.isna().all():
        return True
    asked = column in CONSTANT or {column, column.removeprefix("target_")} & question.keys()
    return bool(asked) and values.nunique(dropna=False) == 1


def _interval_cells(values, low, high, scale: float, ends: Mapping[str, float], groups) -> list[tuple[Cell, str]]:
    """Numbers with intervals, in the same manner for all of a group."""
    triples = [tuple(map(float, triple)) for triple in zip(values, low, high)]
    skewed = {group for triple, group in zip(triples, groups) if np.isfinite(triple[0]) and not is_symmetric(*triple)}
    return [
        (
            number_with_interval(*(number * scale for number in triple), plus_minus=group not in skewed, **ends),
            "\t".join(map(_raw, triple)),
        )
        for triple, group in zip(triples, groups)
    ]


def _plain_cells(values: pd.Series, scale: float) -> list[Cell]:
    """Cells of a column without intervals; fractions get the same decimals."""
    if not pd.api.types.is_float_dtype(values):
        return [_value_cell(value, scale) for value in values]
    numbers = [float(value) * scale for value in values]
    return [Cell(text, "", number if np.isfinite(number) else "") for text, number in zip(alike(numbers), numbers)]


def _value_cell(value, scale: float) -> Cell:
    """A value without an interval."""
    if value is None or value is pd.NA:
        return Cell(NOTHING, "", "")
    if isinstance(value, (bool, np.bool_)):
        return Cell("yes" if value else "no", "", float(value))
    if isinstance(value, (int, float, np.number)):
        number = float(value) * scale
        return Cell(plain_number(number), "", number if np.isfinite(number) else "")
    text = inert(value)
    return Cell(text, "", text)


def _raw(value) -> str:
    """A value as it stands in the CSV; its control characters are shown, so that a name cannot break a copied table."""
    return f"{value:.10g}" if isinstance(value, (float, np.floating)) else inert(value)
