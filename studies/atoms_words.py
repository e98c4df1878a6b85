"""What is said of devices with single dopants: the printed table, sentences, and what their numbers leave out."""

from rich.table import Table

from physics.edges import NoEdge
from studies.answer import Answer
from studies.atoms_devices import nodes_of
from studies.cells import bounds, plus_minus, text_table
from studies.errors import one_line
from studies.population import Population

BYTES_A_NODE = 250  # of memory, some 30 arrays
NEARLY_SQUARE = 1.5  # width over length within which a device counts as square


def atoms_tables(answer: Answer) -> list[Table]:
    """Lowering, sigma and skew beside the fast model's sigma."""
    question = answer.question
    rows = [
        [
            f"{row['width_um']:g}",
            plus_minus(row, "lowering", "_mv", 2),
            bounds(row, "vth_sigma", "_mv", 2),
            f"{row['fast_sigma_mv']:.2f}",
            plus_minus(row, "sigma_ratio", "", 3),
            plus_minus(row, "vth_skew", "", 2),
        ]
        for row in answer.table.to_dict("records")
    ]
    title = (
        f"Dopants one by one, mV: {one_line(answer.process)}, device {one_line(question['device'])}, "
        f"L = {question['length_um']:g} um, {answer.samples} devices"
    )
    return [text_table(title, ["W um", "lowering", "sigma [95 %]", "fast", "ratio", "skew"], rows)]


def atoms_sentences(process: str, question, rows) -> tuple[str, ...]:
    """The answer in words, for the narrowest and the widest width. rows : of the question's module"""
    return tuple(_sentence(process, question, row) for row in dict.fromkeys((0, len(rows) - 1)) for row in (rows[row],))


def _sentence(process: str, question, row) -> str:
    lowering, sigma, ratio = (row.found[name] for name in ("lowering_mv", "vth_sigma_mv", "sigma_ratio"))
    told = "" if lowering.low > 0 or lowering.high < 0 else ", which this sample cannot tell from zero"
    return (
        f"{process}, device {question.device}, W = {row.kind.width_um:g} um: dopants placed one by one give sigma(Vth) "
        f"{sigma.value:.2f} mV [{sigma.low:.2f}, {sigma.high:.2f}], {ratio.value:.3f} times [{ratio.low:.3f}, "
        f"{ratio.high:.3f}] the fast model's {1e3 * row.kind.fast_sigma:.2f} mV. The threshold's mean "
        f"is lowered by {lowering.value:.2f} mV [{lowering.low:.2f}, {lowering.high:.2f}]{told}."
    )


def atoms_notes(population: Population, question, rows) -> tuple[str, ...]:
    """What the numbers rest on and what they leave out. rows : of the question's module, narrowest first"""
    return (
        "Only dopants vary, in number and place. Left out: variation of length, width, oxide and doping, rough edges and "
        "oxide, gate grains, the measured remainder, the quantum shift, gate depletion, and the junctions: source and "
        "drain are mirrors, the channel counts as long, the drain voltage as low. Mobility is the same everywhere.",
        _level_note(question, rows),
        _mesh_note(question, rows),
        _edge_note(population, question, rows[0].kind),
        _fast_note(population, rows),
        f"Every device has a random stream of its own: more devices (the key devices, {question.devices} here) only add to "
        "the first ones, and samples and precision have no effect. Skewness has the interval of nearly normal values.",
    )


def _level_note(question, rows) -> str:
    device = rows[0].kind.device
    ratio = device.width / device.length
    shape = "square" if 1 / NEARLY_SQUARE < ratio < NEARLY_SQUARE else "wide" if ratio > 1 else "narrow"
    shown = {
        "square": "a square device then shows hardly any lowering, since it conducts as its mean potential does",
        "wide": "a device wider than long is lowered, since currents choose the valleys side by side",
        "narrow": "a device longer than wide is raised, since its hills stand in series",
    }[shape]
    return (
        f"Lowering is of the threshold's magnitude against continuous doping, and depends on the current at which the "
        f"threshold is read: here where the current is that of an even sheet of {question.charge_level:g} C_ox kT/q of charge per "
        f"area (the key charge_level). At 1 {shown}; at 0.1, well below threshold, less is screened and the mean is lowered "
        "more: measured at 50 by 50 nm, 3 nm of oxide and 5e18 per cm3, by 22 mV instead of none. Compare it with a "
        "measurement only at the same current."
    )


def _mesh_note(question, rows) -> str:
    nodes = nodes_of(rows[-1].kind)
    return (
        f"Boxes of {question.mesh_nm:g} nm (the key mesh_nm), up to {nodes} nodes, some {max(nodes * BYTES_A_NODE / 1e6, 1):.0f} MB "
        "a worker. Measured at 50 by 50 nm: from 2 nm down to 0.7 nm sigma changes by less than 1 %, the mean by 1 mV; half "
        "the spacing takes some ten times as long. A charge is spread over a cube of 1 nm, and acceptors are never neutralised "
        "by a hole."
    )


def _edge_note(population: Population, question, kind) -> str:
    edge, record = kind.device.edge, population.record.edge
    if not isinstance(edge, NoEdge):
        return (
            f"Edges: {record.kind}, its geometry solved with the dopants beside and below it, {1e9 * edge.field_width:.3g} nm "
            "beside each edge, then a mirror (the key field_nm; two depletion widths leave the threshold's mean within some "
            "2 mV of a wide field). A box of 1 nm does not resolve the layer that inverts along a trench's wall."
        )
    if record.kind == "none":
        return "Edges: none, mirrors along the channel."
    why = "as field_nm = 0 asks" if record.solvable else f'kind = "{record.kind}" without a geometry to solve'
    return f"Edges: left away here, mirrors along the channel ({why}); real narrow devices have them."


def _fast_note(population: Population, rows) -> str:
    least = min(row.correlation for row in rows)
    solved = " times the ratio of its solved edges" if population.record.edge.method == "solved" else ""
    return (
        f"The fast model is the studies' law of counted dopants at the same electrical dimensions{solved}, all else nominal: each "
        "dopant moves the threshold in proportion to its height over the depletion edge. A ratio of some 1.1 comes from "
        "its sharp depletion edge, more from the current's way between the dopants, less from edges that help the gate. Intervals of lowering and sigma use what it "
        f"says of the very same dopants (correlation {least:.3f} or more), whose law is known."
    )
