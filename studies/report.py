"""report.html: the whole of a job on one page that needs nothing but itself.

Only an answer's own fields and its figure are read, so a new kind of question appears without a change here.
"""

import re
from base64 import b64encode
from collections.abc import Mapping
from dataclasses import dataclass
from hashlib import sha256
from importlib.resources import files

from studies.answer import Answer
from studies.errors import inert
from studies.job import Asked, Job
from studies.notes import CAUTION
from studies.palette import DARK, LIGHT
from studies.questions import SUMMARIES
from studies.report_figures import Figure, figure_of
from studies.report_numbers import plain_number
from studies.report_options import files_of, options_of
from studies.report_reading import LIMITS, READING
from studies.report_sources import sources_of
from studies.report_tables import Shown, tables_shown
from studies.report_words import ABOUT, column_words, key_words, plain_words

SHORT_UNITS = {"mV2": "mV²", "um2": "µm²", "um": "µm", "per cm2": "per cm²", "uA": "µA"}
OF_COLUMNS = ("decides", "curve")  # keys whose values are names of columns
AFTER_A_NUMBER = re.compile(rf"(?<=[\d\]] )({'|'.join(SHORT_UNITS)})\b")


@dataclass(frozen=True, kw_only=True)
class Part:
    """One process option's answer. met : False when a target that was asked for cannot be met"""

    process: str
    met: bool
    sentences: tuple[str, ...]
    figure: Figure | None
    tables: tuple[Shown, ...]


@dataclass(frozen=True, kw_only=True)
class Section:
    """One question and its answers. notes : a note and whom it concerns, nobody named where it concerns all"""

    name: str
    title: str
    summary: str
    asked: tuple[tuple[str, str], ...]
    parts: tuple[Part, ...]
    notes: tuple[tuple[str, str], ...]


def report_html(job: Job, answers: list[Answer], record: Mapping) -> bytes:
    """The page. record : what record.json holds"""
    from jinja2 import Environment, PackageLoader, StrictUndefined  # slow to import, needed by nobody else

    script = _part_of_page("report.js")
    pages = Environment(
        loader=PackageLoader("studies"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    uses = [(asked.file, asked.kind, asked.question.model_dump(by_alias=True)) for asked in job.asked]
    page = pages.get_template("report.html").render(
        title=inert(job.title),
        caution=CAUTION,
        reading=READING,
        limits=LIMITS,
        sections=_sections(job, answers),
        options=options_of(files_of(job.asked)),
        record=_record_lines(record),
        work=_work_lines(record),
        sources=sources_of(uses),
        style=_part_of_page("report.css"),
        colors={"light": LIGHT, "dark": DARK},
        script=script,
        script_hash=b64encode(sha256(script.encode()).digest()).decode(),
    )
    return page.encode()


def _part_of_page(name: str) -> str:
    return (files("studies") / "templates" / name).read_text(encoding="utf-8")


def _sections(job: Job, answers: list[Answer]) -> tuple[Section, ...]:
    """Answers to the same question of several process options belong together."""
    groups: list[list[tuple[int, Asked, Answer]]] = []
    for number, (asked, answer) in enumerate(zip(job.asked, answers), start=1):
        if groups and _question_of(groups[-1][0][2]) == _question_of(answer):
            groups[-1].append((number, asked, answer))
        else:
            groups.append([(number, asked, answer)])
    return tuple(_section(number, group) for number, group in enumerate(groups, start=1))


def _question_of(answer: Answer) -> tuple[str, dict]:
    return answer.kind, dict(answer.question)


def _section(number: int, group) -> Section:
    first = group[0][2]
    kind = inert(plain_words(first.kind))
    return Section(
        name=f"question-{number}",
        title=f"{number}. {kind.capitalize()}{_about(first)}",
        summary=(SUMMARIES | ABOUT).get(first.kind, ""),
        asked=tuple(_asked_lines(first.question, kind=first.kind)),
        parts=tuple(
            Part(
                process=inert(answer.process),
                met=answer.met,
                sentences=tuple(map(short_units, answer.sentences)),
                figure=figure_of(asked, answer, place),
                tables=tuple(_tables(answer)),
            )
            for place, asked, answer in group
        ),
        notes=tuple(_notes([answer for _, _, answer in group])),
    )


def _about(answer: Answer) -> str:
    """What an answer about another question is about."""
    about = answer.question.get("question")
    return f": {about}" if isinstance(about, str) and about in SUMMARIES else ""


def short_units(text: str) -> str:
    """A sentence with units as they are printed; control characters are shown, not obeyed."""
    return AFTER_A_NUMBER.sub(lambda unit: SHORT_UNITS[unit[0]], inert(text)).replace(" per cm2 ", " per cm² ")


def _asked_lines(question: Mapping, before: str = "", kind: str = ""):
    """What was asked, a key and its value a line; keys that were not given are left out."""
    for key, value in question.items():
        words = f"{before}{key_words(str(key), kind)}"
        if isinstance(value, Mapping):
            yield from _asked_lines(value, f"{words}: ")
        elif value is not None:
            yield inert(words), inert(column_words(value)) if key in OF_COLUMNS else _value_words(value)


def _value_words(value) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, (int, float)):
        return plain_number(float(value), 12)
    if isinstance(value, (list, tuple)):
        return ", ".join(map(_value_words, value))
    return inert(value)


def _tables(answer: Answer):
    for name, table in {answer.kind: answer.table, **answer.tables}.items():
        yield from tables_shown(name, table, answer.question, answer.tables)


def _notes(answers: list[Answer]):
    """Every note once, with the names of the options it concerns when these are not all."""
    concerned: dict[str, list[str]] = {}
    for answer in answers:
        for note in dict.fromkeys(answer.notes):
            concerned.setdefault(note, []).append(answer.process)
    for note, names in concerned.items():
        yield short_units(note), "" if len(names) == len(answers) else inert(", ".join(names))


def _record_lines(record: Mapping) -> list[tuple[str, str]]:
    """What is needed to repeat the answers."""
    settings = record["settings"]
    effort = "each question's own number of samples"
    if settings.get("samples"):
        effort = f"{settings['samples']} samples"
    elif settings.get("precision"):
        effort = f"until the 95 % interval is within ±{100 * settings['precision']:g} %"
    seconds = sum(question["seconds"] for question in record["questions"])
    return [
        ("seed of the random numbers", str(settings["seed"])),
        ("effort asked for", effort),
        ("fingerprint of processes, questions and settings", record["fingerprint"]),
        ("written", record["written"]),
        ("workers", f"{record['workers']['jobs']} ({record['workers']['backend']}); their number changes no digit"),
        ("run time", f"{seconds:.1f} s"),
        ("versions", ", ".join(f"{name} {number}" for name, number in record["versions"].items())),
    ]


def _work_lines(record: Mapping) -> list[tuple[str, str, str, str]]:
    """What each question took: name, samples, device evaluations, seconds."""
    return [
        (
            inert(question["name"]),
            plain_number(float(question["samples"]), 12),
            plain_number(float(question["device_evaluations"]), 3),
            f"{question['seconds']:.1f}",
        )
        for question in record["questions"]
    ]
