"""The surface through solved edges: a polynomial it can hold is given back exactly, and its quick stand-in follows it.

Here the "solutions" are a formula of ours, so that nothing is solved; tests/studies/test_edge_table.py solves.
"""

import numpy as np
import pytest

from physics.edge_patch import REACH, edge_patch
from physics.edge_surface import (
    NARROWEST,
    WIDTHS,
    chebyshev,
    held_out_sections,
    relative_error,
    solved_edge,
    surface_sections,
    with_errors,
)
from physics.profile import StepProfile, UniformProfile
from physics.section_geometry import FieldStep, Section
from physics.section_lines import section_scales

SECTION = Section(
    width=1e-6,
    oxide_thickness=4e-9,
    profile=UniformProfile(doping=3e23),
    temperature=300.0,
    edge=FieldStep(field_oxide_thickness=300e-9),
)
DEPLETION = section_scales(SECTION).depletion_width


def share(width, depletion=DEPLETION):
    """The surface's variable: 0 for infinite width."""
    return depletion / width / (depletion / width + 0.5)


def charge(width, depletion, oxide):
    """A charge that the surface can hold: a polynomial in the share and in both deviations."""
    s, x, t = share(width, depletion), depletion / DEPLETION - 1, oxide / SECTION.oxide_thickness - 1
    return 0.2 + 0.3 * s - 0.5 * s**4 + (0.4 - s) * x + 0.7 * t * s**2 - x * t + 2 * x**2 * t**2


def factor(width, depletion, oxide):
    """The factor that goes with that charge."""
    return 1 + charge(width, depletion, oxide) * depletion / width


def scatter(section):
    """Ratios of sigma and skewness, functions of the width alone."""
    return 1.1 - 0.4 * share(section.width) ** 2, 1 + 0.5 * share(section.width) ** 3


def numbers(sections):
    """What solving the sections would give: factors, sigma ratios, skewness ratios."""
    depletion = [section_scales(section).depletion_width for section in sections]
    factors = [factor(each.width, x, each.oxide_thickness) for each, x in zip(sections, depletion)]
    return [np.array(each) for each in (factors, *zip(*map(scatter, sections)))]


@pytest.fixture(scope="module")
def surface():
    """The surface of that charge."""
    edge = solved_edge(SECTION, *numbers(surface_sections(SECTION)))
    return with_errors(edge, SECTION, *numbers(held_out_sections(SECTION))[:2])


def test_a_polynomial_is_given_back(surface):
    random = np.random.default_rng(1)
    depletion = DEPLETION * random.uniform(0.9, 1.15, 500)
    width = depletion * 10 ** random.uniform(-0.5, 3, 500)
    oxide = 4e-9 * random.uniform(0.75, 1.25, 500)
    found = surface.charge_factor(depletion, width, oxide)
    assert found == pytest.approx(factor(width, depletion, oxide), rel=1e-8, abs=0)
    assert surface.charge_error < 1e-8 and surface.sigma_error < 1e-8


def test_scatter_is_that_of_the_nominal_device(surface):
    width = DEPLETION * np.geomspace(NARROWEST, 1e3, 50)
    assert surface.sigma_ratio(width) == pytest.approx(1.1 - 0.4 * share(width) ** 2, rel=1e-9, abs=0)
    assert surface.skewness_ratio(width) == pytest.approx(1 + 0.5 * share(width) ** 3, rel=1e-9, abs=0)


def test_wide_channels_have_no_edge(surface):
    assert surface.charge_factor(DEPLETION, 1.0, 4e-9) == pytest.approx(1, abs=1e-6)


def test_narrower_than_the_table_it_goes_on_without_a_step_or_a_kink(surface):
    inverse = 1 / NARROWEST * np.array([1 - 2e-4, 1 - 1e-4, 1.0, 1 + 1e-4, 1 + 2e-4])
    values = surface.charge_factor(DEPLETION, DEPLETION / inverse, 4e-9)
    slopes = np.diff(values)
    assert slopes == pytest.approx(slopes[0], rel=1e-2, abs=0)
    assert np.isfinite(surface.charge_factor(DEPLETION, 0.01 * DEPLETION, 4e-9))


