"""What a person reads without opening a file: tables of 80 columns, and progress on the error stream."""

import errno
import sys
from contextlib import contextmanager, nullcontext

import numpy as np
from rich.console import Console
from rich.measure import Measurement
from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn
from rich.table import Table
from rich.text import Text

from studies.answer import Answer
from studies.atoms_words import atoms_tables
from studies.cells import bounds, plus_minus, text_table
from studies.errors import inert, one_line
from studies.notes import CAUTION

WIDTH = 80
LARGEST_CAUSES = 4
SHOWN = {  # quantities of a comparison that are printed; the files hold all
    "spread": ("vth_mean_mv", "vth_sigma_mv"),
    "timing": ("min_width_um", "yield", "period_at_target_ps"),
    "pair": ("min_width_um", "area_um2", "offset_sigma_mv", "error_sigma_percent"),
    "loss": ("most_good_chips_per_cm2", "chip_yield", "good_chips_per_cm2"),
}
LEAST_PERCENT = 1e-4  # a loss below a hundredth of a percent is shown as a share


class Printer(Console):
    """A console that leaves a reader who went away to the command line, instead of ending the program itself."""

    def on_broken_pipe(self) -> None:
        """Hand the broken pipe on."""
        raise BrokenPipeError(errno.EPIPE, "nobody reads it")


def console(stream=None) -> Console:
    """Console that never takes text from a file for markup; 80 columns unless a terminal says otherwise."""
    stream = stream or sys.stdout
    width = None if stream.isatty() else WIDTH
    return Printer(file=stream, width=width, markup=False, highlight=False, emoji=False)


def spread_tables(answer: Answer) -> list[Table]:
    """Thresholds, then what makes the spread."""
    question, rows = answer.question, answer.table.to_dict("records")
    thresholds = [
        [
            f"{row['width_um']:g}",
            plus_minus(row, "vth_mean", "_v", 2, 1e3),
            bounds(row, "vth_sigma", "_mv", 2),
            plus_minus(row, "vth_skew", "", 2),
            plus_minus(row, "vth_p0_1", "_v", 1, 1e3),
            plus_minus(row, "vth_p99_9", "_v", 1, 1e3),
        ]
        for row in rows
    ]
    where = f"{one_line(answer.process)}, device {one_line(question['device'])}, L = {question['length_um']:g} um"
    first = text_table(
        f"Threshold voltage in mV: {where}, {answer.samples} devices",
        ["W um", "mean", "sigma [95 %]", "skew", "0.1 %", "99.9 %"],
        thresholds,
    )
    shares = answer.tables["spread_shares"]
    causes = shares[~shares.part.str.startswith("level_")]
    largest = list(causes.groupby("part").share.max().sort_values(ascending=False).index[:LARGEST_CAUSES])
    reasons = []
    for row in rows:
        mine = shares[shares.width_um == row["width_um"]].set_index("part")
        local = [row.get(name) for name in ("vth_device_sigma_mv", "vth_device_sigma_area_law_mv")]
        reasons.append(
            [f"{row['width_um']:g}", *("-" if sigma is None else f"{sigma:.2f}" for sigma in local)]
            + [f"{100 * mine.share[cause]:.1f} ±{_half_width(mine, cause):.1f}" for cause in largest]
        )
    errors = [
        max(row["vth_device_sigma_high_mv"] / row["vth_device_sigma_mv"] - 1, 0)
        for row in rows
        if row.get("vth_device_sigma_mv")
    ]
    error = f" (±{100 * max(errors):.1f} %)" if errors else ""
    second = text_table(
        f"Neighbours' sigma in mV{error} and the largest causes' shares of the variance in %",
        ["W um", "sigma", "1/√WL", *[cause.replace("_", " ") for cause in largest]],
        reasons,
    )
    return [first, second]


def _half_width(shares, part: str) -> float:
    return 100 * max(shares.share_high[part] - shares.share[part], shares.share[part] - shares.share_low[part])


