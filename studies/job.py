"""A job: process options, questions about them, and the settings they share."""

from dataclasses import dataclass
from hashlib import sha256
from json import dumps
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field

from physics.short_channel import ChannelTooShort
from studies.answer import Answer
from studies.errors import InputError, nearest, one_line
from studies.process_file import ProcessFile, load_process
from studies.questions import SUMMARIES, question_module
from studies.settings import Settings, Workers
from studies.validated import Record, read_toml, validated

LONGEST_NAME = 60


class JobFile(Record):
    """A job as a person writes it."""

    title: Annotated[str, Field(min_length=1, max_length=200)]
    settings: Settings = Settings()
    process: Annotated[dict[str, str], Field(min_length=1)]
    """process options: a short name and a file, seen from the job's folder"""
    question: Annotated[list[dict[str, Any]], Field(min_length=1, max_length=1000)]
    """each says what to ask, of which process option or options, and has the keys of that kind of question"""


@dataclass(frozen=True, kw_only=True)
class Asked:
    """One question of one process option. name : unique in the job, for files and progress"""

    name: str
    kind: str
    file: ProcessFile
    question: Record

    def check(self) -> None:
        """Raise InputError for whatever can be known to be wrong before any sampling."""
        question_module(self.kind).check(self.question, self.file)

    def answer(self, settings: Settings, workers: Workers, progress) -> Answer:
        """Answer the question."""
        return question_module(self.kind).answer(self.question, self.file, settings, workers, progress)


@dataclass(frozen=True, kw_only=True)
class Job:
    """A job ready to run."""

    title: str
    settings: Settings
    asked: tuple[Asked, ...]

    def check(self) -> None:
        """Check every question before the first is answered. Raises InputError."""
        for asked in self.asked:
            asked.check()

    def answers(self, workers: Workers, start) -> list[Answer]:
        """Answer every question. start : function of number and name that gives a progress callback.

        Raises InputError that names the question where the physics leaves its range for some samples.
        """
        answers = []
        for number, asked in enumerate(self.asked, start=1):
            try:
                answers.append(asked.answer(self.settings, workers, start(number, asked.name)))
            except (FloatingPointError, ChannelTooShort) as error:
                raise InputError(
                    f"{one_line(asked.file.path)}: {one_line(asked.name)}: some samples leave the range of the physics "
                    f"({error}); smaller variation or larger dimensions are needed"
                ) from None
        return answers

    def fingerprint(self) -> str:
        """SHA-256 of all that determines the answers: processes, questions, settings."""
        content = {
            "settings": self.settings.model_dump(),
            "asked": [
                {
                    "name": each.name,
                    "question": each.question.model_dump(by_alias=True),
                    "process": each.file.process.model_dump(),
                    "measured": [sha256(path.read_bytes()).hexdigest() for path in each.file.measured_files()],
                }
                for each in self.asked
            ],
        }
        return sha256(dumps(content, sort_keys=True).encode()).hexdigest()


def load_job(path, overrides: dict[str, Any]) -> Job:
    """A job from its file. overrides : settings given on the command line. Raises InputError in one line."""
    path = Path(path)
    record = validated(JobFile, read_toml(path), path)
    files = {}
    for name, file in record.process.items():
        if not usable_name(name):
            raise InputError(
                f"{one_line(path)}: process.{one_line(name)}: a short name is needed, up to {LONGEST_NAME} characters that "
                "can be part of a file's name"
            )
        files[name] = load_process(path.parent / file, name)
    asked = []
    for number, entry in enumerate(record.question, start=1):
        where = f"{one_line(path)}: question {number}"
        kind, names, question = _read_question(dict(entry), where)
        for name in names:
            if name not in files:
                raise InputError(f"{where}.process: no process '{one_line(name)}' in this job; {nearest(name, files)}")
            asked.append(Asked(name=f"{kind}_{number}_{name}", kind=kind, file=files[name], question=question))
    return Job(title=record.title, settings=override(record.settings, overrides, path), asked=tuple(asked))


def usable_name(name: str) -> bool:
    """Whether a name can be part of a file's name."""
    return 0 < len(name) <= LONGEST_NAME and name.isprintable() and not set(name) & set('/\\:*?"<>|')


def single_question(kind: str, process: Path, question: dict[str, Any], settings: dict[str, Any]) -> Job:
    """A job of one question, as the command line asks it. Raises InputError in one line."""
    file = load_process(process, process.stem if usable_name(process.stem) else "process")
    asked = Asked(
        name=f"{kind}_1_{file.name}",
        kind=kind,
        file=file,
        question=validated(question_module(kind).Question, question, f"widthwise {kind}"),
    )
    return Job(
        title=f"{kind}: {file.process.title}", settings=override(Settings(), settings, "command line"), asked=(asked,)
    )


def _read_question(entry: dict[str, Any], where: str):
    kind = entry.pop("ask", None)
    if not isinstance(kind, str) or kind not in SUMMARIES:
        raise InputError(f"{where}.ask = {one_line(repr(kind))}: {nearest(str(kind), SUMMARIES)}")
    names = entry.pop("process", None)
    names = [names] if isinstance(names, str) else names
    if not isinstance(names, list) or not names or not all(isinstance(name, str) for name in names):
        raise InputError(f"{where}.process: the name of a process option, or a list of names, is needed")
    if len(set(names)) < len(names):
        raise InputError(f"{where}.process: a name is given twice")
    return kind, names, validated(question_module(kind).Question, entry, where)


def override(settings: Settings, given: dict[str, Any], where) -> Settings:
    """Settings with those given on the command line put in; a precision there beats samples in the file, and so on."""
    validated(Settings, given, "command line")
    kept = settings.model_dump(exclude_none=True)
    if {"samples", "precision"} & given.keys():
        kept = {key: value for key, value in kept.items() if key not in ("samples", "precision")}
    return validated(Settings, kept | given, where)
