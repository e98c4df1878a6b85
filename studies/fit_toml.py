"""The fitted process file: the start's content with what was fitted put in, readable, and valid as it stands."""

import json
import os
import re
import tomllib
from datetime import UTC, datetime
from pathlib import Path

from studies.errors import inert
from studies.fit import Fit
from studies.fit_tables import edge_keys, scatter_keys
from studies.nominal import nominal_device
from studies.process_edge import ALLOWED
from studies.process_file import Process, ProcessFile
from studies.validated import read_toml, validated

LEVELS = ("lot", "wafer", "die", "device")


def fitted_process(fitted: Fit, out: Path) -> dict:
    """The fitted process as tables of plain values. out : where it will lie, for paths inside it"""
    table = read_toml(fitted.file.path)
    record = table["device"][fitted.device]
    values = fitted.problem.values(fitted.inner)
    for key, value in values.items():
        if not key.startswith(("edge.", "short_channel.")):
            record[key] = rounded(value)
    if "short_channel.eta" in values:
        record["short_channel"] = {"kind": "quasi two-dimensional", "eta": rounded(values["short_channel.eta"])}
    record["edge"] = _edge(fitted, record["edge"], values)
    if record["edge"]["kind"] != "field oxide":
        record.get("scatter", {}).pop("fringe_dopants", None)
    _scatter(fitted, table, record)
    for device in table["device"].values():
        for spread in device.get("variation", {}).values():
            if spread.get("values_csv"):
                place = fitted.file.path.parent / spread["values_csv"]
                spread["values_csv"] = os.path.relpath(place.absolute(), out.absolute().parent)
    table["title"] = f"{table['title']}, fitted"[:200]
    table["source"] = (
        f"device {fitted.device} fitted to {inert(fitted.measured.source.name)}; the rest: {table.get('source') or 'the start'}"
    )
    return table


def _edge(fitted: Fit, start: dict, values) -> dict:
    """The edge's keys; what else the start says of an edge of the same kind stays."""
    made = {
        key: rounded(value) if isinstance(value, float) else value for key, value in edge_keys(fitted, values).items()
    }
    if start["kind"] == made["kind"] and made["kind"] in ("field oxide", "trench"):
        made = {key: value for key, value in start.items() if key in ALLOWED[made["kind"]] and key != "method"} | made
    return made


def _scatter(fitted: Fit, table: dict, record: dict) -> None:
    """Put the variance components in, and take out correlations of what no longer varies."""
    flat = record.setdefault("variation", {}).setdefault("flat_band", {})
    keys = scatter_keys(fitted)
    fitted_levels = [level for level in LEVELS if f"variation.flat_band.{level}_mv" in keys]
    if fitted_levels and flat.get("law", "normal") != "normal":
        flat.clear()
    for level in fitted_levels:
        flat[f"{level}_mv"] = rounded(keys[f"variation.flat_band.{level}_mv"].value)
    if "scatter.remainder_pair_mv_um" in keys:
        record.setdefault("scatter", {})["remainder_pair_mv_um"] = rounded(keys["scatter.remainder_pair_mv_um"].value)
    elif "variation.flat_band.device_mv" in keys and "remainder_pair_mv_um" in record.get("scatter", {}):
        record["scatter"]["remainder_pair_mv_um"] = 0.0  # the scatter that was fitted contains it
    still = []
    for entry in table.get("correlation", []):
        names = [f"{fitted.device}.flat_band.{level}" for level in LEVELS if not flat.get(f"{level}_mv")]
        if not set(entry["inputs"]) & set(names):
            still.append(entry)
    table["correlation"] = still


def rounded(value: float) -> float:
    """Ten digits: as good as the fit, and readable."""
    return float(f"{value:.10g}")


def toml_text(fitted: Fit, out: Path) -> str:
    """The text of the fitted file. Raises InputError if it were not a valid process file."""
    table = fitted_process(fitted, out)
    used = int((fitted.weight > 0).sum())
    comments = [
        f"Fitted to: {inert(fitted.measured.source)}",
        f"Start: {inert(fitted.file.path)}",
        f"Date: {datetime.now(UTC):%Y-%m-%d}",
        f"Rows: {used} used of {len(fitted.weight)}; device {inert(fitted.device)}; seed {fitted.question.seed}",
        f"Edge: {fitted.choice.name}" + ("" if fitted.fits else "; NO form of the edge fits these data"),
        "Intervals (95 %) stand behind the numbers; fit.csv has all of them, the ensemble file has their draws.",
        *(inert(note) for note in fitted.notes),
    ]
    behind = {
        tuple(["device", fitted.device, *key.split(".")]): f"fitted, {each.low:.4g} to {each.high:.4g}"
        for key, each in (fitted.parameters() | scatter_keys(fitted)).items()
    }
    text = "".join(f"# {line}\n" for line in comments) + "\n" + _table_text(table, (), behind)
    process = validated(Process, tomllib.loads(text), out)
    nominal_device(
        ProcessFile(name=out.stem, path=out, process=process), fitted.device, body_bias_v=0.0, temperature_c=None
    )
    return text


def _table_text(table: dict, path: tuple, behind) -> str:
    plain = {key: value for key, value in table.items() if not _is_table(value)}
    plain = {key: value for key, value in plain.items() if value != []}
    lines = []
    for key, value in plain.items():
        note = behind.get((*path, key))
        lines.append(f"{_key(key)} = {_value(value)}" + (f"  # {note}" if note else ""))
    if path and (lines or not table):
        lines.insert(0, f"[{'.'.join(map(_key, path))}]")
    text = "\n".join(lines) + ("\n\n" if lines else "")
    for key, value in table.items():
        if isinstance(value, dict):
            text += _table_text(value, (*path, key), behind)
        elif _is_table(value):
            for entry in value:
                head = ".".join(map(_key, (*path, key)))
                text += f"[[{head}]]\n" + "".join(f"{_key(k)} = {_value(v)}\n" for k, v in entry.items()) + "\n"
    return text


def _is_table(value) -> bool:
    return isinstance(value, dict) or isinstance(value, list) and bool(value) and isinstance(value[0], dict)


def _key(key: str) -> str:
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) else _value(key)


def _value(value) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, list):
        return "[" + ", ".join(map(_value, value)) + "]"
    return repr(value)