def timing_tables(answer: Answer) -> list[Table]:
    """Yield, slowest path and the period that the target needs."""
    question = answer.question
    target = f"{100 * question['yield']:.12g} %"
    rare = 1 - question["yield"] < LEAST_PERCENT
    rows = [
        [
            f"{row['width_um']:g}",
            _lost(row) if rare else bounds(row, "yield", "", 2, 100),
            plus_minus(row, "slowest_mean", "_ps", 1),
            plus_minus(row, "slowest_sigma", "_ps", 1),
            bounds(row, "period_at_target", "_ps", 0),
        ]
        for row in answer.table.to_dict("records")
    ]
    title = (
        f"Timing: {one_line(answer.process)}, {question['paths']} paths of {question['stages']} stages at "
        f"{question['supply_v']:g} V, {answer.samples} dies"
    )
    columns = [
        "W um",
        f"{'lost' if rare else 'yield %'} at {question['period_ps']:g} ps",
        "slowest ps",
        "sigma ps",
        f"ps for {target}",
    ]
    return [text_table(title, columns, rows)]


def _lost(row) -> str:
    """Share of chips lost, for yields too near one to be read as percent."""
    value, low, high = (1 - row[name] for name in ("yield", "yield_high", "yield_low"))
    return f"{value:.1e} [{low:.1e}, {high:.1e}]"


def pair_tables(answer: Answer) -> list[Table]:
    """Error and yield against width, what each length costs, and what makes the error."""
    error, unit = ("offset", "mv") if answer.question["kind"] == "differential pair" else ("error", "percent")
    shown = "mV" if unit == "mv" else "%"
    rows = [
        [
            f"{row['length_um']:g}",
            f"{row['width_um']:.4g}" + (" <" if row["is_minimum"] else "  "),
            f"{row['area_um2']:.4g}",
            plus_minus(row, f"{error}_sigma", f"_{unit}", 4),
            f"{row['gm_over_i_per_v']:.1f}",
            bounds(row, "chip_yield", "", 2, 100),
        ]
        for row in answer.table.to_dict("records")
    ]
    title = f"Pairs: {one_line(answer.process)}, {answer.question['kind']}, {answer.samples} chips; < marks the answer"
    columns = ["L um", "W um  ", "area um2", f"{error} sigma {shown}", "gm/I 1/V", "chips inside %"]
    shares = answer.tables["pair_shares"]
    parts = [
        [
            row["part"].replace("_", " "),
            plus_minus(row, f"{error}_sigma", f"_{unit}", 3),
            plus_minus(row, "share", "", 1, 100),
        ]
        for row in shares.sort_values("share", ascending=False).to_dict("records")
    ]
    where = f"at L = {shares.length_um.iloc[0]:g} um, W = {shares.width_um.iloc[0]:.4g} um"
    return [
        text_table(title, columns, rows),
        text_table(f"What makes the {error} {where}", ["cause", f"sigma {shown}", "of the variance %"], parts),
    ]


def loss_tables(answer: Answer) -> list[Table]:
    """Failure shares, chip yield and good chips."""
    question, rows = answer.question, answer.table.to_dict("records")
    lines = [
        [
            f"{row['width_um']:g}",
            f"{row['device_failure']:.2e} [{row['device_failure_low']:.1e}, {row['device_failure_high']:.1e}]"
            + ("?" if row["doubtful"] else ""),
            bounds(row, "chip_yield", "", 2, 100),
            plus_minus(row, "good_chips", "_per_cm2", 2),
        ]
        for row in rows
    ]
    title = (
        f"Loss: {one_line(answer.process)}, device {one_line(question['device'])}, {question['devices']} devices a chip, "
        f"{question['spares']} spares; ? is doubtful"
    )
    return [text_table(title, ["W um", "outside their limits", "chips working %", "good chips/cm2"], lines)]


def edge_tables(answer: Answer) -> list[Table]:
    """Shifts by solution and by closed form, whether they agree, and the dopants' scatter."""
    question = answer.question
    rows = [
        [
            f"{row['width_um']:g}",
            plus_minus(row, "edge_shift", "_mv", 3),
            f"{row['closed_form_shift_mv']:.2f}",
            f"{row['closed_form_over_solved']:.2f}",
            "yes" if row["closed_form_agrees"] else "no",
            plus_minus(row, "dopant_sigma_ratio", "", 4),
            *([plus_minus(row, "dopant_sigma", "_mv", 3)] if question["length_um"] else []),
        ]
        for row in answer.table.to_dict("records")
    ]
    title = (
        f"Edge: {one_line(answer.process)}, device {one_line(question['device'])}, nominal shift; dopants' sigma over its "
        "closed form; a form that holds is within 10 %"
    )
    columns = ["W um", "solved mV", "closed mV", "ratio", "holds", "dopants"]
    if question["length_um"]:
        columns.append(f"mV, L {question['length_um']:g} um")
    return [text_table(title, columns, rows)]


