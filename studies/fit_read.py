"""Measured thresholds from a CSV or Parquet file in tidy form, checked: one row a measurement, units in the columns' names."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from studies.errors import InputError, nearest, one_line
from studies.fit_columns import LEVELS, NEEDED, NUMBERS, THRESHOLDS, WORDS, measured_table
from studies.units import SUFFIXES, ZERO_CELSIUS, split_unit

LARGEST_V, LARGEST_UM = 20.0, 1000.0  # beyond, a unit is wrong
MIXED = 30.0  # a threshold so much smaller than the usual one, while others are near it, is in another unit
MOST_TOLD = 8


@dataclass(frozen=True, kw_only=True)
class Measured:
    """Measured thresholds of one kind of device.

    source : the file; row : line number in it of every value, the heading is 1
    width_um, length_um : drawn; threshold : magnitude as the process counts it, polarity times the signed one [V]
    body_bias_v, drain_v, temperature_c : conditions; count : devices in parallel, measured as one
    levels : unit of every value at each level given, coarsest first, whole numbers from 0, nested
    pair : number of the matched pair, -1 for none
    sign : -1 where the file gives p-channel thresholds as negative numbers, else 1
    notes : what was found in the file, in words
    """

    source: Path
    row: np.ndarray
    width_um: np.ndarray
    length_um: np.ndarray
    threshold: np.ndarray
    body_bias_v: np.ndarray
    drain_v: np.ndarray
    temperature_c: np.ndarray
    count: np.ndarray
    levels: Mapping[str, np.ndarray]
    pair: np.ndarray
    sign: int
    notes: tuple[str, ...]


def read_measured(
    path: Path,
    mapping: Mapping[str, str],
    devices: Mapping[str, str],
    device: str | None,
    defaults: Mapping[str, float],
) -> tuple[str, Measured]:
    """The measurements in a file, and the device they are of.

    mapping : our column for theirs; devices : channel, n or p, of each device of the start; device : the one asked for
    defaults : drain_v and temperature_c of rows that do not say
    Raises InputError in one line for what cannot be fitted.
    """
    where = one_line(path)
    table = measured_table(path, mapping, where)
    table["row"] = np.arange(len(table)) + 2
    notes: list[str] = []
    device, table = _of_device(table, devices, device, where, notes)
    numbers = {name: _numbers(table, name, where) for name in (*NEEDED, *THRESHOLDS, *NUMBERS) if name in table}
    if "count" in numbers:
        numbers["count"] = np.where(np.isnan(numbers["count"]), 1.0, numbers["count"])  # unmarked: a single device
    keep = _complete(table, numbers, where, notes)
    table, numbers = table[keep].reset_index(drop=True), {name: value[keep] for name, value in numbers.items()}
    _check_values(table, numbers, where)
    table, numbers = _once(table, numbers, notes)
    rows = len(table)
    given = {name: numbers.get(name, np.full(rows, defaults.get(name, default))) for name, default in NUMBERS.items()}
    return device, Measured(
        source=Path(path),
        row=table["row"].to_numpy(),
        width_um=numbers["width_um"],
        length_um=numbers["length_um"],
        threshold=_magnitudes(table, numbers, devices[device], where),
        body_bias_v=given["body_bias_v"],
        drain_v=given["drain_v"],
        temperature_c=given["temperature_c"],
        count=given["count"],
        levels=_levels(table),
        pair=_pairs(table, numbers, where, notes),
        sign=-1 if devices[device] == "p" and numbers.get("vth_v", numbers.get("vth_mv")).min() < 0 else 1,
        notes=tuple(notes),
    )


def _of_device(table, devices, device, where, notes):
    """The device asked for and its rows; the only one of the file, or of the start, when none is asked for."""
    if device is not None and device not in devices:
        raise InputError(f"--device {one_line(device)}: not in the start; {nearest(device, devices)}")
    if "device" not in table:
        if device is None and len(devices) > 1:
            raise InputError(
                f"{where}: no column 'device', and the start has {', '.join(devices)}; choose one by --device"
            )
        return device or next(iter(devices)), table
    found = list(dict.fromkeys(table["device"].astype(str).str.strip()))
    ours = [name for name in found if name in devices]
    if not ours:
        if device is None and len(devices) > 1:
            raise InputError(
                f"{where}: device '{one_line(found[0] if found else '')}' is not in the start, which has "
                f"{', '.join(one_line(name) for name in devices)}; choose one by --device"
            )
        notes.append("The column 'device' names no device of the start; its entries are taken as labels.")
        return device or next(iter(devices)), table
    if device is None and len(found) > 1:
        raise InputError(f"{where}: holds the devices {one_line(', '.join(found))}; choose one by --device")
    device = device or ours[0]
    mine = table["device"].astype(str).str.strip() == device
    if not mine.any():
        raise InputError(f"{where}: no row of device '{one_line(device)}'; found: {one_line(', '.join(found))}")
    return device, table[mine].reset_index(drop=True)


def _numbers(table, name, where):
    """A column as numbers; not a number where the cell is empty."""
    text = table[name]
    empty = text.isna() | (text.astype(str).str.strip() == "")
    values = pd.to_numeric(text.where(~empty), errors="coerce").to_numpy(float)
    wrong = ~empty.to_numpy() & ~np.isfinite(values)
    if wrong.any():
        place = int(np.flatnonzero(wrong)[0])
        raise InputError(
            f"{where}: row {table['row'].iloc[place]}, {name} = {one_line(repr(text.iloc[place]))}: a finite number is needed"
        )
    return values


def listed(rows) -> str:
    """Row numbers in words, the first few of many."""
    rows = [str(row) for row in rows]
    more = f" and {len(rows) - MOST_TOLD} more" if len(rows) > MOST_TOLD else ""
    return ("row " if len(rows) == 1 else "rows ") + ", ".join(rows[:MOST_TOLD]) + more


def _complete(table, numbers, where, notes):
    """Which rows have all they need; the others are told."""
    keep = np.ones(len(table), bool)
    for name in (*numbers, *(level for level in LEVELS if level in table)):
        missing = np.isnan(numbers[name]) if name in numbers else table[name].isna().to_numpy()
        missing = missing & keep
        if missing.any():
            notes.append(f"Left out for want of {name}: {listed(table['row'][missing])}.")
            keep &= ~missing
    if keep.sum() < 2:
        raise InputError(
            f"{where}: {keep.sum()} complete row{'' if keep.sum() == 1 else 's'}; two or more are needed"
            + (f" ({notes[-1]})" if notes else "")
        )
    return keep


def _check_values(table, numbers, where):
    def refuse(name, wrong, said):
        if wrong.any():
            place = int(np.flatnonzero(wrong)[0])
            raise InputError(f"{where}: row {table['row'].iloc[place]}, {name} = {numbers[name][place]:g}: {said}")

    for name in NEEDED:
        refuse(name, numbers[name] <= 0, "must be above 0")
        refuse(name, numbers[name] > LARGEST_UM, f"more than {LARGEST_UM:g} um; in nanometres?")
    for name in ("body_bias_v", "drain_v"):
        if name in numbers:
            refuse(name, numbers[name] < 0, "a magnitude is needed, 0 or more")
            refuse(name, numbers[name] > LARGEST_V, f"more than {LARGEST_V:g} V; in millivolts?")
    if "temperature_c" in numbers:
        refuse("temperature_c", (numbers["temperature_c"] < -ZERO_CELSIUS), "below absolute zero")
        refuse("temperature_c", (numbers["temperature_c"] > 230), "in kelvin? degrees Celsius are needed")
    if "count" in numbers:
        refuse(
            "count",
            (numbers["count"] < 1) | (numbers["count"] % 1 != 0),
            "a whole number of devices, 1 or more, is needed",
        )
    name = "vth_v" if "vth_v" in numbers else "vth_mv"
    sizes = np.abs(numbers[name])
    usual = float(np.median(sizes))
    other = "vth_mv" if name == "vth_v" else "vth_v"
    if name == "vth_v" and usual > LARGEST_V or name == "vth_mv" and sizes.max() < 5:
        raise InputError(
            f"{where}: {name} is {usual:g} in the middle: this looks like '{other}'; name it so, by --column {other}=..."
        )
    if name == "vth_v":
        refuse(name, sizes > LARGEST_V, f"others are near {usual:g}: mixed units (V and mV?)")
    else:
        apart = (sizes > 0) & (sizes < 5) & (usual > MIXED * 5)
        refuse(name, apart, f"others are near {usual:g}: mixed units (V and mV?)")
        refuse(name, sizes > LARGEST_V * 1000, f"more than {LARGEST_V:g} V")


def _magnitudes(table, numbers, channel, where):
    name = "vth_v" if "vth_v" in numbers else "vth_mv"
    values = numbers[name] * SUFFIXES[split_unit(name)[1]]
    if channel == "n":
        return values
    if (values > 0).any() and (values < 0).any():
        fewer = (values > 0) if (values > 0).sum() <= (values < 0).sum() else (values < 0)
        raise InputError(
            f"{where}: {name} of a p device is negative in some rows and positive in others ({listed(table['row'][fewer])}); "
            "give all of them signed or all as magnitudes"
        )
    return np.abs(values)


def _once(table, numbers, notes):
    """Rows that stand twice count once where a site tells devices apart; elsewhere they are told."""
    content = pd.DataFrame(numbers).assign(**{name: table[name].to_numpy() for name in WORDS if name in table})
    again = content.duplicated().to_numpy()
    if not again.any():
        return table, numbers
    if "site" not in table:
        if set(LEVELS) & set(table.columns) or again.sum() < len(again) / 2:
            notes.append(
                f"Equal to an earlier row in every column, and kept, since no site tells devices apart: {listed(table['row'][again])}."
            )
        return table, numbers
    notes.append(f"Counted once, equal to an earlier row in every column: {listed(table['row'][again])}.")
    return table[~again].reset_index(drop=True), {name: value[~again] for name, value in numbers.items()}


def _levels(table):
    """Units of each level given, coarsest first; a wafer is one of its lot, a die one of its wafer."""
    levels, above = {}, np.zeros(len(table), int)
    for name in LEVELS:
        if name in table:
            names = pd.factorize(table[name].astype(str).str.strip())[0]
            above = np.unique(above * (names.max() + 1) + names, return_inverse=True)[1]
            levels[name] = above
    return levels


def _pairs(table, numbers, where, notes):
    """Number of the matched pair of every row; exactly two devices of one size on one die make one."""
    pair = np.full(len(table), -1)
    if "pair" not in table:
        return pair
    marked = ~(table["pair"].isna() | (table["pair"].astype(str).str.strip() == "")).to_numpy()
    columns = [name for name in (*LEVELS, "site") if name in table]
    keys = pd.DataFrame({name: table[name].astype(str) for name in (*columns, "pair")})
    for name in ("width_um", "length_um", *(name for name in NUMBERS if name in numbers)):
        keys[name] = numbers[name]
    codes = keys[marked].groupby(list(keys.columns), sort=False).ngroup().to_numpy()
    if len(codes) and "site" in columns:  # a site may name the single device, not the pair's place
        sizes = np.bincount(codes)
        if (sizes == 1).all():
            codes = (
                keys[marked]
                .drop(columns="site")
                .groupby([c for c in keys.columns if c != "site"], sort=False)
                .ngroup()
                .to_numpy()
            )
    if len(codes):
        sizes = np.bincount(codes)
        good = sizes[codes] == 2
        pair[np.flatnonzero(marked)[good]] = codes[good]
        if not good.all():
            odd = table["row"].to_numpy()[np.flatnonzero(marked)[~good]]
            notes.append(
                f"No matched pair, since not exactly two equal devices share the name on a die: {listed(odd)}; used as single devices."
            )
    return pair
