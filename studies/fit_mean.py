"""The mean threshold fitted: bounded robust least squares on rows, quick least squares on cells, and what cannot be told apart.

Residuals are scaled by the sigma of what is measured. The soft loss is 2(sqrt(1 + z^2) - 1), the smooth relative of
P. J. Huber's, Ann. Math. Stat. 35, 73 (1964) (from memory): a row z sigmas off pulls with weight 1/sqrt(1 + (z/SOFT)^2).
"""

from dataclasses import dataclass, field

import numpy as np
from scipy.optimize import least_squares

from physics.constants import OXIDE_PERMITTIVITY
from studies.errors import InputError, nearest
from studies.fit_laws import EdgeLaw, Parameter
from studies.fit_model import REFUSED, Start
from studies.fit_read import LARGEST_V
from studies.units import SUFFIXES, si

SOFT = 2.0  # sigmas at which a residual's pull begins to flatten
STEP = 1e-4  # of a parameter's range, or of one in a logarithm: for central differences
INSEPARABLE = 1e4  # variance inflation beyond which parameters are one and the same (multiple correlation 0.99995)
SPARE_WIDTHS = 4  # more widths than parameters of the edge from which on a width bias is fitted too
ASKED_FOR = 4.0  # times its tolerance may a parameter's error be that a person asked for
FLAT_BAND = ("oxide_charge_per_cm2", "gate_work_function_ev")


@dataclass(frozen=True, kw_only=True)
class Problem:
    """Which form of the edge, and which parameters are free.

    start, law : the start and the edge's form; free : what is fitted; held : values of the law's other parameters
    """

    start: Start
    law: EdgeLaw
    free: tuple[Parameter, ...]
    held: dict[str, float] = field(default_factory=dict)

    @property
    def levelled(self) -> bool:
        """Whether the flat band is free: what is searched is then the mean of the cells [V], so that it stands apart."""
        return bool(self.free) and self.free[0].key in FLAT_BAND

    def _shape(self, inner) -> tuple[dict[str, float], np.ndarray]:
        """Numbers by key with the flat band where it starts, and the cells' thresholds with them."""
        pairs = list(zip(self.free, inner))[1 if self.levelled else 0 :]
        values = self.held | {parameter.key: float(parameter.outer(value)) for parameter, value in pairs}
        return values, self.start.thresholds(self.law, values)

    def values(self, inner) -> dict[str, float]:
        """The file's numbers by key for what is searched."""
        values, cells = self._shape(inner)
        if not self.levelled:
            return values
        flat = self.free[0]
        return {flat.key: float(flat.start + (inner[0] - cells.mean()) / self._per_unit())} | values

    def _per_unit(self) -> float:
        """Rise of every threshold by one unit of the flat band's parameter [V]."""
        if self.free[0].key == "gate_work_function_ev":
            return self.start.polarity
        capacitance = OXIDE_PERMITTIVITY / si(self.start.record, "oxide_thickness_nm")
        return -self.start.polarity * SUFFIXES["per_cm2"] / capacitance

    def cells(self, inner) -> np.ndarray:
        """Mean threshold of every cell [V]."""
        cells = self._shape(inner)[1]
        return cells if not self.levelled or cells[0] == REFUSED else cells - cells.mean() + inner[0]

    @property
    def bounds(self) -> tuple[np.ndarray, np.ndarray]:
        """Ends of the search."""
        ends = [[parameter.inner(end) for end in (parameter.low, parameter.high)] for parameter in self.free]
        if self.levelled:
            ends[0] = [-LARGEST_V, LARGEST_V]
        low, high = np.array(ends, float).reshape(-1, 2).T
        return low, high

    def begin(self) -> np.ndarray:
        """Where the search begins."""
        low, high = self.bounds
        inner = np.array([parameter.inner(parameter.start) for parameter in self.free], float)
        if self.levelled:
            inner[0] = self._shape(inner)[1].mean()
        return np.clip(inner, low + 1e-6 * (high - low), high - 1e-6 * (high - low))

    def jacobian(self, inner) -> np.ndarray:
        """Derivatives of the cells' thresholds by what is searched, shape (cells, free), by central differences."""
        low, high = self.bounds
        columns = []
        for place, parameter in enumerate(self.free):
            step = STEP if parameter.log else STEP * (high[place] - low[place])
            ends = np.array(inner, float), np.array(inner, float)
            ends[0][place], ends[1][place] = max(inner[place] - step, low[place]), min(inner[place] + step, high[place])
            columns.append((self.cells(ends[1]) - self.cells(ends[0])) / (ends[1][place] - ends[0][place]))
        return np.column_stack(columns) if columns else np.zeros((len(self.start.cells), 0))

    def without(self, key: str, value: float | None = None) -> "Problem":
        """The same with one parameter held."""
        parameter = next(each for each in self.free if each.key == key)
        held = self.held | {key: parameter.start if value is None else value}
        return Problem(start=self.start, law=self.law, free=tuple(p for p in self.free if p.key != key), held=held)