@pytest.mark.parametrize("ratio", [0.35, 1.0, 3.0, 40.0])
def test_the_patch_follows_the_surface(surface, ratio):
    width = ratio * DEPLETION
    patch, random = edge_patch(surface, width), np.random.default_rng(2)
    places = [nominal * random.normal(1, 0.03, 3000) for nominal in (DEPLETION, width, 4e-9)]
    exact = surface.charge_factor(*places)
    assert relative_error(patch.charge_factor(*places) - 1, exact - 1) < 2e-3
    nominal = DEPLETION, width, 4e-9
    assert patch.charge_factor(*nominal) == pytest.approx(surface.charge_factor(*nominal), rel=2e-5, abs=0)


def test_beyond_the_patch_the_surface_answers(surface):
    patch = edge_patch(surface, DEPLETION)
    widths = DEPLETION * np.array([0.1, 0.5, 1.0, 1.02, 7.0])
    found, exact = patch.charge_factor(DEPLETION, widths, 4e-9), surface.charge_factor(DEPLETION, widths, 4e-9)
    outside = np.abs(DEPLETION / widths - 1) > REACH
    assert outside.sum() == 3
    assert np.array_equal(found[outside], exact[outside])
    assert found == pytest.approx(exact, rel=1e-3, abs=0)
    assert patch.charge_factor(DEPLETION, 7 * DEPLETION, 4e-9) == exact[-1]


def test_arguments_broadcast_and_are_left_alone(surface):
    patch = edge_patch(surface, DEPLETION)
    depletion, oxide = np.full(4, DEPLETION), np.full(4, 4e-9)
    for edge in (surface, patch):
        found = edge.charge_factor(depletion, DEPLETION, oxide)
        assert found.shape == (4,)
        assert edge.charge_factor(DEPLETION, np.full(4, DEPLETION), oxide) == pytest.approx(found, rel=1e-12, abs=0)
        assert np.ndim(edge.charge_factor(DEPLETION, DEPLETION, 4e-9)) == 0
        one = edge.charge_factor(1.05 * DEPLETION, 1.1 * DEPLETION, 4.2e-9)
        assert one == pytest.approx(
            edge.charge_factor(1.05 * depletion, 1.1 * DEPLETION, 1.05 * oxide)[0], rel=1e-4, abs=0
        )
        column, row = np.full((5, 1), 1.01), np.linspace(0.97, 1.03, 4)
        for sizes in (
            (row, row, column),
            (row, column, row),
            (column, row, row),
            (1.0, row, column),
            (column, 1.0, row),
        ):
            broad = edge.charge_factor(*(size * nominal for size, nominal in zip(sizes, (DEPLETION, DEPLETION, 4e-9))))
            full = np.broadcast_arrays(*sizes)
            flat = [size.ravel() * nominal for size, nominal in zip(full, (DEPLETION, DEPLETION, 4e-9))]
            assert broad.shape == (5, 4)
            assert broad.ravel() == pytest.approx(edge.charge_factor(*flat), rel=1e-12, abs=0)
            narrow = edge.charge_factor(DEPLETION * sizes[0], 0.2 * DEPLETION * sizes[1], 4e-9 * sizes[2])
            assert narrow.shape == (5, 4)
    assert np.all(depletion == DEPLETION) and np.all(oxide == 4e-9)


def test_sections_are_those_of_the_process():
    layered = StepProfile(surface_doping=1e23, surface_depth=20e-9, doping=6e23)
    section = Section(**vars(SECTION) | {"profile": layered, "body_bias": 0.5})
    for sections in (surface_sections(section, 5), held_out_sections(section, 5)):
        assert {each.body_bias for each in sections} == {0.5} and {each.edge for each in sections} == {section.edge}
        ratios = {round(each.profile.surface_doping / each.profile.doping, 12) for each in sections}
        assert ratios == {round(1 / 6, 12)}
    assert len(surface_sections(section, 5)) == 45
    middle = surface_sections(section, 5)[20:25]
    assert {each.profile for each in middle} == {layered} and {each.oxide_thickness for each in middle} == {4e-9}


def test_held_out_sections_are_no_nodes():
    nodes = {round(each.width / section_scales(each).depletion_width, 6) for each in surface_sections(SECTION)}
    held_out = {round(each.width / section_scales(each).depletion_width, 6) for each in held_out_sections(SECTION)}
    assert not nodes & held_out and len(held_out) == WIDTHS - 1


def test_chebyshev_nodes():
    assert chebyshev(5)[2] == 0
    assert np.all(np.diff(chebyshev(8)) < 0)
    assert chebyshev(8) == pytest.approx(-chebyshev(8)[::-1], abs=1e-15)
