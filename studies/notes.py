"""Sentences and notes of the answers, for a designer who does not know the model."""

import numpy as np

from physics.edge_surface import SolvedEdge
from physics.edges import FieldOxide, TabulatedEdge, Trench
from physics.short_channel import LongChannel, QuasiTwoDimensional
from studies.edge_notes import solved_edge_notes
from studies.population import Population
from studies.variation import CAUSES

CAUTION = (
    "Planning estimates. Sign-off belongs to the foundry's qualified models, to silicon data and to the people "
    "responsible, above all where a failing part could hurt someone."
)
QUARTER_CIRCLES = np.pi / 2


def edge_note(population: Population) -> str:
    """How far the edge's closed form can be trusted."""
    edge = population.nominal.edge
    if isinstance(edge, FieldOxide):
        note = (
            f"Edges: field oxide, closed form: the depleted area beyond the channel's two edges is {edge.shape:.3g} times the "
            "depletion width squared (the key edge.shape)."
        )
        if edge.shape > 0.5 * QUARTER_CIRCLES:
            return note + (
                " Two quarter circles (1.57) are an upper bound: for a flat surface with an abrupt step and no field implant "
                "a field solution gives a tenth to a fifth of that shift. Measure the threshold at two widths, or lower it."
            )
        return note + (
            " It is a guess about geometry, and a narrow device's shift is proportional to it: measure the threshold at two "
            "widths, the narrowest included."
        )
    if isinstance(edge, Trench):
        return (
            "Edges: trench, closed form of a flat surface; a field solution confirms its shift to 10 to 20 %. A recessed "
            "or rounded corner changes it: measure the threshold at two widths."
        )
    if isinstance(edge, TabulatedEdge):
        return "Edges: the factors of the process file's table, interpolated smoothly; as good as the table."
    return "Edges: none. The threshold then does not depend on the width; real narrow devices do."


def model_notes(population: Population) -> list[str]:
    """Which approximations were used."""
    solved = isinstance(population.nominal.edge, SolvedEdge)
    notes = solved_edge_notes(population) if solved else [edge_note(population)]
    kind = population.nominal.short_channel
    if isinstance(kind, LongChannel):
        notes.append(
            "Length: no short-channel effect, so that neither length nor gate-edge roughness moves the threshold. It holds for "
            "long channels: measure the threshold at two lengths, and where it differs choose a form (short_channel.kind)."
        )
    else:
        name = "quasi-two-dimensional" if isinstance(kind, QuasiTwoDimensional) else "charge sharing (Yau)"
        notes.append(
            f"Length: {name} form of the short channel. Its part and the edges' part multiply, an approximation: trust it "
            "least where the device is both narrow and short, and measure that corner."
        )
    scatter = population.record.scatter
    if scatter.fringe_dopants:
        notes.append("Dopants: those under the fringe of the edges are counted too (fringe_dopants): an upper bound.")
    elif scatter.dopants == "off":
        notes.append(
            "Dopants: their random number and place are switched off. The scatter of narrow devices is understated."
        )
    if scatter.remainder_pair_mv_um == 0:
        notes.append(
            "No measured remainder is given: published pairs scatter some three times as much as their dopants alone explain. "
            "Measure pairs of one size and give scatter.remainder_pair_mv_um: little else would change sigma more."
        )
    return notes


def bound_notes(table, what: str, more: str) -> list[str]:
    """A note when some number of a table has no bound. what : what was sampled; more : what would help"""
    unbounded = [name for name in table if name.endswith(("_v", "_ps")) and np.isinf(table[name].astype(float)).any()]
    if not unbounded:
        return []
    shown = ", ".join(unbounded[:3])
    return [f"So few {what} set no bound for {shown} (inf): a tail beyond what was sampled is not known; {more}."]


def spread_sentences(answer_rows) -> tuple[str, ...]:
    """The spread in words. answer_rows : rows of spread.csv, narrowest first, as dictionaries."""
    first, last = answer_rows[0], answer_rows[-1]
    causes = {cause: first[f"share_{cause}"] for cause in CAUSES if f"share_{cause}" in first}
    largest = max(causes, key=causes.get)
    sentence = (
        f"{first['process']}, device {first['device']}, W = {first['width_um']:g} um: sigma(Vth) {first['vth_sigma_mv']:.2f} mV "
        f"[{first['vth_sigma_low_mv']:.2f}, {first['vth_sigma_high_mv']:.2f}]; the largest cause is "
        f"{largest.replace('_', ' ')} with {100 * causes[largest]:.0f} % of the variance."
    )
    sentences = [sentence]
    if len(answer_rows) > 1:
        shift = 1e3 * (first["vth_nominal_v"] - first["vth_nominal_without_edges_v"])
        sentences.append(f"The edges move its nominal threshold by {shift:+.1f} mV.")
        if first.get("vth_device_sigma_area_law_mv"):
            departure = 100 * (first["vth_device_sigma_mv"] / first["vth_device_sigma_area_law_mv"] - 1)
            sentences[-1] += (
                f" Its sigma between neighbours is {departure:+.1f} % off the 1/sqrt(W L) line laid from W = {last['width_um']:g} um."
            )
    return tuple(sentences)


