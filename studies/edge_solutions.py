"""Numbers from solved cross-sections, each solved once: in parallel, and kept in the machine's cache.

They are a pure function of the sections. Where they are computed is the caller's `joblib.parallel_config`.
"""

from dataclasses import dataclass, replace
from functools import cache, lru_cache
from hashlib import sha256
from importlib.resources import files

import numpy as np
from joblib import Parallel, delayed

from physics.cross_section import SectionThreshold, solve_threshold
from physics.cross_section_dopants import DopantScatter, dopant_scatter, dopant_weights
from physics.dopants import dopant_sigma, weighted_count
from physics.section_geometry import Section
from physics.section_lines import section_scales
from physics.threshold import oxide_capacitance
from studies import __version__
from studies.cache import cache_folder, keep, kept
from studies.errors import InputError, one_line

ANY_LENGTH = 1e-6  # [m]; ratios do not depend on it
DIGITS = (
    9  # kept of each number, less than a solution has, so that its last bits, which threads may change, do not show
)
NAMES = ("shift", "charge_factor", "sigma_ratio", "skewness_ratio")
LOT = 16  # widths solved between two reports of progress
MODULES = (  # of the physics, that the numbers depend on
    *("constants", "silicon", "profile", "dopants", "threshold", "section_geometry", "section_lines", "section_mesh"),
    *("section_poisson", "cross_section", "cross_section_dopants"),
)
FEWEST_TO_SHARE = 8  # sections below which workers cost more than they save


@dataclass(frozen=True, kw_only=True, eq=False)
class Solutions:
    """Numbers of several sections, arrays.

    shift : of the threshold by the edges, of an n-channel [V]
    charge_factor : factor on the bulk depletion charge that gives the shift [1]
    sigma_ratio : sigma of the dopant scatter over `physics.dopants.dopant_sigma` [1]
    skewness_ratio : its skewness over that of the dopants under the channel with weights 1 - x/x_d [1]
    notes : what went wrong with the cache, in words
    """

    shift: np.ndarray
    charge_factor: np.ndarray
    sigma_ratio: np.ndarray
    skewness_ratio: np.ndarray
    notes: tuple[str, ...]


def closed_scatter(section: Section, length: float) -> tuple[float, float]:
    """Sigma [V] and skewness [1] of the dopant scatter of a section by closed form."""
    place = section.profile, section_scales(section).depletion_width, section.width, length
    second, third = (weighted_count(*place, power) for power in (2, 3))
    sigma = dopant_sigma(*place, oxide_capacitance(section.oxide_thickness))
    return float(sigma), float(third / second**1.5)


def scatter_of(solved: SectionThreshold) -> DopantScatter:
    """Dopant scatter of a solved section, ANY_LENGTH long."""
    return dopant_scatter(solved, dopant_weights(solved), ANY_LENGTH)


def _numbers(section: Section, refinement: float) -> tuple[float, ...]:
    solved = solve_threshold(section, refinement)
    scatter, (sigma, skewness) = scatter_of(solved), closed_scatter(section, ANY_LENGTH)
    return solved.shift, solved.charge_factor, scatter.sigma / sigma, scatter.skewness / skewness


@cache
def _physics() -> bytes:
    """Digest of the physics' own text: a solver that was changed must not meet the numbers of the old one."""
    folder = files("physics")
    return sha256(b"".join((folder / f"{name}.py").read_bytes() for name in MODULES)).digest()


def key_of(sections: tuple[Section, ...], refinement: float) -> str:
    """Name under which the numbers are kept: all that they depend on."""
    # a frozen record's repr has every field, floats to their last bit
    content = repr((__version__, DIGITS, float(refinement), sections)).encode()
    return "edge_" + sha256(_physics() + content).hexdigest()[:40]


@lru_cache(maxsize=256)
def solutions(sections: tuple[Section, ...], refinement: float = 1.0) -> Solutions:
    """Solved numbers of sections, from the cache where they are known.

    refinement : lines of the mesh are this many times denser
    Raises InputError for a section without a solution.
    """
    key, notes = key_of(sections, refinement), []
    numbers, damaged = kept(key, (len(sections), len(NAMES)))
    if numbers is None:
        numbers = _rounded(_solved(sections, refinement))
        trouble = keep(key, numbers)
        if damaged:
            notes.append("A damaged file in the cache of solved edges was noticed; its numbers were computed anew.")
        if trouble:
            notes.append(
                f"The cache of solved edges, {one_line(cache_folder() or 'in the home folder')}, cannot be written "
                f"({one_line(trouble)}): they are solved anew in each run. WIDTHWISE_CACHE names another folder."
            )
    return Solutions(**dict(zip(NAMES, numbers.T)), notes=tuple(notes))


def solved_widths(section: Section, widths, refinement: float = 1.0, progress=lambda done, total: None) -> Solutions:
    """Solved numbers of a section at several widths [m], some at a time so that progress can be told."""
    parts, starts = [], range(0, len(widths), LOT)
    for start in starts:
        progress(start, len(widths))
        lot = tuple(replace(section, width=float(width)) for width in widths[start : start + LOT])
        parts.append(solutions(lot, refinement))
    progress(len(widths), len(widths))
    return Solutions(
        **{name: np.concatenate([getattr(part, name) for part in parts]) for name in NAMES},
        notes=tuple(dict.fromkeys(note for part in parts for note in part.notes)),
    )


def _solved(sections, refinement: float) -> np.ndarray:
    parallel = Parallel(n_jobs=None if len(sections) >= FEWEST_TO_SHARE else 1)
    try:
        numbers = np.array(parallel(delayed(_numbers)(section, refinement) for section in sections))
    except (ValueError, RuntimeError, FloatingPointError) as error:
        raise InputError(f"the edge's cross-section has no solution: {one_line(error)}") from None
    if not np.all(np.isfinite(numbers)):
        raise InputError("the edge's cross-section has no solution: some of its numbers are not finite")
    return numbers


def _rounded(numbers: np.ndarray) -> np.ndarray:
    """Numbers to DIGITS significant digits."""
    scale = 10.0 ** (DIGITS - 1 - np.floor(np.log10(np.maximum(np.abs(numbers), 1e-30))))
    return np.round(numbers * scale) / scale
