"""The two edges along the channel's width: a factor on the bulk depletion charge.

Every edge has one method, `charge_factor(depletion_width, width, oxide_thickness)`, so that a threshold never asks
which kind it has.
"""

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import PchipInterpolator


def fringe_factor(depletion_width, width, shape=np.pi / 2):
    """Charge-sharing factor of a channel between raised field oxides.

    depletion_width : maximum depletion width under the gate [m]
    width : effective channel width [m], > 0
    shape : fringe area of BOTH edges over depletion_width**2 [1]; pi/2 two quarter circles, 1 two triangles, 2 two squares
    Returns the factor on the bulk depletion charge [1], >= 1.
    Range: an upper bound. For a flat surface with an abrupt step to thick oxide and no field implant a field solution
    gives a tenth to a fifth of the quarter-circle shift.
    Source: Neamen, 4th ed., eq. 11.28 (his xi).
    """
    return 1 + shape * depletion_width / width


def trench_length(oxide_thickness, field_oxide_thickness):
    """Width at which trench edges carry as much charge as the channel, F = 2 C_F/C_ox for both edges.

    oxide_thickness : gate oxide [m]
    field_oxide_thickness : trench oxide between gate and silicon [m], > oxide_thickness/2
    Returns length [m].
    Source: L. A. Akers, IEEE Electron Device Lett. 7, 419 (1986), fringing capacitance of a plate over a wall; the 2
    stays inside the logarithm. Held to a field solution within 10 to 20 %.
    """
    return 4 * oxide_thickness / np.pi * np.log(2 * field_oxide_thickness / oxide_thickness)


def trench_factor(width, trench_length):
    """Factor of a channel between trenches: the gate's sides help to deplete it.

    width : effective channel width [m], > 0
    trench_length : see `trench_length` [m]
    Returns the factor on the bulk depletion charge [1], between 0 and 1.
    Source: Akers 1986, as above.
    """
    return width / (width + trench_length)


@dataclass(frozen=True, kw_only=True)
class NoEdge:
    """A channel whose edges do not count: the wide-channel formula."""

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge [1], exactly one. Arguments as in `FieldOxide.charge_factor`."""
        return 1.0


@dataclass(frozen=True, kw_only=True)
class FieldOxide:
    """Grown field oxide on both sides.

    shape : fringe area of both edges over the squared depletion width [1]
    """

    shape: float = np.pi / 2

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge.

        depletion_width : depletion width under the gate [m]
        width : effective channel width [m]
        oxide_thickness : gate oxide [m] (not used by this edge)
        Returns factor [1]. Source: `fringe_factor`.
        """
        return fringe_factor(depletion_width, width, self.shape)


@dataclass(frozen=True, kw_only=True)
class Trench:
    """Trench isolation on both sides.

    field_oxide_thickness : trench oxide [m]
    """

    field_oxide_thickness: float

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge. Arguments as in `FieldOxide.charge_factor`.

        Returns factor [1]. Source: `trench_factor`.
        """
        return trench_factor(width, trench_length(oxide_thickness, self.field_oxide_thickness))


class TabulatedEdge:
    """Measured or computed factors against width, monotone between the points (Fritsch-Carlson, scipy's PCHIP).

    width : widths of the table [m], at least two, increasing
    factor : factors on the bulk depletion charge [1], > 0
    The table is interpolated in 1/width with the wide limit (0, 1) added, so it is exact for a 1/W law. Below the first
    width it keeps the last slope: a study refuses nominal widths there, random samples may stray a little.
    Raises ValueError for widths that do not increase, and for widths or factors that are not positive numbers.
    """

    def __init__(self, *, width, factor):
        width = np.asarray(width, float)
        if width.size < 2 or np.any(np.diff(width) <= 0):
            raise ValueError("the widths of an edge table must increase, and be two or more")
        self.smallest_width = float(width[0])
        factor = np.asarray(factor, float)
        if not (np.all(width > 0) and np.all(factor > 0) and np.all(np.isfinite(factor))):
            raise ValueError("the widths and factors of an edge table must be positive numbers")
        inverse = np.concatenate([[0.0], 1 / width[::-1]])
        values = np.concatenate([[1.0], factor[::-1]])
        self._factor = PchipInterpolator(inverse, values, extrapolate=False)
        self._last = (inverse[-1], values[-1], float(self._factor.derivative()(inverse[-1])))

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge at `width` [m]. Arguments as in `FieldOxide.charge_factor`.

        Returns factor [1].
        """
        inverse = 1 / np.asarray(width)
        edge, value, slope = self._last
        return np.where(inverse > edge, value + slope * (inverse - edge), self._factor(np.minimum(inverse, edge)))


Edge = NoEdge | FieldOxide | Trench | TabulatedEdge