def timing_sentences(question, rows, min_width) -> tuple[str, ...]:
    """The timing answer in words. rows : rows of timing.csv, narrowest first, as dictionaries."""
    target = f"{rows[0]['process']}, {100 * question.target_yield:.12g} % of chips within {question.period_ps:g} ps"
    last = rows[-1]
    if not np.isfinite(min_width.value):
        return (
            f"Cannot be met: {target} is not reached at any width up to W = {last['width_um']:g} um, where the yield is "
            f"{100 * last['yield']:.2f} % [{100 * last['yield_low']:.2f}, {100 * last['yield_high']:.2f}].",
            f"That width needs a period of {last['period_at_target_ps']:.1f} ps "
            f"[{last['period_at_target_low_ps']:.1f}, {last['period_at_target_high_ps']:.1f}].",
        )
    if min_width.value == question.width_um[0]:
        return (f"{target}: every width asked for meets it, the narrowest (W = {question.width_um[0]:g} um) included.",)
    high = f"{min_width.high:.4g}" if np.isfinite(min_width.high) else "beyond the widths asked for"
    return (
        f"{target}: the smallest width is W = {min_width.value:.4g} um [{min_width.low:.4g}, {high}], interpolated "
        "between the widths asked for.",
    )


def timing_tail_notes(question, tails) -> list[str]:
    """How a target beyond counting was answered, and what its estimator doubts. tails : one a width, or none"""
    if not tails:
        return []
    notes = [
        f"A yield of {100 * question.target_yield:.12g} % asks for rarer chips than the dies drawn can show: periods, and "
        "yields near 100 %, come from an estimator of rare events on the same model. So far out they rest on the tails of the "
        "laws assumed, which no sample has tested, and on a path's delay being described by mean, sigma, skew and kurtosis."
    ]
    for width, tail in zip(question.width_um, tails):
        notes += [f"W = {width:g} um: the estimator doubts itself: {doubt}." for doubt in tail.doubts]
    return notes


def pair_sentences(question, process: str, best, searches) -> tuple[str, ...]:
    """The pair answer in words. best : the search of the smallest area; searches : those that met the target"""
    tally, row = best.judged[best.shown_width()]
    target = (
        f"{process}, {question.kind}, {question.pairs} pairs a chip, {100 * question.target_yield:.12g} % of chips within "
        f"{question.limit * question.error_words[2]:g} {'mV' if question.limit_mv else '%'}"
    )
    reached = best.yields(best.shown_width())[1]
    digits = int(np.clip(np.ceil(-np.log10(1 - question.target_yield)), 2, 12))
    best_reached = " ".join(
        (
            f"{100 * reached.value:.{digits}f} %",
            f"[{100 * reached.low:.{digits}f}, {100 * reached.high:.{digits}f}] of chips",
        )
    )
    if not best.met:
        needed = tally.worst_quantile(row, question.target_yield)
        if needed.value <= question.limit:
            return (f"{target}: met already at the narrowest width considered.",)
        return (
            f"Cannot be met: {target} is not reached at any width up to W = {best.shown_width():g} um, L = "
            f"{best.biasing.length_um:g} um; the best reached is {best_reached}.",
        )
    width = best.width
    high = f"{width.high:.4g}" if np.isfinite(width.high) else "not bounded by these samples"
    sentence = (
        f"{target}: the smallest width is W = {width.value:.4g} um [{width.low:.4g}, {high}] at L = "
        f"{best.biasing.length_um:g} um, {question.fingers} finger{'s' if question.fingers > 1 else ''}, gate area of a "
        f"pair {best.area(width.value):.4g} um2; there {best_reached} stay inside."
    )
    return (sentence + smallest_area(best, searches),)


def smallest_area(best, searches) -> str:
    """What can be said of the lengths' areas; searches : those that met the target"""
    if len(searches) < 2:
        return ""
    high = best.area(best.width.high)
    alike = [search.biasing.length_um for search in searches if search.area(search.width.low) < high]
    if len(alike) == 1:
        return " It has the smallest area of the lengths asked for."
    others = ", ".join(f"{length:g}" for length in alike if length != best.biasing.length_um)
    return f" Its area is the smallest found, but that of L = {others} um is the same within the intervals."


