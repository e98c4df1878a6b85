"""A job: process options, questions about them, and the settings they share."""

from dataclasses import dataclass
from hashlib import sha256
from json import dumps
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field

from mc.ledger import Ledger
from mc.runner import FewerAsked, WorkerLost
from physics.short_channel import ChannelTooShort
from studies import __version__
from studies.answer import Answer
from studies.errors import InputError, nearest, one_line
from studies.process_content import content_of
from studies.process_file import ProcessFile, load_process
from studies.questions import COMPARABLE, NOT_COMPARED, SUMMARIES, question_module
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
    """each says what to ask, of which process option or options, whether to compare two of them, and has the keys of that
    kind of question"""


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

    def answer(self, settings: Settings, workers: Workers, progress, given: dict[str, Answer]) -> Answer:
        """Answer the question, or hand on the answer already `given` to the same one; answers by their questions' names."""
        asked = self.question.model_dump(by_alias=True)
        for answer in given.values():
            if (answer.kind, answer.process, answer.question) == (self.kind, self.file.name, asked):
                return answer
        return question_module(self.kind).answer(self.question, self.file, settings, workers, progress)

    def content(self) -> dict[str, object]:
        """All that determines the answer, but for keys of which more only adds to what is kept."""
        growing = set(getattr(question_module(self.kind), "GROWING", ()))
        asked = self.question.model_dump(by_alias=True, exclude=growing)
        return {"name": self.name, "question": asked} | content_of(self.file)


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """Two options' answers to the same question, compared. name : as in `Asked`; first, second : earlier in the job"""

    name: str
    first: Asked
    second: Asked
    kind: str = "compare"

    @property
    def file(self) -> ProcessFile:
        """The first option."""
        return self.first.file

    @property
    def question(self) -> Record:
        """What both were asked."""
        return self.first.question

    def check(self) -> None:
        """Nothing that the two questions have not checked."""

    def answer(self, settings: Settings, workers: Workers, progress, given: dict[str, Answer]) -> Answer:
        """Compare the answers already `given`."""
        from studies.compare import Compared, compare

        compared = Compared(
            kind=self.first.kind,
            question=self.question,
            first=self.first.file,
            second=self.second.file,
            answers=(given[self.first.name], given[self.second.name]),
        )
        return compare(compared, settings, workers, progress)

    def content(self) -> dict[str, object]:
        """All that determines the answer, but for what the two questions tell."""
        return {"name": self.name, "compares": [self.first.name, self.second.name]}


@dataclass(frozen=True, kw_only=True)
class Job:
    """A job ready to run."""

    title: str
    settings: Settings
    asked: tuple[Asked | Comparison, ...]

    def check(self) -> None:
        """Check every question before the first is answered. Raises InputError."""
        for asked in self.asked:
            asked.check()

    def answers(self, workers: Workers, start, ledger: Ledger | None = None) -> list[Answer]:
        """Answer every question. start : function of number and name that gives a progress callback.

        ledger : where finished work is kept, and found
        Raises InputError that names the question where the physics leaves its range for some samples, and where the ledger
        holds a longer run, or workers are lost.
        """
        given: dict[str, Answer] = {}
        for number, asked in enumerate(self.asked, start=1):
            try:
                place = workers.keeping(ledger.part(asked.name) if ledger else None)
                given[asked.name] = asked.answer(self.settings, place, start(number, asked.name), given)
            except WorkerLost as error:
                raise InputError(f"{one_line(asked.name)}: {error}") from None
            except FewerAsked as error:
                raise InputError(f"{one_line(asked.name)}: {error}; add --replace to begin anew") from None
            except (FloatingPointError, OverflowError, ChannelTooShort) as error:
                raise InputError(
                    f"{one_line(asked.file.path)}: {one_line(asked.name)}: some samples leave the range of the physics "
                    f"({error}); smaller variation or larger dimensions are needed"
                ) from None
        return list(given.values())

    def fingerprint(self) -> str:
        """SHA-256 of all that determines the answers but for the number of samples, which a longer run may raise."""
        content = {
            "version": __version__,
            "settings": self.settings.model_dump(exclude={"samples"}),
            "asked": [each.content() for each in self.asked],
        }
        return sha256(dumps(content, sort_keys=True).encode()).hexdigest()


