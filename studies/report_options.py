"""The process options side by side, a row a key, with the keys that differ marked."""

from collections.abc import Iterable
from dataclasses import dataclass

from studies.errors import inert
from studies.job import Asked
from studies.process_file import ProcessFile
from studies.report_numbers import NOTHING, plain_number
from studies.report_words import key_words

TEXTS = ("title", "source", "does_not_claim")


@dataclass(frozen=True, kw_only=True)
class OptionRow:
    """One key. words : what it means; values : one an option; differs : whether the options disagree"""

    key: str
    words: str
    values: tuple[str, ...]
    differs: bool


@dataclass(frozen=True, kw_only=True)
class Group:
    """Keys of one part of a process file."""

    title: str
    rows: tuple[OptionRow, ...]


@dataclass(frozen=True, kw_only=True)
class Options:
    """All process options of a job."""

    names: tuple[str, ...]
    files: tuple[str, ...]
    groups: tuple[Group, ...]
    differences: int


def options_of(files: Iterable[ProcessFile]) -> Options:
    """Options side by side. Keys that all options leave at their default are left out."""
    files = list({file.name: file for file in files}.values())
    written = [_flat(file.process.model_dump(exclude_unset=True)) for file in files]
    whole = [_flat(file.process.model_dump()) for file in files]
    groups: dict[str, list[OptionRow]] = {}
    for key in dict.fromkeys(key for each in whole for key in each):
        if not any(key in each for each in written):
            continue
        values = [each.get(key) for each in whole]
        path, _, last = key.rpartition(".")
        differs = any(value != values[0] for value in values)
        row = OptionRow(key=inert(key), words=inert(key_words(last)), values=tuple(map(_said, values)), differs=differs)
        groups.setdefault(path, []).append(row)
    return Options(
        names=tuple(inert(file.name) for file in files),
        files=tuple(inert(file.path.name) for file in files),
        groups=tuple(Group(title=_title(path), rows=tuple(rows)) for path, rows in groups.items()),
        differences=sum(row.differs for rows in groups.values() for row in rows),
    )


def files_of(questions: Iterable[Asked]) -> list[ProcessFile]:
    """Every process file that questions use, in order."""
    return [asked.file for asked in questions]


def _flat(table, path="") -> dict[str, object]:
    """Nested tables as one, by dotted key."""
    flat = {}
    for key, value in table.items():
        dotted = f"{path}.{key}" if path else str(key)
        if isinstance(value, dict):
            flat |= _flat(value, dotted)
        elif isinstance(value, list) and value and isinstance(value[0], dict):
            for number, item in enumerate(value, start=1):
                flat |= _flat(item, f"{dotted}.{number}")
        else:
            flat[dotted] = value
    return flat


def _title(path: str) -> str:
    """A part of the file in words: "device n, edge"."""
    first, _, rest = path.partition(".")
    name, _, part = rest.partition(".")
    words = [f"{first} {name}".strip() if name else first, part.replace(".", ", ").replace("_", " ")]
    return inert(", ".join(word for word in words if word) or "the process")


def _said(value) -> str:
    if value is None:
        return NOTHING
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, (int, float)):
        return plain_number(float(value), 10)
    if isinstance(value, (list, tuple)):
        return ", ".join(map(_said, value)) or NOTHING
    return inert(value) or NOTHING
