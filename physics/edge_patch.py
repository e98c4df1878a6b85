"""The quick stand-in for a surface of solved edges around one width: seventeen terms, a few dozen array passes.

Monte Carlo asks for the factor of millions of devices of one nominal width. Around it the surface of
`physics.edge_surface` is smooth enough for a short polynomial in the relative deviations of x_d/W, of x_d and of the
oxide thickness. Devices outside the patch are given to the surface itself.
"""

from dataclasses import dataclass
from itertools import product
from math import comb
from typing import Any

import numpy as np

from physics.edge_surface import SolvedEdge, chebyshev, relative_error

REACH = 0.3  # relative deviation of x_d/W that a patch covers
_DEPLETION, _OXIDE = 0.1, 0.13  # deviations of x_d and oxide to which it is fitted; beyond, its parabolas go on
_POWERS = (  # of the three deviations, term by term
    *((power, 0, 0) for power in range(6)),
    *((power, 1, 0) for power in range(3)),
    *((power, 0, 1) for power in range(3)),
    *((0, 2, 0), (1, 2, 0), (0, 1, 1), (1, 1, 1), (0, 0, 2)),
)
_PARTS = slice(0, 6), slice(6, 9), slice(9, 12), slice(12, 17)


def _horner(terms, place):
    """Polynomial by Horner's rule, in place after the first step."""
    total = terms[-1] * place
    total += terms[-2]
    for term in terms[-3::-1]:
        total *= place
        total += term
    return total


@dataclass(frozen=True, kw_only=True, eq=False)
class EdgePatch:
    """A surface of solved edges around one width of its nominal device.

    surface : see `physics.edge_surface.SolvedEdge`
    inverse_width : nominal depletion width over the width [1]
    terms : coefficients of the powers of x_d/W, of x_d in metres and of the oxide thickness in metres, an array [1]
    error : largest relative error against the surface at the points of the fit [1]
    """

    surface: Any
    inverse_width: float
    terms: np.ndarray
    error: float

    @property
    def smallest_width(self):
        """The surface's own [m]."""
        return self.surface.smallest_width

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge.

        depletion_width : depletion width under the gate [m]
        width : effective channel width [m]
        oxide_thickness : gate oxide [m]
        Returns factor [1]. Source: fit to `physics.edge_surface.SolvedEdge.charge_factor`, and itself beyond the patch.
        """
        sizes = depletion_width, width, oxide_thickness
        if np.ndim(depletion_width) == np.ndim(width) == np.ndim(oxide_thickness) == 0:
            return self.surface.charge_factor(*sizes)
        if not np.shape(depletion_width) == np.shape(width) == np.shape(oxide_thickness):
            sizes = np.broadcast_arrays(*sizes)  # all that follows can then be done in place
        factor = sizes[0] / sizes[1]
        if np.max(factor) > self._largest or np.min(factor) < self._smallest:
            return self._partly(factor, *sizes)
        factor *= self._charge(factor, sizes[0], sizes[2])
        factor += 1
        return factor

    @property
    def _largest(self):
        return (1 + REACH) * self.inverse_width

    @property
    def _smallest(self):
        return (1 - REACH) * self.inverse_width

    def _charge(self, inverse_width, depletion_width, oxide_thickness):
        """g of x_d/W and of the two thicknesses, all of one shape."""
        alone, with_depletion, with_oxide, rest = (self.terms[part] for part in _PARTS)
        twice, twice_inverse, mixed, mixed_inverse, twice_oxide = rest
        charge = _horner(alone, inverse_width)
        gathered = _horner(with_depletion, inverse_width)
        gathered += _linear(twice, twice_inverse, inverse_width, depletion_width)
        gathered *= depletion_width
        charge += gathered
        gathered = _horner(with_oxide, inverse_width)
        gathered += _linear(mixed, mixed_inverse, inverse_width, depletion_width)
        gathered += twice_oxide * oxide_thickness
        gathered *= oxide_thickness
        charge += gathered
        return charge

    def _partly(self, inverse_width, depletion_width, width, oxide_thickness):
        """As charge_factor, where some devices lie beyond the patch."""
        inside = np.clip(inverse_width, self._smallest, self._largest)
        factor = 1 + inverse_width * self._charge(inside, depletion_width, oxide_thickness)
        beyond = inside != inverse_width
        factor[beyond] = self.surface.charge_factor(depletion_width[beyond], width[beyond], oxide_thickness[beyond])
        return factor


def _linear(constant, slope, place, factor):
    """(constant + slope place) factor, with one new array."""
    total = slope * place
    total += constant
    total *= factor
    return total


def _of_values(terms, nominal):
    """Coefficients of powers of values, from those of their relative deviations from nominal ones.

    The powers with a term are closed downwards, so the same powers have one again.
    """
    tensor = np.zeros((6, 3, 3))
    tensor[tuple(np.transpose(_POWERS))] = terms
    for axis, value in enumerate(nominal):
        orders = range(tensor.shape[axis])
        shifted = [[comb(high, low) * (-1.0) ** (high - low) / value**low for high in orders] for low in orders]
        tensor = np.moveaxis(np.einsum("ij,j...->i...", shifted, np.moveaxis(tensor, axis, 0)), 0, axis)
    return tensor[tuple(np.transpose(_POWERS))]


def edge_patch(surface: SolvedEdge, width):
    """The surface around one width.

    surface : see `physics.edge_surface.SolvedEdge`
    width : nominal width [m]
    Returns EdgePatch.
    Source: least squares of relative residuals on a grid of Chebyshev nodes, exact at the nominal device.
    """
    nominal = surface.depletion_width / width
    grid = product(REACH * chebyshev(9), _DEPLETION * chebyshev(5), _OXIDE * chebyshev(5))
    place, depletion, oxide = np.array([(0.0, 0.0, 0.0), *grid]).T
    charge = surface.edge_charge(nominal * (1 + place), depletion, oxide)
    powers = [place**i * depletion**j * oxide**k for i, j, k in _POWERS]
    largest = np.maximum(np.abs(charge), 0.05 * np.abs(charge).max())
    weight = 1 / largest
    weight[0] *= 1000.0  # the nominal device
    terms = np.linalg.lstsq(np.stack(powers, 1) * weight[:, None], charge * weight, rcond=None)[0]
    terms = np.round(terms, 11)  # so that the bits do not depend on the threads of a linear solver
    values = float(nominal), surface.depletion_width, surface.oxide_thickness
    return EdgePatch(
        surface=surface,
        inverse_width=float(nominal),
        terms=_of_values(terms, values),
        error=relative_error(np.stack(powers, 1) @ terms, charge),
    )