def load_job(path, overrides: dict[str, Any], allow_outside: bool = False) -> Job:
    """A job from its file. Raises InputError in one line.

    overrides : settings given on the command line
    allow_outside : whether files beside or above the job's folder may be read; a job from somebody else might point there
    """
    path = Path(path)
    record = validated(JobFile, read_toml(path), path)
    files = {}
    for name, file in record.process.items():
        if not usable_name(name):
            raise InputError(
                f"{one_line(path)}: process.{one_line(name)}: a short name is needed, up to {LONGEST_NAME} characters that "
                "can be part of a file's name"
            )
        place = _inside(path, f"process.{one_line(name)}", file, allow_outside)
        try:
            files[name] = load_process(place, name)
        except InputError as error:
            if place.is_file():
                raise
            why = str(error).rsplit(": ", 1)[-1]
            raise InputError(f"{one_line(path)}: process.{one_line(name)} = {one_line(repr(file))}: {why}") from None
        for measured in files[name].measured_files():
            _inside(path, f"process.{one_line(name)}: measured values", measured, allow_outside)
    asked = []
    for number, entry in enumerate(record.question, start=1):
        where = f"{one_line(path)}: question {number}"
        kind, names, question, compare = _read_question(dict(entry), where)
        for name in names:
            if name not in files:
                raise InputError(f"{where}.process: no process '{one_line(name)}' in this job; {nearest(name, files)}")
            asked.append(Asked(name=f"{kind}_{number}_{name}", kind=kind, file=files[name], question=question))
        if compare:
            first, second = asked[-2:]
            asked.append(Comparison(name=f"compare_{number}_{names[0]}_{names[1]}", first=first, second=second))
    return Job(title=record.title, settings=override(record.settings, overrides, path), asked=tuple(asked))


def _inside(job: Path, key: str, file, allow_outside: bool) -> Path:
    """A file's path seen from the job's folder. Raises InputError where it leads out of the folder."""
    folder = job.parent
    place = folder / file
    try:
        leads_out = not place.resolve().is_relative_to(folder.resolve())
    except (OSError, ValueError, RuntimeError):
        leads_out = False  # no path at all: reading it will say so
    if leads_out and not allow_outside:
        raise InputError(
            f"{one_line(job)}: {key} = {one_line(repr(str(file)))}: leads out of the job's folder; move it there or add "
            "--allow-outside"
        )
    return place


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


def comparison(kind: str, processes: tuple[Path, Path], question: dict[str, Any], settings: dict[str, Any]) -> Job:
    """A job that asks two options the same question and compares, as the command line asks it. Raises InputError."""
    names = [process.stem if usable_name(process.stem) else "process" for process in processes]
    if names[0] == names[1]:
        names = [f"{name[: LONGEST_NAME - 2]}_{letter}" for name, letter in zip(names, "ab")]
    files = [load_process(process, name) for process, name in zip(processes, names)]
    valid = validated(question_module(kind).Question, question, "widthwise compare")
    first, second = (Asked(name=f"{kind}_1_{file.name}", kind=kind, file=file, question=valid) for file in files)
    return Job(
        title=f"{kind}: {files[0].process.title} and {files[1].process.title}",
        settings=override(Settings(), settings, "command line"),
        asked=(first, second, Comparison(name=f"compare_1_{names[0]}_{names[1]}", first=first, second=second)),
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
    compare = entry.pop("compare", False)
    if not isinstance(compare, bool):
        raise InputError(f"{where}.compare = {one_line(repr(compare))}: true or false is needed")
    if compare and kind not in COMPARABLE:
        raise InputError(
            f"{where}.compare: '{kind}' {NOT_COMPARED[kind]} and cannot be compared so; ask it of both options"
        )
    if compare and len(names) != 2:
        raise InputError(f"{where}.compare: two process options are needed, {len(names)} named")
    return kind, names, validated(question_module(kind).Question, entry, where), compare


def override(settings: Settings, given: dict[str, Any], where) -> Settings:
    """Settings with those given on the command line put in; a precision there beats samples in the file, and so on."""
    validated(Settings, given, "command line")
    kept = settings.model_dump(exclude_none=True)
    if {"samples", "precision"} & given.keys():
        kept = {key: value for key, value in kept.items() if key not in ("samples", "precision")}
    return validated(Settings, kept | given, where)
