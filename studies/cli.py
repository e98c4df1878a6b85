"""The command `widthwise`. Heavy libraries are imported only by the command that needs them."""

import argparse
import json
import os
import re
import sys
from contextlib import nullcontext
from pathlib import Path

from studies import __version__
from studies.errors import InputError, nearest, one_line
from studies.questions import COMPARABLE, SUMMARIES, question_module

DONE, NOT_MET, BAD_INPUT, INTERRUPTED = 0, 1, 2, 130


class Parser(argparse.ArgumentParser):
    """A parser whose errors are one line, and to which -2e1 is a number."""

    def __init__(self, *args, **options):
        super().__init__(*args, **options)
        self._negative_number_matcher = re.compile(r"^-(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?$")

    def error(self, message):
        raise InputError(f"{self.prog}: {one_line(message)}; see {self.prog} --help")

    def parse_args(self, args=None, namespace=None):
        flags = [flag for action in self._actions for flag in action.option_strings]
        for word in args:
            if word.startswith("--") and word.split("=")[0] not in flags:
                self.error(f"unknown argument {word}; {nearest(word, flags)}")
        known, unknown = self.parse_known_args(args, namespace)
        if unknown:
            self.error(f"unknown argument {unknown[0]}")
        return known


def _overview() -> Parser:
    parser = Parser(
        prog="widthwise",
        usage="widthwise COMMAND ...",
        description="Threshold spread, timing yield and minimum width of narrow transistors, by Monte Carlo.",
        epilog="widthwise COMMAND --help tells a command's arguments. Exit codes: 0 done, 1 a target cannot be met, "
        "2 bad input.",
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"widthwise {__version__}")
    commands = parser.add_argument_group("commands")
    commands.add_argument("new", nargs="?", help="write the demo: two process options and a job, into a folder")
    commands.add_argument("keys", nargs="?", help="tell every key of a process file, its range and its meaning")
    commands.add_argument("run", nargs="?", help="answer every question of a job file")
    commands.add_argument("fit", nargs="?", help="fit a process file to measured thresholds, with uncertainties")
    commands.add_argument("compare", nargs="?", help="ask two process options the same question: what differs, and why")
    for kind, summary in SUMMARIES.items():
        commands.add_argument(kind, nargs="?", help=summary)
    return parser


def _workers(parser) -> None:
    parser.add_argument("--jobs", type=int, default=_all_cores(), metavar="N", help="workers (default: all cores)")
    parser.add_argument("--backend", default="loky", help="joblib backend: loky, threading or multiprocessing")
    parser.add_argument(
        "--cluster", metavar="WHERE", help="scheduler of a cluster: tcp://host:port, or its scheduler file"
    )
    parser.add_argument("--out", type=Path, metavar="DIR", help="folder for tables, figures, answers and record")
    parser.add_argument("--replace", action="store_true", help="overwrite another job's results in that folder")
    parser.add_argument("--json", action="store_true", help="print the answers as JSON instead of tables")


def _all_cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _field_flags(parser, model) -> None:
    """Flags of a record's fields: name, type, default and help come from the field itself."""
    from studies.validated import keys_of

    for name, field_name in keys_of(model).items():
        field = model.model_fields[field_name]
        text = str(field.annotation)
        many = "list" in text
        kind = int if "int" in text else float if "float" in text else str
        default = "" if field.is_required() or field.default is None else f" (default: {field.default})"
        parser.add_argument(
            f"--{name.replace('_', '-')}",
            dest=name,
            type=kind,
            nargs="+" if many else None,
            required=field.is_required(),
            default=argparse.SUPPRESS,
            metavar=name.rsplit("_", 1)[-1].upper() if kind is float else name.upper(),
            help=((field.description or name).replace("%", "%%") + default),
        )


def _new(arguments) -> int:
    parser = Parser(prog="widthwise new", description="Write the demo: two process options and a job.")
    parser.add_argument("folder", type=Path, metavar="DIR")
    folder = parser.parse_args(arguments).folder
    from studies.demo import write_demo

    for path in write_demo(folder):
        print(path)
    print(f"Next: widthwise run {folder / 'job.toml'} --out {folder / 'results'}", file=sys.stderr)
    return DONE


def _keys(arguments) -> int:
    Parser(prog="widthwise keys", description="Tell every key of a process file.").parse_args(arguments)
    from studies.keys import key_lines

    print("\n".join(key_lines()))
    return DONE


def _fit(arguments) -> int:
    from studies.fit import Question
    from studies.fit_command import add_arguments, run

    parser = Parser(prog="widthwise fit", description=Question.__doc__, allow_abbrev=False)
    add_arguments(parser)
    _field_flags(parser, Question)
    parser.add_argument("--jobs", type=int, default=_all_cores(), metavar="N", help="workers (default: all cores)")
    parser.add_argument("--replace", action="store_true", help="overwrite files of these names")
    parser.add_argument("--json", action="store_true", help="print the fit as JSON instead of a table")
    return run(vars(parser.parse_args(arguments)))


