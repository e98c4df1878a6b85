"""The forms of the edge that a fit compares, each with its parameters, its factor on the bulk charge and its keys in a file.

Two of them have no kind of their own in a process file and are written as a table, which is monotone between its points:
a 1/W law of either sign, and edge transistors. An edge transistor is the strip beside the isolation where the gate wraps
the corner: its threshold is lower, so it conducts beside the channel. With a constant-current criterion in weak inversion
currents add, and the threshold falls by (n kT/q) ln(1 + w/W); w is the strips' width times exp of their lead in threshold
over n kT/q (own derivation). A hump is both together: the one lowers, the other raises, and the curve may turn once.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from physics.edges import FieldOxide, NoEdge, Trench, fringe_factor
from studies.units import SUFFIXES, micrometres

NODES_PER_DECADE, REACH = 16, 100.0  # of a written table, and how far beyond the widest device it goes
NARROWER = 0.5  # of the narrowest device: where a written table starts


@dataclass(frozen=True, kw_only=True)
class Parameter:
    """One number to be fitted.

    key : its key in the process file, below the device; or a name of our own for a table's
    start : where the search begins; low, high : where it ends
    log : whether it is searched by its logarithm
    tolerance : error beyond which the data are said not to know it; relative for a logarithm
    """

    key: str
    start: float
    low: float
    high: float
    log: bool = False
    tolerance: float = np.inf

    def inner(self, value):
        """The number that is searched for."""
        return np.log(value) if self.log else value

    def outer(self, value):
        """The file's number for what was searched."""
        return np.exp(value) if self.log else value


@dataclass(frozen=True, kw_only=True)
class Strip(Parameter):
    """The w of edge transistors, searched by what the data see of it: the logarithm's rise between two widths.

    narrow, wide : narrowest and widest electrical width [um]
    """

    narrow: float
    wide: float

    def inner(self, value):
        """ln of the ratio of (1 + w/W) at the two widths: at most ln(wide/narrow), which w far above both comes near to."""
        return np.log1p(value / self.narrow) - np.log1p(value / self.wide)

    def outer(self, value):
        """The w of a rise."""
        return np.expm1(value) / (1 / self.narrow - np.exp(value) / self.wide)


@dataclass(frozen=True, kw_only=True)
class InverseWidth:
    """A factor 1 + c/W. length : c, of either sign [m]"""

    length: float

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk charge [1]. Source: `physics.edges.fringe_factor` with c for the product."""
        return fringe_factor(self.length, width, 1.0)


@dataclass(frozen=True, kw_only=True)
class EdgeTransistor:
    """Edge transistors beside a channel, and a 1/W law.

    ratio : n kT/q over the bulk charge's voltage drop [1]; strip : w, see above [m]; length : c of the 1/W law [m]
    """

    ratio: float
    strip: float
    length: float = 0.0

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk charge [1]."""
        return 1 - self.ratio * np.log1p(self.strip / width) + self.length / width


@dataclass(frozen=True, kw_only=True)
class EdgeLaw:
    """One form of the edge.

    name : as a person calls it; parameters : what is fitted
    edge : function of the parameters' values that gives the physics' edge
    keys : function of the values and of a table's electrical widths [um] that gives the process file's table
    """

    name: str
    parameters: tuple[Parameter, ...]
    edge: Callable
    keys: Callable


def edge_laws(start, ratio: float, narrowest: float, widest: float, oxide_nm: float) -> dict[str, EdgeLaw]:
    """The forms by name, simplest first.

    start : the start's edge record; ratio : see `EdgeTransistor`; narrowest, widest : electrical widths measured [m]
    oxide_nm : gate oxide
    """
    least, most = micrometres(narrowest), micrometres(widest)
    shape = start.shape if start.kind == "field oxide" and start.shape else 0.3
    trench = start.field_oxide_nm if start.kind == "trench" else max(300.0, 3 * oxide_nm)
    inverse = Parameter(
        key="edge.inverse_width_um", start=0.0, low=-0.4 * least, high=5 * least + 1, tolerance=least
    )  # at its lower end the factor of a written table's narrowest width is still positive, as at the strip's upper end
    widest_strip = NARROWER * least * np.expm1(min(0.9 / ratio, 50.0))
    strip = Strip(
        key="edge.transistor_um", start=least, low=1e-3 * least, high=min(30 * most, widest_strip),
        narrow=least, wide=max(most, 1.001 * least),
    )  # fmt: skip
    laws = [
        EdgeLaw(name="none", parameters=(), edge=lambda: NoEdge(), keys=lambda widths: {"kind": "none"}),
        EdgeLaw(
            name="field oxide",
            parameters=(
                Parameter(key="edge.shape", start=min(max(shape, 1e-3), 3.9), low=1e-4, high=4.0, tolerance=1.5),
            ),
            edge=lambda shape: FieldOxide(shape=shape),
            keys=lambda widths, shape: {"kind": "field oxide", "shape": shape},
        ),
        EdgeLaw(
            name="trench",
            parameters=(
                Parameter(
                    key="edge.field_oxide_nm", start=trench, low=1.02 * oxide_nm, high=2000.0, log=True, tolerance=2.5
                ),
            ),
            edge=lambda thickness: Trench(field_oxide_thickness=thickness * SUFFIXES["nm"]),
            keys=lambda widths, thickness: {"kind": "trench", "field_oxide_nm": thickness},
        ),
        _tabled("1/W", (inverse,), lambda length: InverseWidth(length=length * SUFFIXES["um"])),
        _tabled("edge transistor", (strip,), lambda strip: EdgeTransistor(ratio=ratio, strip=strip * SUFFIXES["um"])),
        _tabled(
            "hump",
            (strip, replace(inverse, low=0.0, start=0.1 * least)),
            lambda strip, length: EdgeTransistor(
                ratio=ratio, strip=strip * SUFFIXES["um"], length=length * SUFFIXES["um"]
            ),
        ),
    ]
    return {law.name: law for law in laws}


def _tabled(name, parameters, edge) -> EdgeLaw:
    def keys(widths_um, *values):
        factors = edge(*values).charge_factor(None, np.asarray(widths_um) * SUFFIXES["um"], None)
        return {
            "kind": "table",
            "table_width_um": [float(f"{width:.9g}") for width in widths_um],
            "table_factor": [float(f"{factor:.9g}") for factor in factors],
        }

    return EdgeLaw(name=name, parameters=parameters, edge=edge, keys=keys)


def table_widths(narrowest: float, widest: float) -> np.ndarray:
    """Electrical widths [um] of a written table."""
    first, last = NARROWER * micrometres(narrowest), REACH * micrometres(widest)
    return np.geomspace(first, last, int(NODES_PER_DECADE * np.log10(last / first)) + 2)
