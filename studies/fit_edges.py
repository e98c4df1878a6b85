"""Which form of the edge: every form's error at widths it was not fitted to, and whether any of them fits at all.

Cross-validation: M. Stone, J. R. Stat. Soc. B 36, 111 (1974) (from memory), one width left out at a time.
"""

from dataclasses import dataclass

import numpy as np
from scipy import stats

from studies.fit_mean import Problem, candidates, covariance, separable, solve

MOST_FOLDS = 12
TIE = 1.15  # times the least error: where the start's own form, or a simpler one, is preferred
GOOD = 0.2  # of the constant's error: the start's form explains all but a few percent of the variance
CLEAR = 3.0  # times the least error: beyond, the start's form goes if rows scatter more about it than about their cells
LUCK = 1.25  # times the least error: which form predicts best of several is luck up to here
POOR = 0.7  # of the constant's error: a form that does no better explains less than half of the variance
FAR = 4.0  # times the scatter that was computed: a spread that scatter does not explain
SURE = 0.01  # probability below which a test speaks
SHARE_LEFT = 0.3  # of the widths' range: a misfit that matters


@dataclass(frozen=True, kw_only=True)
class CellMeans:
    """Robust means of the cells.

    mean [V], weight (rows over their variance [1/V^2]) : one entry a cell; sigma : of one row [V]
    pure : sigma of one row about its cell [V] and its degrees of freedom; None without repeated rows
    computed : sigma of one device by dopants and the start's remainder [V]
    """

    mean: np.ndarray
    weight: np.ndarray
    rows: np.ndarray
    sigma: np.ndarray
    computed: np.ndarray
    pure: tuple[float, int] | None


@dataclass(frozen=True, kw_only=True)
class Left:
    """Predictions of cells whose width was left out [V], their standard errors without scatter, and their freedom."""

    predicted: np.ndarray
    error: np.ndarray
    scatter: float
    freedom: float


@dataclass(frozen=True, kw_only=True)
class Form:
    """A form of the edge fitted to everything.

    problem, inner : the fit; notes : what was frozen; left : see `Left`, None with fewer than three widths
    error : root mean square over widths of the error at widths left out [V]; misfit : of the fit itself [V]
    """

    problem: Problem
    inner: np.ndarray
    notes: tuple[str, ...]
    left: Left | None
    error: float
    misfit: float


@dataclass(frozen=True, kw_only=True)
class Choice:
    """The form that was chosen, all that were compared, whether it fits, and why, in words."""

    name: str
    forms: dict[str, Form]
    fits: bool
    said: tuple[str, ...]


def fit_form(problem: Problem, means: CellMeans, asked: bool) -> Form:
    """One form fitted to the cells' means, and to all but each width."""
    inner = solve(problem, problem.begin(), means.mean, 1 / np.sqrt(means.weight))
    misfit = _rms(means.mean - problem.cells(inner), problem.start.cells.width_um)
    widest = max(1.0, (misfit / np.median(means.sigma)) ** 2)  # what the sigma has not foreseen
    problem, inner, notes = separable(problem, inner, means.weight / widest, asked)
    if notes:
        inner = solve(problem, inner, means.mean, 1 / np.sqrt(means.weight))
    misfit = _rms(means.mean - problem.cells(inner), problem.start.cells.width_um)
    left = leave_out(problem, inner, means)
    error = np.nan if left is None else _rms(means.mean - left.predicted, problem.start.cells.width_um)
    return Form(problem=problem, inner=inner, notes=tuple(notes), left=left, error=error, misfit=misfit)


def _rms(difference, widths) -> float:
    """Root mean square, every width counting once."""
    groups = np.unique(widths, return_inverse=True)[1]
    return float(np.sqrt((np.bincount(groups, difference**2) / np.bincount(groups)).mean()))


