"""One device with single dopants: against the one- and two-dimensional solutions, against laws it must obey."""

import time
from dataclasses import replace

import numpy as np
import pytest
from scipy.interpolate import RegularGridInterpolator

from physics.atom_dopants import Dopants, continuous_doping, dopant_charge, place_dopants
from physics.atom_mesh import AtomDevice, atom_mesh
from physics.atomistic import solve_device, uniform_threshold
from physics.cross_section import solve_threshold
from physics.cross_section_dopants import dopant_weights
from physics.dopants import single_dopant_shift
from physics.edges import NoEdge
from physics.profile import StepProfile, UniformProfile
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.threshold import oxide_capacitance

DEVICE = AtomDevice(
    width=50e-9, length=50e-9, oxide_thickness=3e-9, profile=UniformProfile(doping=5e24), temperature=300.0
)
SMALL = replace(DEVICE, width=20e-9, length=24e-9)
STEP = StepProfile(surface_doping=5e23, surface_depth=10e-9, doping=4e24)
TRENCH = TrenchWall(trench_depth=30e-9, field_width=20e-9)
FIELD = FieldStep(field_oxide_thickness=60e-9, field_width=30e-9)
EDGES = pytest.mark.parametrize("edge", [NoEdge(), TRENCH, FIELD], ids=["none", "trench", "field oxide"])


def section(device):
    """The same device without a length."""
    names = ("width", "oxide_thickness", "profile", "temperature", "edge", "body_bias", "intrinsic_density")
    return Section(**{name: getattr(device, name) for name in names})


def drawn(device, seed=1):
    return place_dopants(device, np.random.default_rng(seed))


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"profile": UniformProfile(doping=1e24)},
        {"profile": UniformProfile(doping=1e23), "mesh_spacing": 2e-9},
        {"profile": STEP},
        {"body_bias": 1.0},
        {"temperature": 400.0},
        {"bound_holes": True},
        {"mesh_spacing": 0.7e-9},
        {"oxide_thickness": 10e-9},
    ],
)
def test_continuous_doping_is_the_one_dimensional_solution(changes):
    device = replace(SMALL, **changes)
    uniform = uniform_threshold(device)
    assert uniform.threshold == pytest.approx(solve_threshold(section(device)).threshold, rel=0, abs=2e-3)
    solved = solve_device(device, continuous_doping(), uniform)
    assert abs(solved.lowering) < 1e-8
    assert (
        np.ptp(solved.surface_potential) < 1e-9 and np.ptp(solved.inversion_sheet) < 1e-9 * solved.inversion_sheet[0, 0]
    )


@EDGES
def test_gauss(edge):
    """The charges of gate, silicon and substrate cancel; the mesh holds every dopant."""
    device = replace(SMALL, edge=edge)
    dopants = drawn(device)
    solved = solve_device(device, dopants, precision=1e-9)
    total = solved.device_gate_charge + solved.device_silicon_charge + solved.substrate_charge
    assert abs(total) < 1e-7 * solved.device_gate_charge
    assert dopant_charge(device, solved.mesh, dopants).sum() == pytest.approx(dopants.depth.size, rel=1e-9, abs=0)


@EDGES
@pytest.mark.parametrize("side", ["width", "length", "both"])
def test_mirror_images_are_alike(edge, side):
    device = replace(SMALL, edge=edge)
    dopants, one, other = drawn(device), 1, 1
    image = dopants
    if side != "length":
        image, one = replace(image, across=-image.across), -1
    if side != "width":
        image, other = replace(image, along=device.length - image.along), -1
    uniform = uniform_threshold(device)
    first, second = (solve_device(device, places, uniform) for places in (dopants, image))
    assert second.threshold == pytest.approx(first.threshold, rel=0, abs=1e-7)
    assert second.surface_potential[::one, ::other] == pytest.approx(first.surface_potential, rel=0, abs=1e-6)