def _run(arguments) -> int:
    from studies.settings import Settings

    parser = Parser(prog="widthwise run", description="Answer every question of a job file.", allow_abbrev=False)
    parser.add_argument("job", type=Path, metavar="JOB.toml")
    parser.add_argument("--allow-outside", action="store_true", help="read process files outside the job's folder")
    _field_flags(parser, Settings)
    _workers(parser)
    given = vars(parser.parse_args(arguments))
    from studies.job import load_job

    overrides = {name: given[name] for name in Settings.model_fields if name in given}
    return _answer(load_job(given["job"], overrides, given["allow_outside"]), given)


def _ask(kind: str, arguments) -> int:
    from studies.settings import Settings
    from studies.validated import keys_of

    model = question_module(kind).Question
    parser = Parser(prog=f"widthwise {kind}", description=model.__doc__.replace("%", "%%"), allow_abbrev=False)
    parser.add_argument("process", type=Path, metavar="PROCESS.toml")
    _field_flags(parser, model)
    _field_flags(parser, Settings)
    _workers(parser)
    given = vars(parser.parse_args(arguments))
    from studies.job import single_question

    question = {name: given[name] for name in keys_of(model) if name in given}
    settings = {name: given[name] for name in Settings.model_fields if name in given}
    return _answer(single_question(kind, given["process"], question, settings), given)


def _compare(arguments) -> int:
    from studies.settings import Settings
    from studies.validated import keys_of

    which = Parser(prog="widthwise compare", add_help=False, allow_abbrev=False)
    which.add_argument("--question", choices=list(COMPARABLE))
    kind = which.parse_known_args(arguments)[0].question
    description = "Ask two process options the same question on the same random numbers: what differs, and why."
    parser = Parser(prog="widthwise compare", description=description, allow_abbrev=False)
    parser.add_argument("first", type=Path, metavar="A.toml")
    parser.add_argument("second", type=Path, metavar="B.toml")
    parser.add_argument("--question", choices=list(COMPARABLE), required=True, help="what to ask; its own flags follow")
    model = question_module(kind).Question if kind else None
    for fields in (model, Settings):
        if fields is not None:
            _field_flags(parser, fields)
    _workers(parser)
    given = vars(parser.parse_args(arguments))
    from studies.job import comparison

    question = {name: given[name] for name in keys_of(model) if name in given}
    settings = {name: given[name] for name in Settings.model_fields if name in given}
    return _answer(comparison(kind, (given["first"], given["second"]), question, settings), given, shown="compare")


def _answer(job, given, shown: str | None = None) -> int:
    """Answer a job; `shown` : the kind of answer to print, all when None."""
    from studies import record, terminal
    from studies.cluster import crew
    from studies.keeping import open_ledger
    from studies.settings import Workers
    from studies.validated import validated

    workers = validated(Workers, {"jobs": given["jobs"], "backend": given["backend"]}, "command line")
    with crew(workers, given["cluster"]) as place:
        with terminal.waiting("checking the questions; edges are solved once and then kept"):
            job.check()
        if given["out"]:
            record.check_folder(given["out"], job, given["replace"])
        kept = open_ledger(given["out"], job, given["replace"]) if given["out"] else nullcontext()
        with kept as ledger, terminal.progress_bar(len(job.asked)) as start:
            answers = job.answers(place, start, ledger)
    if given["out"]:
        record.write(given["out"], job, answers, place)
    if given["json"]:
        print(json.dumps(record.answers_json(job, answers), indent=2))
    else:
        terminal.show([answer for answer in answers if shown in (None, answer.kind)], terminal.console())
    if given["out"]:
        print(f"Written to {one_line(given['out'])}", file=sys.stderr)
    return DONE if all(answer.met for answer in answers) else NOT_MET


def main(arguments=None) -> int:
    """Run the command line; returns the exit code."""
    arguments = sys.argv[1:] if arguments is None else list(arguments)
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")  # a plus-minus sign must not end a run on a plain terminal
    try:
        code = _command(arguments)
        sys.stdout.flush()
        return code
    except InputError as error:
        print(error, file=sys.stderr)
        return BAD_INPUT
    except KeyboardInterrupt:
        kept = "the same command goes on from here" if "--out" in arguments else "nothing was written"
        print(f"stopped; {kept}", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())  # so that leaving does not try again
        print("the reader of the standard output went away", file=sys.stderr)
        return BAD_INPUT
    except OSError as error:  # a full disk behind the standard output, no memory for a worker, ...
        print(f"widthwise: {one_line(error.strerror or error)}", file=sys.stderr)
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return BAD_INPUT


def _command(arguments) -> int:
    """Run one command; returns the exit code."""
    if not arguments or arguments[0].startswith("-"):
        overview = _overview()
        if not arguments:
            overview.print_help()
            return BAD_INPUT
        overview.parse_args(arguments)
        return DONE
    command, *rest = arguments
    if command == "new":
        return _new(rest)
    if command == "keys":
        return _keys(rest)
    if command == "run":
        return _run(rest)
    if command == "fit":
        return _fit(rest)
    if command == "compare":
        return _compare(rest)
    if command in SUMMARIES:
        return _ask(command, rest)
    raise InputError(
        f"widthwise: no command '{one_line(command)}'; {nearest(command, ['new', 'keys', 'run', 'fit', 'compare', *SUMMARIES])}"
    )


if __name__ == "__main__":
    sys.exit(main())