def leave_out(problem: Problem, inner, means: CellMeans) -> Left | None:
    """Predict the cells of each width from the others."""
    widths, group = np.unique(problem.start.cells.width_um, return_inverse=True)
    if len(widths) < 3:
        return None
    fold = group % MOST_FOLDS if len(widths) > MOST_FOLDS else group
    predicted, error = np.empty(len(group)), np.empty(len(group))
    left_over, freedom = 0.0, max(len(group) - len(problem.free), 1)
    for each in range(fold.max() + 1):
        out = fold == each
        weight = np.where(out, 1e-12, means.weight)
        found = solve(problem, inner, means.mean, 1 / np.sqrt(weight))
        cells = problem.cells(found)
        predicted[out] = cells[out]
        kept = ((means.mean - cells)[~out] ** 2 * means.weight[~out]).sum() / max((~out).sum() - len(found), 1)
        jacobian, inside = problem.jacobian(found)[out], covariance(problem, found, np.where(out, 0, means.weight))
        error[out] = np.sqrt(np.maximum(np.einsum("ij,jk,ik->i", jacobian, inside, jacobian), 0) * max(kept, 1e-30))
        left_over += kept / (fold.max() + 1)
    return Left(predicted=predicted, error=error, scatter=float(np.sqrt(left_over)), freedom=freedom)


def choose(start, means: CellMeans, asked, edge: str | None) -> Choice:
    """Compare the forms, or fit the one asked for.

    asked : keys of the parameters asked for, or None; edge : a form's name, or None to compare
    """
    widths = np.unique(start.cells.width_um)
    own = {"table": "1/W"}.get(start.record.edge.kind, start.record.edge.kind)
    names = [name for name, law in start.laws.items() if len(law.parameters) < len(widths) - 2 or name in ("none", own)]
    names = names if edge is None else list(dict.fromkeys(["none", edge]))
    if edge is None and len(widths) < 3:
        names = list(dict.fromkeys(["none", own]))
    forms = {name: fit_form(candidates(start, start.laws[name], asked), means, asked is not None) for name in names}
    if edge is not None:
        said = _judge(start, means, forms, edge) if len(widths) > 2 else None
        return Choice(name=edge, forms=forms, fits=said is None, said=(said,) if said else ())
    if len(widths) < 3:
        name = own if len(widths) == 2 else "none"
        said = f"{len(widths)} width{'s' * (len(widths) > 1)} only: forms of the edge cannot be compared; kept: {name}."
        return Choice(name=name, forms=forms, fits=True, said=(said,))
    best = min(forms, key=lambda name: forms[name].error)
    close = [name for name in forms if forms[name].error <= TIE * forms[best].error]
    close = [name for name in close if not _at_an_end(forms[name])] or close
    name = own if own in close or _keeps(forms[own], forms[best], forms["none"], means) else close[0]
    said = [
        "Error at widths left out: "
        + ", ".join(f"{each} {1e3 * form.error:.3g} mV" for each, form in forms.items())
        + "."
    ]
    against = _judge(start, means, forms, best if name == "none" else name)
    if against is not None and name != best and _judge(start, means, forms, best) is None:
        name, against = best, None
    if against is not None:
        return Choice(name="none", forms=forms, fits=False, said=(against, *said))
    if name == "none":
        said.insert(
            0, "No effect of the width is seen beyond the scatter: no form of the edge predicts better than a constant."
        )
    elif name != best:
        said.append(f"Kept: {name}, which predicts as well as {best} does.")
    return Choice(name=name, forms=forms, fits=True, said=tuple(said))


def _keeps(own: Form, best: Form, constant: Form, means: CellMeans) -> bool:
    """Whether the start's form is kept: what is known of the edge is given up only for a clearly better prediction."""
    if own.problem.law.name == "none":
        return False
    if own.error < GOOD * constant.error:
        within = means.pure is not None and not _chi(own, means, means.pure, len(means.mean) - len(own.inner))
        return within or own.error <= CLEAR * best.error
    if own.error > POOR * constant.error >= best.error:
        return False
    if _at_an_end(own):
        return own.error <= TIE * best.error
    return own.error < LUCK * best.error


def _at_an_end(form: Form) -> bool:
    """Whether a parameter of the edge stands at the end of its range."""
    low, high = form.problem.bounds
    near = np.minimum(form.inner - low, high - form.inner) < 1e-3 * (high - low)
    return any(end and parameter.key.startswith("edge.") for end, parameter in zip(near, form.problem.free))