@pytest.mark.parametrize("changes", [{}, {"profile": STEP}, {"body_bias": 1.0}], ids=["uniform", "step", "body bias"])
def test_one_weak_dopant_more_has_the_adjoint_weight(changes):
    """To first order the network averages the logarithm of the sheet, so the place in the plane does not matter."""
    device = replace(SMALL, **changes)
    solved, uniform = solve_threshold(section(device)), uniform_threshold(device, 1e-10)
    weights, charge = dopant_weights(solved)[:, 0], 0.01
    whole = single_dopant_shift(oxide_capacitance(device.oxide_thickness), device.width, device.length)
    for depth, across, along in [(0.6, 0, 5), (2, 3, 12), (5, -9.5, 0.1), (9, 8, 20), (14, 2, 7)]:
        extra = Dopants(
            across=np.array([across * 1e-9]),
            depth=np.array([depth * 1e-9]),
            along=np.array([along * 1e-9]),
            charge=charge,
            continuous=True,
        )
        shift = -solve_device(device, extra, uniform, precision=1e-10).lowering
        expected = np.interp(depth * 1e-9, solved.mesh.depth, weights)
        assert shift / (charge * whole) == pytest.approx(expected, rel=0, abs=2e-3)


@pytest.mark.parametrize("edge, share", [(TRENCH, 0.02), (FIELD, 0.01)], ids=["trench", "field oxide"])
def test_one_weak_dopant_more_beside_an_edge(edge, share):
    device = replace(SMALL, length=8e-9, edge=edge, mesh_spacing=0.5e-9)
    solved, uniform = solve_threshold(section(device)), uniform_threshold(device, 1e-10)
    weights = RegularGridInterpolator((solved.mesh.depth, solved.mesh.lateral), dopant_weights(solved))
    whole = single_dopant_shift(oxide_capacitance(device.oxide_thickness), device.width, device.length)
    for across, depth in [(0, 2), (6, 3), (-8, 8), (9, 12)]:
        place = {"across": across * 1e-9, "depth": depth * 1e-9, "along": 3e-9}
        extra = Dopants(**{name: np.array([at]) for name, at in place.items()}, charge=0.003, continuous=True)
        shift = -solve_device(device, extra, uniform, precision=1e-10).lowering / (0.003 * whole)
        expected = float(weights((depth * 1e-9, abs(across) * 1e-9)))
        assert shift == pytest.approx(expected, rel=share, abs=0.003)


@pytest.mark.parametrize("edge, share", [(TRENCH, 0.05), (FIELD, 0.06)], ids=["trench", "field oxide"])
def test_edges_against_the_section(edge, share):
    """The shift by both edges; a box of 1 nm does not resolve the corner, half of it halves what is missing."""
    device = replace(DEVICE, edge=edge, length=10e-9)
    shift = solve_threshold(section(device)).shift
    errors = []
    for spacing in (1e-9, 0.5e-9):
        fine = replace(device, mesh_spacing=spacing)
        errors.append(
            uniform_threshold(fine).threshold - uniform_threshold(replace(fine, edge=NoEdge())).threshold - shift
        )
    assert abs(errors[0]) < share * abs(shift)
    assert abs(errors[1]) < 0.6 * abs(errors[0])


@EDGES
def test_the_loose_solution_is_the_tight_one(edge):
    device = replace(SMALL, edge=edge)
    uniform, dopants = uniform_threshold(device), drawn(device, 5)
    loose, tight = (solve_device(device, dopants, uniform, precision) for precision in (2e-5, 1e-9))
    assert loose.threshold == pytest.approx(tight.threshold, rel=0, abs=2e-5)
    assert loose.linear_iterations < tight.linear_iterations


@pytest.mark.parametrize("cloud", [0.7e-9, 1e-9, 1.4e-9])
def test_threshold_does_not_hang_on_the_mesh(cloud):
    """The same dopants with the same cloud on meshes of 0.7, 1 and 1.4 nm."""
    thresholds = []
    dopants = drawn(SMALL, 3)
    for spacing in (0.7e-9, 1e-9, 1.4e-9):
        thresholds.append(solve_device(replace(SMALL, mesh_spacing=spacing, cloud_length=cloud), dopants).lowering)
    assert np.ptp(thresholds) < 5e-3