def solve(problem: Problem, begin, target, sigma, of_row=None) -> np.ndarray:
    """What the rows, or the cells, say by robust least squares (scipy's bounded trust region).

    target : thresholds [V]; sigma : of each [V]; of_row : cell of every entry; None: the entries are the cells
    """
    if not problem.free:
        return np.zeros(0)
    place = slice(None) if of_row is None else of_row
    low, high = problem.bounds
    found = least_squares(
        lambda inner: (problem.cells(inner)[place] - target) / sigma,
        np.clip(begin, low + 1e-9 * (high - low), high - 1e-9 * (high - low)),
        jac=lambda inner: problem.jacobian(inner)[place] / np.reshape(sigma, (-1, 1)),
        bounds=(low, high),
        loss="soft_l1",
        f_scale=SOFT,
        x_scale=np.maximum(0.02 * (high - low), 1e-12),
        ftol=1e-9,
        xtol=1e-9,
    )
    return found.x


def nearby(problem: Problem, inner, target, weight, steps: int = 4) -> np.ndarray:
    """Least squares on cells from a solution close by: Gauss-Newton, kept within the bounds.

    target : of the cells [V]; weight : of the cells, 0 for one without rows
    """
    low, high = problem.bounds
    inner, root = np.array(inner, float), np.sqrt(weight)
    for _ in range(steps):
        left = (target - problem.cells(inner)) * root
        jacobian = problem.jacobian(inner) * root[:, None]
        norms = np.maximum(np.linalg.norm(jacobian, axis=0), 1e-300)
        move = np.linalg.lstsq(jacobian / norms, left, rcond=1e-10)[0] / norms
        after = np.clip(inner + move, low, high)
        if np.all(np.abs(after - inner) <= 1e-7 * (high - low)):
            return after
        inner = after
    return inner


def row_weights(residual, sigma) -> np.ndarray:
    """Weight of every row in the fit [1]."""
    return 1 / np.sqrt(1 + (residual / sigma / SOFT) ** 2)


def candidates(start: Start, law: EdgeLaw, asked: tuple[str, ...] | None) -> Problem:
    """The parameters to begin with: those asked for, or those that the design of the measurements could tell.

    Raises InputError for one that the start does not have.
    """
    cells = start.cells
    known = start.parameters | {parameter.key: parameter for parameter in law.parameters}
    if asked is not None:
        unknown = [key for key in asked if key not in known and not key.startswith("edge.")]
        if unknown:
            raise InputError(f"--parameters {unknown[0]}: cannot be fitted here; {nearest(unknown[0], known)}")
        edge = [parameter for parameter in law.parameters]  # an edge compared with others is fitted whole
        free = [known[key] for key in known if key in asked and key not in {p.key for p in edge}]
    else:
        widths, lengths, biases = (len(np.unique(v)) for v in (cells.width_um, cells.length_um, cells.body_bias_v))
        wanted = ["oxide_charge_per_cm2"]
        wanted += ["short_channel.eta", "junction_depth_nm"] * (lengths > 1)
        wanted += ["width_bias_nm"] * bool(widths >= len(law.parameters) + SPARE_WIDTHS and law.name != "none")
        wanted += ["doping_per_cm3"] * bool(biases > 1 and np.ptp(cells.body_bias_v) > 0.3)
        wanted += ["length_bias_nm"] * (lengths > 3)
        edge = list(law.parameters) if widths > 1 else []
        free = [known[key] for key in wanted if key in known]
    first = [parameter for parameter in free if parameter.key in FLAT_BAND]
    rest = [parameter for parameter in free if parameter.key not in FLAT_BAND]
    held = {parameter.key: parameter.start for parameter in law.parameters if parameter not in edge}
    return Problem(start=start, law=law, free=tuple(first + edge + rest), held=held)


