"""A channel's edges from solved cross-sections: a smooth surface through them.

The edges' charge is counted in squared depletion widths, g = (F_w - 1) W/x_d, as the shape of `physics.edges.fringe_factor`
is. It tends to a constant for wide channels, whose edges do not see each other. The surface is a polynomial in the share
s = y/(y + 1/2) with y = x_d/W, which is 0 for infinite width, and of second order in each of the relative deviations of
x_d and of the oxide thickness from the nominal device. Body bias and temperature are those of the nominal device.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial.polynomial import polyder, polyval, polyvander

from physics.section_geometry import Section
from physics.section_lines import section_scales

NARROWEST = 0.3  # width in depletion widths at which the surface begins
REACH = 0.3  # relative deviations of doping and oxide thickness that it covers
WIDTHS = 11  # widths solved for each doping and oxide thickness
STRAYED = ((0.8, 1.2), (1.2, 0.9), (0.9, 0.8), (1.25, 1.25), (1.1, 1.0))  # doping and oxide to test it with
TESTED = max(abs(factor - 1) for pair in STRAYED for factor in pair)  # how far that is off nominal
_HALF = 0.5  # y at which s is one half
_LEAST = 0.05  # of the largest charge: below it errors are relative to this, since a charge may cross zero


def _share(inverse_width):
    """s of y = x_d/W."""
    return inverse_width / (inverse_width + _HALF)


_LARGEST_SHARE = _share(1 / NARROWEST)


def _on_scale(share):
    """s stretched to -1..1."""
    return share * (2 / _LARGEST_SHARE) - 1


def chebyshev(count):
    """Chebyshev nodes between -1 and 1, where a polynomial through a smooth function errs little everywhere.

    count : number of nodes [1]
    Returns nodes, decreasing; the middle one is exactly 0 [1].
    Source: roots of the Chebyshev polynomial.
    """
    nodes = np.cos(np.pi * (np.arange(count) + 0.5) / count)
    return (nodes - nodes[::-1]) / 2


def _placed(section: Section, scale, doping_factor, thickness_factor):
    """The section at a place of the surface: doping and oxide scaled, its width chosen to give s."""
    varied = replace(
        section,
        profile=section.profile.scaled(float(doping_factor)),
        oxide_thickness=float(section.oxide_thickness * thickness_factor),
    )
    share = _LARGEST_SHARE * (1 + scale) / 2
    return replace(varied, width=float(section_scales(varied).depletion_width * (1 - share) / share / _HALF))


def surface_sections(section: Section, widths=WIDTHS):
    """Sections that the surface goes through.

    section : the nominal device; its width does not matter, see `physics.section_geometry.Section`
    widths : number of widths [1]
    Returns sections, a tuple [1]: three dopings, for each three oxides, for each the widths.
    Source: Chebyshev nodes.
    """
    factors = 1 + REACH * chebyshev(3)
    return tuple(
        _placed(section, scale, doping, oxide) for doping in factors for oxide in factors for scale in chebyshev(widths)
    )


def held_out_sections(section: Section, widths=WIDTHS):
    """Sections to test the surface with, half-way between its widths: the nominal device and strayed ones by turns.

    section, widths : as in `surface_sections` [1]
    Returns sections, a tuple [1]; those of the nominal device first.
    Source: extrema of the Chebyshev polynomial, where an interpolation errs most.
    """
    scales = np.cos(np.pi * np.arange(1, widths) / widths)
    nominal = tuple(_placed(section, scale, 1.0, 1.0) for scale in scales[::2])
    return nominal + tuple(
        _placed(section, scale, *STRAYED[number % len(STRAYED)]) for number, scale in enumerate(scales[1::2])
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class SolvedEdge:
    """Both edges by solved cross-sections, for one nominal device at one temperature and body bias.

    depletion_width : of the nominal device [m]
    oxide_thickness : of the nominal device [m]
    charge_terms : coefficients of g by the powers of s on its scale, of x_d's deviation and of the oxide's, an array [1]
    sigma_terms : of the dopant sigma over its closed form, by the powers of s on its scale, nominal device [1]
    skewness_terms : the same of the dopant skewness over that of the closed form [1]
    charge_error : largest relative error of the edges' charge, and so of their shift, at held-out sections [1]
    sigma_error : largest relative error of the sigma at held-out widths of the nominal device [1]
    """

    depletion_width: float
    oxide_thickness: float
    charge_terms: np.ndarray
    sigma_terms: np.ndarray
    skewness_terms: np.ndarray
    charge_error: float = float("nan")
    sigma_error: float = float("nan")

    @property
    def smallest_width(self):
        """Width at which the surface begins for the nominal device [m]."""
        return NARROWEST * self.depletion_width

    def edge_charge(self, inverse_width, depletion, oxide):
        """Charge of both edges in squared depletion widths.

        inverse_width : depletion width over channel width [1]
        depletion, oxide : relative deviations of depletion width and oxide thickness from the nominal device [1]
        Returns charge over that of the bulk in a channel one depletion width wide [1]. Narrower than the smallest width it
        goes on straight in s; beyond their reach the deviations follow their parabolas.
        """
        place = _on_scale(_share(inverse_width))
        inside = np.minimum(place, 1.0)
        terms = self._along(self.charge_terms, inside, depletion, oxide)
        return terms + (place - inside) * self._along(polyder(self.charge_terms), inside, depletion, oxide)

    @staticmethod
    def _along(terms, place, depletion, oxide):
        first = polyval(oxide, np.moveaxis(terms, 2, 0)[..., None], tensor=False)  # (orders, 3, places)
        second = polyval(depletion, np.moveaxis(first, 1, 0), tensor=False)
        return polyval(place, second, tensor=False)

    def charge_factor(self, depletion_width, width, oxide_thickness):
        """Factor on the bulk depletion charge; `physics.edge_patch` is its quick stand-in around one width.

        depletion_width : depletion width under the gate [m]
        width : effective channel width [m]
        oxide_thickness : gate oxide [m]
        Returns factor [1]. Source: `edge_charge`.
        """
        inverse = np.asarray(depletion_width / width)
        deviations = depletion_width / self.depletion_width - 1, oxide_thickness / self.oxide_thickness - 1
        shape = np.broadcast_shapes(inverse.shape, *map(np.shape, deviations))
        flat = [np.broadcast_to(each, shape).ravel() for each in (inverse, *deviations)]
        return 1 + flat[0].reshape(shape) * self.edge_charge(*flat).reshape(shape)

    def sigma_ratio(self, width):
        """Sigma of the dopant scatter over `physics.dopants.dopant_sigma`, nominal doping and oxide.

        width : effective channel width [m]
        Returns ratio [1]. About 1.1 for wide channels already: the depletion edge is soft, and dopants below it count too.
        """
        return self._nominal(self.sigma_terms, width)

    def skewness_ratio(self, width):
        """Skewness of the dopant scatter over that of the closed form, nominal doping and oxide.

        width : effective channel width [m]
        Returns ratio [1].
        """
        return self._nominal(self.skewness_terms, width)

    def _nominal(self, terms, width):
        return polyval(np.minimum(_on_scale(_share(self.depletion_width / width)), 1.0), terms)


def relative_error(found, true):
    """Largest error, relative to the truth or to a twentieth of the largest truth where that is more.

    found : values, an array [1]
    true : what they should be, an array [1]
    Returns error [1].
    Source: definition.
    """
    return float(np.max(np.abs(found - true) / np.maximum(np.abs(true), _LEAST * np.max(np.abs(true)))))


def _depletion_widths(sections):
    return np.array([section_scales(section).depletion_width for section in sections])


def _charges(sections, factors):
    """g of every section from its factor."""
    widths = np.array([section.width for section in sections])
    return (np.asarray(factors) - 1) * widths / _depletion_widths(sections)


def solved_edge(section: Section, factors, sigma_ratios, skewness_ratios, widths=WIDTHS):
    """The surface through solved sections.

    section : the nominal device, see `physics.section_geometry.Section`
    factors, sigma_ratios, skewness_ratios : of `surface_sections` in their order, arrays [1]
    widths : number of widths [1]
    Returns SolvedEdge without errors, see `with_errors`.
    Source: polynomial interpolation along each direction.
    """
    sections, nominal = surface_sections(section, widths), section_scales(section).depletion_width
    grid = 3, 3, widths
    depletion = _depletion_widths(sections).reshape(grid)[:, 0, 0] / nominal - 1
    along_width = np.linalg.inv(polyvander(chebyshev(widths), widths - 1))
    along = along_width, np.linalg.inv(polyvander(depletion, 2)), np.linalg.inv(polyvander(REACH * chebyshev(3), 2))
    terms = np.einsum("iw,jd,kt,dtw->ijk", *along, _charges(sections, factors).reshape(grid))
    # of the dopant scatter only the nominal device's is kept
    sigma, skewness = (along_width @ np.reshape(each, grid)[1, 1] for each in (sigma_ratios, skewness_ratios))
    # rounded, so that the bits do not depend on the threads of a linear solver
    terms, sigma, skewness = (np.round(each, 11) for each in (terms, sigma, skewness))
    return SolvedEdge(
        depletion_width=nominal,
        oxide_thickness=section.oxide_thickness,
        charge_terms=terms,
        sigma_terms=sigma,
        skewness_terms=skewness,
    )


def with_errors(edge: SolvedEdge, section: Section, factors, sigma_ratios, widths=WIDTHS):
    """The surface with its errors at held-out sections.

    edge : the surface
    section : the nominal device, see `physics.section_geometry.Section`
    factors, sigma_ratios : of `held_out_sections` in their order, arrays [1]
    widths : number of widths [1]
    Returns SolvedEdge.
    Source: direct solutions.
    """
    sections, nominal = held_out_sections(section, widths), len(range(1, widths, 2))
    size, oxide = np.array([(each.width, each.oxide_thickness) for each in sections]).T
    found = edge.charge_factor(_depletion_widths(sections), size, oxide)
    return replace(
        edge,
        charge_error=relative_error(_charges(sections, found), _charges(sections, factors)),
        sigma_error=relative_error(edge.sigma_ratio(size[:nominal]), np.asarray(sigma_ratios)[:nominal]),
    )