def _judge(start, means: CellMeans, forms, name: str) -> str | None:
    """None when a form fits, or when the widths do not differ; else why not, in words."""
    cells, form, constant = start.cells, forms[name], forms["none"]
    levels, freedom, misfit_interaction = _width_levels(start, means, constant)
    spread = _rms(levels - levels.mean(), np.arange(len(levels)))
    expected = float(np.sqrt(np.mean(means.computed**2 / means.rows)))
    poor = form.error > POOR * constant.error
    scatter = means.pure
    if scatter is None or scatter[1] < 5:
        differs, strange = spread > FAR * expected, poor
        if freedom >= 4 and not poor:  # other lengths repeat the widths
            strange = _significant(form, start, misfit_interaction, freedom, means) and _matters(form, levels)
    else:
        differs = _chi(constant, means, scatter, len(np.unique(cells.width_um)) - 1)
        strange = _chi(form, means, scatter, len(cells) - len(form.inner)) and (poor or _matters(form, levels))
    if not (differs and strange):
        return None
    return (
        f"No form of the edge fits: {_shape_words(np.unique(cells.width_um), levels, misfit_interaction)}; the best, {name}, errs by "
        f"{1e3 * form.error:.3g} mV at widths left out, a constant by {1e3 * constant.error:.3g} mV, and scatter of single devices "
        f"explains {1e3 * expected:.2g} mV."
    )


def _matters(form, levels) -> bool:
    return form.misfit > SHARE_LEFT * np.ptp(levels) / 2


def _chi(form: Form, means: CellMeans, pure, freedom) -> bool:
    """Whether cells differ from a form by more than rows do from their cell (F test of lack of fit)."""
    left = (means.mean - form.problem.cells(form.inner)) ** 2 * means.rows / pure[0] ** 2
    return stats.f.sf(left.sum() / max(freedom, 1), max(freedom, 1), pure[1]) < SURE


def _significant(form, start, sigma, freedom, means) -> bool:
    left = (means.mean - form.problem.cells(form.inner)) ** 2
    own = max(len(left) - len(form.inner), 1)
    return sigma > 0 and stats.f.sf(left.sum() / own / sigma**2, own, freedom) < SURE


def _width_levels(start, means: CellMeans, constant: Form):
    """Mean of every width once the length and the conditions are taken off; sigma and freedom of what is left [V]."""
    cells = start.cells
    off = means.mean - constant.problem.cells(constant.inner)
    group = np.unique(cells.width_um, return_inverse=True)[1]
    other = np.unique(
        np.column_stack([cells.length_um, cells.body_bias_v, cells.temperature_c]), axis=0, return_inverse=True
    )[1]
    other = np.ravel(other)
    design = np.column_stack([np.eye(group.max() + 1)[group], np.eye(other.max() + 1)[other][:, 1:]])
    found = np.linalg.lstsq(design, off, rcond=None)[0]
    freedom = len(off) - np.linalg.matrix_rank(design)
    left = off - design @ found
    sigma = float(np.sqrt((left**2).sum() / freedom)) if freedom else 0.0
    levels = found[: group.max() + 1]
    return levels - levels.mean() + float(np.mean(means.mean)), freedom, sigma


def _shape_words(widths, levels, sigma) -> str:
    """How the mean thresholds run with width: its turns that are larger than their own error."""
    turns = _turns(levels, max(2 * sigma, 0.2 * np.ptp(levels)))
    if len(turns) < 3:
        way = "rise" if levels[-1] > levels[0] else "fall"
        return f"the thresholds {way} by {1e3 * abs(levels[-1] - levels[0]):.3g} mV from {widths[0]:g} to {widths[-1]:g} um, but as no form does"
    steps = [
        f"{'rise' if levels[end] > levels[begin] else 'fall'} by {1e3 * abs(levels[end] - levels[begin]):.3g} mV from "
        f"{widths[begin]:g} to {widths[end]:g} um"
        for begin, end in zip(turns, turns[1:])
    ]
    return "the data are not monotone in width: they " + ", ".join(steps)


def _turns(levels, least: float) -> list[int]:
    """Places of the ends and of the turning points whose rise and fall are `least` or more."""
    turns, way, extreme = [0], 0, 0
    for place in range(1, len(levels)):
        if way == 0:
            if abs(levels[place] - levels[turns[0]]) >= least:
                way, extreme = int(np.sign(levels[place] - levels[turns[0]])), place
        elif way * (levels[place] - levels[extreme]) > 0:
            extreme = place
        elif way * (levels[extreme] - levels[place]) >= least:
            turns.append(extreme)
            way, extreme = -way, place
    return [*turns, len(levels) - 1] if len(turns) > 1 else [0, len(levels) - 1]
