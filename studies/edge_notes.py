"""Sentences and notes about the channel's edges: what was solved, and how far a closed form can be believed."""

import numpy as np

from physics.edge_surface import NARROWEST, REACH, TESTED, SolvedEdge
from physics.threshold import electrostatics, oxide_capacitance
from studies.edge_solutions import solved_widths
from studies.edge_table import edge_table
from studies.geometry import Geometry
from studies.population import Population
from studies.process_edge import Edge
from studies.section import edge_section
from studies.variation import CLEAR_SIGMAS, largest_fall

AGREEMENT = 0.1  # relative: within it a closed form is said to agree with the solution
NEAR = 1.5  # times the narrowest width of a table, where a note is due
MOST_NAMED = 4  # widths named in a sentence


def agrees(ratio: float) -> bool:
    """Whether a closed form's shift that is `ratio` times the solved one agrees with it."""
    return bool(abs(ratio - 1) <= AGREEMENT)


def off_by(ratio: float, difference_mv: float) -> str:
    """In words, how a closed form's shift that is `ratio` times the solved one, and so much more than it, is wrong."""
    size = f"({abs(difference_mv):.2g} mV off)"
    if ratio <= 0:
        return f"has the wrong sign {size}"
    times = ratio if ratio > 1 else 1 / ratio
    return f"is {times:.3g} times too {'large' if ratio > 1 else 'small'} {size}"


def form_name(edge: Edge) -> str:
    """A closed form by name."""
    if edge.kind == "trench":
        return "The trench's closed form"
    return f"The field oxide's closed form (shape {np.pi / 2 if edge.shape is None else edge.shape:.3g})"


def verdict(edge: Edge, widths_um, closed_mv, solved_mv) -> str:
    """At which drawn widths a closed form's shift can be believed, given the solution's."""
    wrong, close = [], []
    for width, closed, solved in zip(widths_um, closed_mv, solved_mv):
        ratio = closed / solved if solved else np.inf
        if agrees(ratio):
            close.append(f"{width:g}")
        else:
            wrong.append(f"at W = {width:g} um it {off_by(ratio, closed - solved)}")
    within = f"within {100 * AGREEMENT:g} % of the solution"
    if not wrong:
        return f"{form_name(edge)} can be believed: its shift is {within} at every width asked for."
    said = "; ".join(wrong[:MOST_NAMED])
    said += f"; and so on at {len(wrong) - MOST_NAMED} more" if len(wrong) > MOST_NAMED else ""
    if not close:
        return f"{form_name(edge)} is more than 10 % off at every width asked for: {said}."
    return f"{form_name(edge)} is {within} only at W = {', '.join(close)} um: {said}."


def edge_sentences(edge: Edge, rows) -> tuple[str, ...]:
    """The edge's answer in words. rows : rows of edge.csv, narrowest first, as dictionaries"""
    first, last = rows[0], rows[-1]
    ratios = [row["dopant_sigma_ratio"] for row in rows]
    span = f"{min(ratios):.2f}" if len(ratios) == 1 else f"{min(ratios):.2f} to {max(ratios):.2f}"
    shape = ""
    if edge.kind == "field oxide":
        shape = f" A shape of {first['equivalent_shape']:.3g} would say the same at W = {first['width_um']:g} um"
        shape += "." if first is last else f", {last['equivalent_shape']:.3g} at W = {last['width_um']:g} um."
    return (
        f"{first['process']}, device {first['device']}, W = {first['width_um']:g} um: by the solution the edges move the "
        f"threshold by {first['edge_shift_mv']:+.2f} mV [{first['edge_shift_low_mv']:+.2f}, "
        f"{first['edge_shift_high_mv']:+.2f}]; the closed form says {first['closed_form_shift_mv']:+.2f} mV.",
        verdict(edge, *([row[name] for row in rows] for name in ("width_um", "closed_form_shift_mv", "edge_shift_mv")))
        + shape,
        f"The dopants' sigma is {span} times its closed form.",
    )


