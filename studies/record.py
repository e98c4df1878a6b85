"""The output folder: tidy CSVs, figures, report.html, answers.json and record.json. All is computed before anything is written."""

import json
import math
import os
import platform
import re
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

import pandas as pd

from studies import __version__
from studies.answer import Answer, columns_of
from studies.errors import InputError, one_line
from studies.job import Job
from studies.keeping import kept_fingerprint
from studies.notes import CAUTION
from studies.questions import SUMMARIES
from studies.settings import Workers
from studies.units import split_unit

RECORD, REPORT = "record.json", "report.html"
FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
LIBRARIES = ("numpy", "scipy", "pandas", "joblib", "pydantic")


def check_folder(folder: Path, job: Job, replace: bool) -> None:
    """Refuse a folder that is not one, cannot be written, or holds anything but this job's results. Writes nothing.

    Raises InputError.
    """
    where = one_line(folder)
    try:
        if folder.exists() and not folder.is_dir():
            raise InputError(f"{where}: is a file, a folder is needed")
        parent = next(place for place in (folder, *folder.absolute().parents) if place.exists())
        if not os.access(parent, os.W_OK):
            raise InputError(f"{where}: cannot be written")
        filled = folder.exists() and any(folder.iterdir())
    except InputError:
        raise
    except (OSError, ValueError) as error:
        raise InputError(f"{where}: cannot be used ({one_line(getattr(error, 'strerror', None) or error)})") from None
    known = {_old_record(folder).get("fingerprint"), kept_fingerprint(folder)} if filled else set()
    if filled and job.fingerprint() not in known and not replace:
        held = "files that are no results of this job"
        if (folder / RECORD).exists():
            held = "the results of another job"
        elif kept_fingerprint(folder):
            held = "the unfinished work of another job, or of this one with another input, seed or version"
        raise InputError(f"{where}: holds {held}; choose another folder or add --replace")


def _old_record(folder: Path) -> dict:
    """What the folder's record says; empty when there is none, or none of ours."""
    try:
        found = json.loads((folder / RECORD).read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return {}
    return found if isinstance(found, dict) else {}


def _old_files(folder: Path) -> list[Path]:
    """Files that an earlier run wrote, by its own record."""
    names = _old_record(folder).get("files")
    names = [name for name in names if isinstance(name, str)] if isinstance(names, list) else []
    ours = re.compile(
        rf"({'|'.join((*SUMMARIES, 'compare'))})(_[^/\\]*)?\.(csv|png|svg)|answers\.json|report\.html|record\.json"
    )
    return [folder / name for name in names if ours.fullmatch(name) and name.isprintable()]


def plain(value):
    """A value that JSON can hold; what is not finite becomes null."""
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    return value


def answers_json(job: Job, answers: list[Answer]) -> dict:
    """The headline numbers with their intervals, and what was said about them."""
    return plain(
        {
            "title": job.title,
            "caution": CAUTION,
            "answers": [
                {
                    "name": asked.name,
                    "kind": answer.kind,
                    "process": answer.process,
                    "question": dict(answer.question),
                    "met": answer.met,
                    "numbers": _numbers(answer),
                    "headlines": {name: vars(estimate) for name, estimate in answer.headlines.items()},
                    "sentences": answer.sentences,
                    "notes": answer.notes,
                }
                for asked, answer in zip(job.asked, answers)
            ],
        }
    )


def _numbers(answer: Answer) -> dict[str, float]:
    """The headlines of the whole answer as plain numbers: name_unit, name_low_unit, name_high_unit."""
    numbers = {}
    for name, estimate in answer.headlines.items():
        if " at " not in name:  # those stand in the tables, a row a width
            quantity, unit = split_unit(name)
            numbers |= columns_of(quantity, estimate, unit or "")
    return numbers


def _blocks(answer: Answer) -> dict[str, float]:
    """How many blocks a sampled answer took, and how long each; nothing for an answer without samples."""
    if not answer.samples or not answer.block_size:
        return {}
    blocks = math.ceil(answer.samples / answer.block_size)
    return {"blocks": blocks, "seconds_per_block": round(answer.seconds / blocks, 6)}


def record_json(job: Job, answers: list[Answer], workers: Workers, files: list[str]) -> dict:
    """What is needed to repeat the answers."""
    return plain(
        {
            "title": job.title,
            "fingerprint": job.fingerprint(),
            "written": datetime.now(UTC).isoformat(timespec="seconds"),
            "settings": job.settings.model_dump(),
            "workers": {"jobs": workers.jobs, "backend": workers.backend},
            "questions": [
                {
                    "name": asked.name,
                    "process_file": asked.file.path.name,
                    "question": asked.question.model_dump(by_alias=True),
                    "samples": answer.samples,
                    "block_size": answer.block_size,
                    **_blocks(answer),
                    "device_evaluations": answer.evaluations,
                    "seconds": round(answer.seconds, 3),
                }
                for asked, answer in zip(job.asked, answers)
            ],
            "processes": {asked.file.name: asked.file.process.model_dump() for asked in job.asked},
            "versions": {"widthwise": __version__, "python": platform.python_version()}
            | {library: version(library) for library in LIBRARIES},
            "files": files,
        }
    )


def tables_of(answers: list[Answer]) -> dict[str, pd.DataFrame]:
    """One tidy table per name, the answers' rows below each other."""
    gathered: dict[str, list[pd.DataFrame]] = {}
    for answer in answers:
        for name, table in {answer.kind: answer.table, **answer.tables}.items():
            gathered.setdefault(name, []).append(table)
    return {name: pd.concat(tables, ignore_index=True) for name, tables in gathered.items()}


def inert_cells(table: pd.DataFrame) -> pd.DataFrame:
    """A table in which no text is a formula to a spreadsheet: such a cell gets an apostrophe in front (common practice)."""

    def inert(value):
        return f"'{value}" if isinstance(value, str) and value.startswith(FORMULA_STARTS) else value

    return table.map(inert)


def write(folder: Path, job: Job, answers: list[Answer], workers: Workers) -> list[str]:
    """Write everything; each file appears whole or not at all, the record last. Returns the files' names.

    Raises InputError when the disk does not take them.
    """
    from studies.figures import draw_all  # the drawing library is slow to import
    from studies.report import report_html

    contents = {
        f"{name}.csv": inert_cells(table).to_csv(index=False, lineterminator="\n").encode()
        for name, table in tables_of(answers).items()
    }
    contents |= draw_all(job, answers)
    contents["answers.json"] = _encoded(answers_json(job, answers))
    files = [*contents, REPORT, RECORD]
    record = record_json(job, answers, workers, files)
    contents[REPORT] = report_html(job, answers, record)
    contents[RECORD] = _encoded(record)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for old in _old_files(folder):
            if old.name not in contents:
                old.unlink(missing_ok=True)
        for name, content in contents.items():
            partial = folder / f".{name}.partial"
            partial.write_bytes(content)
            partial.replace(folder / name)
    except OSError as error:
        raise InputError(f"{one_line(folder)}: cannot be written ({error.strerror})") from None
    return files


def _encoded(content: dict) -> bytes:
    return (json.dumps(content, indent=2, ensure_ascii=False) + "\n").encode()