def pair_notes(question, population: Population, best, whole, rows) -> list[str]:
    """What a designer of pairs should know of this answer. whole : the answer's width as one finger, or None"""
    notes = ["Offset and error are computed from two drawn devices each at its operating point, both saturated."]
    if whole is not None:
        width, shown = best.shown_width(), "mV" if question.limit_mv else "%"
        split, one = best.error_sigma(width), whole.error_sigma(width)
        notes.append(
            f"Splitting W = {width:.4g} um into {question.fingers} fingers: sigma {split.value:.4g} {shown} [{split.low:.4g}, "
            f"{split.high:.4g}]; as one finger {one.value:.4g} {shown} [{one.low:.4g}, {one.high:.4g}]. The shift of the "
            "added edges cancels in the pair; their scatter does not."
        )
    if best.tail:
        chips = f"{best.samples} chips cannot bound a yield of {question.target_yield:g}"
        notes.append(f"{chips}: the failure probability of one pair was found by the rare-event estimator.")
        doubts = dict.fromkeys(note for estimate in best.tail.values() for note in estimate.notes)
        notes += [f"The rare-event estimator doubts itself: {doubt}." for doubt in doubts]
    scatter = population.record.scatter
    if question.distance_um > 0 and not (scatter.distance_pair_uv_per_um or scatter.gradient_uv_per_um):
        notes.append(
            "distance_um has no effect: the process file gives neither scatter.distance_pair_uv_per_um nor "
            "scatter.gradient_uv_per_um."
        )
    if question.distance_um == 0 and (scatter.distance_pair_uv_per_um or scatter.gradient_uv_per_um):
        notes.append("distance_um is 0: the process file's distance terms have no effect.")
    if scatter.gate_edge_nm == 0:
        notes.append(
            "No gate-edge roughness is given and none of the causes depends on length but by area: real short channels "
            "scatter more than 1/sqrt(W L). Measure a pair at the shortest length, or give gate_edge_nm."
        )
    shallow = rows[rows.saturation_v > question.drain_v]
    if len(shallow):
        widths = ", ".join(f"{width:.3g}" for width in shallow.width_um[:3])
        notes.append(
            f"Not saturated: at W = {widths} um the nominal device needs up to {shallow.saturation_v.max():.2f} V of drain "
            f"voltage and drain_v is {question.drain_v:g} V; offset and error there are those of a saturated device."
        )
    for _, curve in rows.groupby("length_um"):
        falls = curve.chip_yield.shift(-1) < curve.chip_yield_low
        if falls.any():
            notes.append(
                f"The yield is not monotone in width: it falls beyond W = {curve.width_um[falls].iloc[0]:.4g} um. The width "
                "given is the smallest from which on it stays above the target."
            )
    return notes


def loss_sentences(question, rows) -> tuple[str, ...]:
    """The loss in words. rows : rows of loss.csv, narrowest first, as dictionaries"""
    first, best = rows[0], max(rows, key=lambda row: row["good_chips_per_cm2"])
    near = [row["width_um"] for row in rows if row["good_chips_high_per_cm2"] >= best["good_chips_low_per_cm2"]]
    return (
        f"{first['process']}, device {first['device']}, W = {first['width_um']:g} um: {first['device_failure']:.2g} of "
        f"devices [{first['device_failure_low']:.2g}, {first['device_failure_high']:.2g}] are outside their limits; "
        f"{100 * first['chip_yield']:.2f} % [{100 * first['chip_yield_low']:.2f}, {100 * first['chip_yield_high']:.2f}] of "
        f"chips of {question.devices} devices work.",
        f"Of the widths asked for W = {best['width_um']:g} um gives most good chips per wafer area, "
        f"{best['good_chips_per_cm2']:.4g} per cm2 "
        f"[{best['good_chips_low_per_cm2']:.4g}, {best['good_chips_high_per_cm2']:.4g}]{_ties(near, best, rows)}.",
    )


def _ties(near, best, rows) -> str:
    """What else may be as good: widths within the intervals, and those beyond the ones asked for."""
    others = [f"{width:g}" for width in near if width != best["width_um"]]
    said = f"; W = {', '.join(others)} um cannot be told from it" if others else ""
    ends = {rows[0]["width_um"]: "narrower", rows[-1]["width_um"]: "wider"}
    if len(rows) > 1 and best["width_um"] in ends:
        said += f"; {ends[best['width_um']]} ones were not asked for and may give more"
    return said


def loss_notes(question, widths) -> list[str]:
    """What a designer of arrays should know of this answer."""
    notes = [
        "Dies differ: each has its own share of failing devices, and the chip yield is the mean over dies. A die's share is "
        "found by moving one cause of the die at a time, an approximation that takes causes not to reinforce each other. "
        "Failures so rare rest on the laws' tails: count failures of a test array to check the largest share."
    ]
    unseen = ", ".join(f"{width.margins.geometry.drawn_width * 1e6:g}" for width in widths if width.unresolved)
    if unseen:
        notes.append(
            f"W = {unseen} um: failures of one kind are too rare to be met (below 1e-15, or impossible); the chip yield "
            "leaves them out."
        )
    for width in widths:
        drawn = width.margins.geometry.drawn_width * 1e6
        notes += [f"W = {drawn:g} um: the estimator doubts itself: {doubt}." for doubt in width.doubts()]
    if question.defects_per_cm2 == 0:
        notes.append(
            "Defects are left out, which flatters large chips; give defects_per_cm2 to compare chips of different size."
        )
    return notes