def edge_question_notes(edge, rows) -> list[str]:
    """What stands behind the numbers of an edge question. edge : the nominal device's"""
    notes = [
        "Shifts are of the threshold's magnitude, at the asked body bias, for a long channel. Brackets and ± are numerical "
        "error, from halving the mesh; they do not contain the error of the geometry and doping written down. No random "
        "numbers: seed and samples have no effect here.",
        "Solved: Poisson's equation with Boltzmann carriers on the width-depth plane; the threshold is where the channel's "
        "charge is C_ox kT/q per area. No quantum shift, no gate depletion.",
        "Dopants: a wide channel's sigma is already about 1.1 times the closed form's, since the depletion edge is soft and "
        "dopants below it count too; what the edges do is the change from there.",
    ]
    if isinstance(edge, SolvedEdge):
        notes.append(table_note(edge))
    return notes


def table_note(edge: SolvedEdge) -> str:
    """What a table of solved edges is and how well it is known."""
    return (
        f"The studies read solved edges from a table, {100 * edge.charge_error:.2g} % of the shift and "
        f"{100 * edge.sigma_error:.2g} % of the dopants' sigma off at sections held out (doping and oxide up to "
        f"{100 * TESTED:g} % off nominal). A short polynomial around each width follows it within 0.4 %; the solver's own mesh adds "
        "up to 2 %."
    )


def solved_edge_notes(population: Population) -> list[str]:
    """What is to be said where the population's edges are solved."""
    edge, kind = population.nominal.edge, population.record.edge.kind
    far = [cause.replace("_", " ") for cause in ("doping", "oxide_thickness") if _strays(population, cause)]
    table = edge_table(edge_section(population.nominal, population.record, population.where))
    return [
        f"Edges: {kind}, its cross-section solved; its error is that of the geometry written down. {table_note(edge)}",
        "Dopants: sigma and skewness are those of the solution; for a wide channel sigma is "
        f"{edge.sigma_ratio(1e3 * edge.depletion_width):.2f} times the closed form, since the depletion edge is soft.",
        *(
            f"Edges: {cause} varies so much that samples beyond four sigmas lie outside the table, which reaches "
            f"{100 * REACH:g} % from nominal; there its parabola goes on."
            for cause in far
        ),
        *table.notes,
    ]


def _strays(population: Population, cause: str) -> bool:
    """Whether four sigmas of a quantity's variation lie outside the table."""
    fall = largest_fall([item for item in population.inputs if item.cause == cause])
    return 4 / CLEAR_SIGMAS * fall > REACH


def edge_width_notes(population: Population, geometries: tuple[Geometry, ...]) -> list[str]:
    """Whether the edges' model can be believed at the widths asked for, as far as the process file's geometry tells."""
    nominal, edge = population.nominal, population.nominal.edge
    drawn = [geometry.drawn_width * 1e6 for geometry in geometries]
    if isinstance(edge, SolvedEdge):
        near = [width for width, each in zip(drawn, geometries) if each.width < NEAR * edge.smallest_width]
        if not near:
            return []
        return [
            f"Edges: the table of solved edges begins at an electrical width of {edge.smallest_width * 1e6:.3g} um, "
            f"{NARROWEST:g} depletion widths; near it, at W = {', '.join(f'{width:g}' for width in near[:MOST_NAMED])} um, "
            "narrower samples lie outside and its last slope goes on."
        ]
    section = edge_section(nominal, population.record, population.where)
    if section is None:
        return []
    widths = [geometry.width for geometry in geometries]
    solved, state = solved_widths(section, widths), electrostatics(nominal)
    factors = [edge.charge_factor(state.depletion_width, width, nominal.oxide_thickness) for width in widths]
    closed = (np.array(factors) - 1) * state.bulk_charge / oxide_capacitance(nominal.oxide_thickness)
    said = verdict(population.record.edge, drawn, 1e3 * closed, 1e3 * solved.shift)
    outside = (
        "" if said.endswith("at every width asked for.") else ' method = "solved" in the edge table uses the solution.'
    )
    device = population.where.rpartition(": ")[2].replace(".", " ", 1)
    return [f"Edges of {device}, by a solution of the file's geometry: {said}{outside}", *solved.notes]