def covariance(problem: Problem, inner, weight) -> np.ndarray:
    """Covariance of what is searched when every unit of weight has variance one."""
    jacobian = problem.jacobian(inner) * np.sqrt(np.reshape(weight, (-1, 1)))
    norms = np.maximum(np.linalg.norm(jacobian, axis=0), 1e-300)
    scaled = jacobian / norms  # an oxide charge and a logarithm differ by twelve orders of magnitude
    return np.linalg.pinv(scaled.T @ scaled, hermitian=True, rcond=1e-14) / np.outer(norms, norms)


def separable(problem: Problem, inner, weight, asked: bool) -> tuple[Problem, np.ndarray, list[str]]:
    """Hold what the data cannot tell, the last one first; returns the smaller problem, where it stands, and notes.

    weight : of the cells, rows over variance; asked : whether the person chose the parameters
    """
    notes = []
    while len(problem.free) > 0:
        jacobian = problem.jacobian(inner) * np.sqrt(np.reshape(weight, (-1, 1)))
        norms = np.linalg.norm(jacobian, axis=0)
        low, high = problem.bounds
        reach = np.array([1.0 if p.log else end - begin for p, begin, end in zip(problem.free, low, high)])
        blind = norms * reach < 1e-3  # a move across the whole range changes nothing
        if blind.any():
            place, said = int(np.flatnonzero(blind)[-1]), "nothing measured depends on it"
        else:
            scaled = jacobian / norms
            inverse = np.linalg.pinv(scaled.T @ scaled, hermitian=True, rcond=1e-13)
            deficient = np.linalg.matrix_rank(scaled, tol=1e-6) < len(norms)
            inflation = np.full(len(norms), np.inf) if deficient else np.diag(inverse)
            errors = np.sqrt(np.diag(inverse)) / norms
            spare = np.array([p.tolerance * (ASKED_FOR if asked else 1) for p in problem.free])
            twins = np.abs(inverse / np.sqrt(np.outer(np.diag(inverse), np.diag(inverse))))
            np.fill_diagonal(twins, 0)
            unsure = (inflation > INSEPARABLE) | (errors > spare)
            if deficient:  # the last one that the null space contains
                null = np.abs(np.linalg.svd(scaled)[2][-1])
                unsure = null > 0.05
            if not unsure.any() or (not deficient and unsure[0] and not unsure[1:].any() and len(norms) == 1):
                break
            place = int(np.flatnonzero(unsure)[-1])
            partner = int(np.argmax(twins[place])) if len(norms) > 1 else place
            if deficient:
                null[place] = 0
                partner, twin = int(np.argmax(null)), 1.0
            else:
                twin = twins[place, partner]
            parameter, error = problem.free[place], errors[place]
            if (deficient or twin > 0.9) and partner != place:
                said = f"the data cannot separate it from {problem.free[partner].key} (correlation {twin:.4g})"
            else:
                size = f"a factor {np.exp(min(error, 50)):.3g}" if parameter.log else f"{error:.3g}"
                said = f"the data know it to {size} only"
        parameter = problem.free[place]
        notes.append(f"{parameter.key} kept at {parameter.start:g}: {said}.")
        problem, inner = problem.without(parameter.key), np.delete(inner, place)
    return problem, inner, notes