def test_bound_holes_lower_the_threshold():
    """Holes bound to acceptors take their charge away; see the module's docstring."""
    dopants = drawn(DEVICE)
    ionised, bound = (solve_device(replace(DEVICE, bound_holes=choice), dopants) for choice in (False, True))
    assert 5e-3 < bound.lowering - ionised.lowering < 25e-3


def test_a_device_of_a_hundred_thousand_unknowns_takes_a_second_and_a_half():
    device = replace(DEVICE, mesh_spacing=0.85e-9)
    dopants, uniform = drawn(device), uniform_threshold(device)
    assert atom_mesh(device).depth.size * device.plane[0] * device.plane[1] > 1e5
    start = time.process_time()
    solve_device(device, dopants, uniform)
    assert time.process_time() - start < 1.5


@pytest.mark.parametrize(
    "changes, told",
    [
        ({"width": 0.0}, "width must be a positive, finite number, not 0.0"),
        ({"length": -1e-9}, "length must be a positive"),
        ({"length": float("nan")}, "length must be a positive"),
        ({"mesh_spacing": 0}, "mesh_spacing must be a positive"),
        ({"cloud_length": 0.0}, "cloud_length must be a positive"),
        ({"cloud_length": 60e-9}, "cloud_length, 60 nm, must fit into width: shorten it"),
        ({"charge_level": 0.0}, "charge_level must be a positive"),
        ({"oxide_thickness": 0.0}, "oxide_thickness must be a positive"),
        ({"width": 3e-9}, "width, 3 nm, must hold 4 boxes of mesh_spacing, 1 nm: lower mesh_spacing"),
        ({"width": 2e-6, "length": 2e-6}, "GB; the memory allows 4000000, 1 GB: widen mesh_spacing"),
        ({"mesh_spacing": 0.05e-9}, "the mesh would need"),
        ({"silicon_depth": 15e-9}, "silicon_depth, 15 nm, must hold the depletion layer and 3 Debye lengths, 21"),
        ({"edge": TrenchWall(trench_depth=30e-9, divot=5e-9)}, "must be planar here, so the divot 0, not 5 nm"),
        ({"edge": FieldStep(field_oxide_thickness=2e-9)}, "must be thicker than the gate oxide"),
        ({"temperature": 100.0}, "temperature must lie between 200 and 500 K"),
    ],
)
def test_refusals(changes, told):
    with pytest.raises(ValueError) as refusal:
        replace(DEVICE, **changes)
    assert told in str(refusal.value) and "\n" not in str(refusal.value)


@pytest.mark.parametrize("place", [{"depth": -1e-9}, {"across": 30e-9}, {"along": 51e-9}, {"depth": float("nan")}])
def test_a_dopant_outside_is_refused(place):
    inside = {"depth": 5e-9, "across": 0.0, "along": 5e-9}
    dopants = Dopants(**{name: np.array([value]) for name, value in (inside | place).items()})
    with pytest.raises(ValueError, match=f"a dopant lies outside the silicon: {next(iter(place))} must be"):
        solve_device(DEVICE, dopants)


def test_dopants_without_meaning_and_a_foreign_uniform_solution_are_refused():
    mesh = atom_mesh(SMALL)
    inside = Dopants(depth=np.array([5e-9]), across=np.array([0.0]), along=np.array([5e-9]))
    for changes in ({"charge": float("nan")}, {"depth": 5e-9}, {"depth": np.array([1e-9, 2e-9])}):
        with pytest.raises(ValueError, match="places of dopants must be rows of one length"):
            dopant_charge(SMALL, mesh, replace(inside, **changes))
    with pytest.raises(ValueError, match="uniform belongs to a device with another mesh"):
        solve_device(SMALL, inside, uniform_threshold(DEVICE))