def compare_tables(answer: Answer) -> list[Table]:
    """The quantities of which more or less is better, and the break-down of the threshold's change."""
    first, second = (one_line(name) for name in answer.table[["first", "second"]].iloc[0])
    told = [row for row in answer.table.to_dict("records") if row["quantity"] in SHOWN[answer.question["question"]]]
    rows = [
        [
            row["quantity"].replace("_", " "),
            f"{row['width_um']:.4g}" if np.isfinite(row["width_um"]) else "",
            f"{row['first_value']:.4g}",
            f"{row['second_value']:.4g}",
            _signed(row) + ("" if row["interval"] == "paired" else " s"),
        ]
        for row in told
    ]
    separate = "; s: see notes" if any(row["interval"] != "paired" for row in told) else ""
    title = f"{answer.question['question'].capitalize()} compared: {second} less {first} [95 %]{separate}"
    tables = [text_table(title, ["quantity", "W um", first, second, "difference"], rows)]
    if "compare_shares" in answer.tables:
        shares = answer.tables["compare_shares"]
        narrow = shares[shares.width_um == shares.width_um.min()]
        parts = [
            [
                row["ingredient"],
                plus_minus(row, "vth_mean", "_mv", 2),
                plus_minus(row, "vth_variance", "_mv2", 2),
            ]
            for row in narrow.to_dict("records")
        ]
        where = f"Why, at W = {narrow.width_um.iloc[0]:g} um, from {first} to {second}"
        tables.append(text_table(where, ["ingredient", "mean mV", "variance mV2"], parts))
    return tables


def _signed(row) -> str:
    value, low, high = (row[name] for name in ("difference", "difference_low", "difference_high"))
    if not np.isfinite(value):
        return "out of reach"
    width = high - low
    digits = int(np.clip(1 - np.floor(np.log10(width)), 0, 9)) if width > 0 and np.isfinite(width) else 4
    return f"{value:+.{digits}f} [{low:+.{digits}f}, {high:+.{digits}f}]"


TABLES = {
    "atoms": atoms_tables,
    "compare": compare_tables,
    "edge": edge_tables,
    "loss": loss_tables,
    "spread": spread_tables,
    "timing": timing_tables,
    "pair": pair_tables,
}


def show(answers: list[Answer], out: Console) -> None:
    """Print every answer: sentences, tables, notes; the caution at the end."""
    for answer in answers:
        for sentence in answer.sentences:
            out.print(Text(inert(sentence), style="bold"))
        out.print()
        for table in TABLES[answer.kind](answer):
            _print_whole(table, out)
            out.print()
        for note in dict.fromkeys(answer.notes):
            out.print(Text(f"* {inert(note)}"))
        out.print()
    out.print(Text(CAUTION, style="italic"))


def _print_whole(table: Table, out: Console) -> None:
    """Print a table at its own width where that exceeds the console's: a cut number reads as another one."""
    usual = out.width
    out.width = max(usual, Measurement.get(out, out.options.update(max_width=10_000), table).maximum)
    out.print(table)
    out.width = usual


def waiting(what: str):
    """A moving sign with a few words while something is done; only on a terminal."""
    return console(sys.stderr).status(Text(what)) if sys.stderr.isatty() else nullcontext()


@contextmanager
def progress_bar(questions: int):
    """A function (number, name) -> progress callback; bars appear only on a terminal."""
    if not sys.stderr.isatty():
        yield lambda number, name: lambda done, total: None
        return
    bar = Progress(
        TextColumn("{task.description}", markup=False),
        BarColumn(),
        TextColumn("{task.percentage:>3.0f} %"),
        TimeRemainingColumn(),
        console=console(sys.stderr),
        transient=True,
    )
    with bar:

        def start(number: int, name: str):
            task = bar.add_task(f"{number} of {questions}: {one_line(name)}", total=None)
            return lambda done, total: bar.update(task, completed=done, total=total)

        yield start
