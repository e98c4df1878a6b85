"""The parts of the atomistic solver: places of dopants, clouds, the layers' inverse, conjugate gradients, the sheet."""

from dataclasses import replace

import numpy as np
import pytest

from physics.atom_dopants import Dopants, continuous_doping, dopant_charge, doped_blocks, place_dopants
from physics.atom_layers import conjugate_gradients, product
from physics.atom_mesh import AtomDevice, atom_mesh
from physics.atom_poisson import Linearised, atom_equations, layers
from physics.atom_sheet import SheetNetwork
from physics.atomistic import solve_device
from physics.profile import StepProfile, UniformProfile
from physics.section_geometry import FieldStep, TrenchWall
from physics.silicon import thermal_voltage

DEVICE = AtomDevice(
    width=24e-9, length=20e-9, oxide_thickness=3e-9, profile=UniformProfile(doping=5e24), temperature=300.0
)
TRENCH = replace(DEVICE, edge=TrenchWall(trench_depth=20e-9, field_width=10e-9))
FIELD = replace(
    DEVICE,
    edge=FieldStep(field_oxide_thickness=30e-9, field_width=10e-9, implant_doping=1e24, implant_depth=10e-9),
    profile=StepProfile(surface_doping=3e24, surface_depth=6e-9, doping=5e24),
)
DEVICES = pytest.mark.parametrize("device", [DEVICE, TRENCH, FIELD], ids=["none", "trench", "field oxide"])
RNG = np.random.default_rng(11)


@DEVICES
def test_places_follow_the_doping(device):
    """Count in four blocks of silicon over many devices against the mesh's own doping, in standard errors."""
    generator, mesh, n = np.random.default_rng(2), atom_mesh(device), 300
    several = [place_dopants(device, generator) for _ in range(n)]
    counts = np.array([places.depth.size for places in several])
    mean = mesh.gathered(mesh.doping).sum() * mesh.plane[1]
    assert abs(counts.mean() - mean) < 4 * np.sqrt(mean / n)
    assert counts.var(ddof=1) == pytest.approx(mean, rel=4 * np.sqrt(2 / n), abs=0)
    total = sum(dopant_charge(device, mesh, places) for places in several) / n
    wanted = mesh.gathered(mesh.doping)
    for rows in (slice(None, 12), slice(12, 22), slice(22, None)):
        for columns in (mesh.beyond < -1e-9, mesh.beyond > 1e-9):
            expected = wanted[rows][:, columns].sum() * mesh.plane[1]
            assert abs(total[rows][:, columns].sum() - expected) <= 4 * np.sqrt(expected / n) + 0.01 * expected


def test_the_same_stream_draws_the_same_dopants():
    first, second = (place_dopants(DEVICE, np.random.default_rng(0)) for _ in range(2))
    assert np.array_equal(first.depth, second.depth) and np.array_equal(first.along, second.along)


def test_blocks_hold_what_the_mesh_holds():
    for device in (DEVICE, TRENCH, FIELD):
        mesh = atom_mesh(device)
        blocks = sum(
            (right - left) * (bottom - top) * doping for left, right, top, bottom, doping in doped_blocks(device)
        )
        assert blocks * device.length == pytest.approx(
            mesh.gathered(mesh.doping).sum() * mesh.plane[1], rel=1e-9, abs=0
        )


@pytest.mark.parametrize("cloud", [0.01e-9, 0.3e-9, 1e-9, 3.3e-9])
def test_even_dopants_are_the_continuum(cloud):
    """A fine row of dopants along each direction gives every node the charge of the continuum, mirrors included."""
    device, n = replace(DEVICE, cloud_length=cloud), 4000
    mesh = atom_mesh(device)
    even = (np.arange(n) + 0.5) / n
    row = Dopants(across=(even - 0.5) * device.width, depth=even * device.depth, along=even * device.length)
    total = dopant_charge(device, mesh, row)
    continuum = dopant_charge(device, mesh, continuous_doping())
    for axes in ((1, 2), (0, 2), (0, 1)):
        share = total.sum(axis=axes) / n
        assert share == pytest.approx(continuum.sum(axis=axes) / continuum.sum(), rel=0, abs=2e-3 * share.max())


@pytest.mark.parametrize("cloud", [0.01e-9, 1e-9, 3.3e-9])
def test_a_cloud_away_from_mirrors_keeps_its_charge_and_its_centre(cloud):
    device, n = replace(DEVICE, cloud_length=cloud), 50
    mesh, generator = atom_mesh(device), np.random.default_rng(4)
    nodes = mesh.depth, (np.arange(24) - 11.5) * 1e-9, (np.arange(20) + 0.5) * 1e-9
    for place in generator.uniform([3e-9, -9e-9, 3e-9], [20e-9, 9e-9, 17e-9], (n, 3)):
        depth, across, along = place[:, None]
        total = dopant_charge(device, mesh, Dopants(depth=depth, across=across, along=along, charge=2.5))
        assert total.sum() == pytest.approx(2.5, rel=1e-9, abs=0) and total.min() >= 0
        for axis, lines in enumerate(nodes):
            centre = (total.sum(axis=tuple({0, 1, 2} - {axis})) * lines).sum() / 2.5
            assert centre == pytest.approx(place[axis], rel=0, abs=1e-15)


def test_a_point_is_shared_linearly_between_its_neighbours():
    device = replace(DEVICE, cloud_length=1e-12)
    place = Dopants(depth=np.array([9e-9]), across=np.array([0.8e-9]), along=np.array([3.75e-9]))
    total = dopant_charge(device, atom_mesh(device), place)
    assert total.sum(axis=(0, 2))[12:14] == pytest.approx([0.7, 0.3], rel=0, abs=1e-3)
    assert total.sum(axis=(0, 1))[3:5] == pytest.approx([0.75, 0.25], rel=0, abs=1e-3)


def test_the_layers_inverse_inverts():
    device = replace(DEVICE, width=5e-9, length=4e-9)
    mesh = atom_mesh(device)
    equations = atom_equations(device, mesh, dopant_charge(device, mesh, continuous_doping()))
    shape = (mesh.depth.size - 2, *mesh.plane)
    carriers = RNG.uniform(0, 1e-8, shape[0])
    operator = layers(equations, mesh.plane).screened(carriers)
    right = RNG.normal(size=shape)
    solution = operator.solved(right)
    back = equations.displacement(solution) + carriers[:, None, None] * solution
    assert back == pytest.approx(right, rel=0, abs=1e-10)


@DEVICES
def test_matrix_and_preconditioner_are_symmetric_and_positive(device):
    mesh = atom_mesh(device)
    equations = atom_equations(device, mesh, dopant_charge(device, mesh, continuous_doping()))
    shape = (mesh.depth.size - 2, *mesh.plane)
    screening = equations.residual(RNG.uniform(0, 40, shape), 50.0)[1]
    linearised = Linearised(equations, layers(equations, mesh.plane), screening)
    for function in (linearised.applied, linearised.inverse):
        for _ in range(20):
            one, other = (RNG.normal(size=shape) * ~equations.fixed for _ in range(2))
            image = function(one)
            assert np.all(image[np.broadcast_to(equations.fixed, shape)] == 0)
            scale = np.sqrt(product(one, image) * product(other, function(other)))
            assert product(one, image) > 0
            assert abs(product(other, image) - product(one, function(other))) < 1e-11 * scale


def test_residual_and_screening_agree():
    mesh = atom_mesh(DEVICE)
    for bound in (False, True):
        device = replace(DEVICE, bound_holes=bound)
        equations = atom_equations(device, mesh, dopant_charge(device, mesh, continuous_doping()))
        shape = (mesh.depth.size - 2, *mesh.plane)
        potential, change = RNG.uniform(-3, 40, shape), 1e-6 * RNG.normal(size=shape)
        (first, screening), (second, _) = (equations.residual(potential + s * change, 40.0) for s in (-1, 1))
        linear = equations.displacement(change) + screening * change
        assert (second - first) / 2 == pytest.approx(linear, rel=1e-4, abs=1e-5 * np.abs(linear).max())


@pytest.mark.parametrize("seed", [1, 2])
def test_the_layers_save_most_iterations(seed):
    """Response to the gate at threshold, with and without the preconditioner, until both are as near to the solution."""
    dopants = place_dopants(DEVICE, np.random.default_rng(seed))
    solved, kt = solve_device(DEVICE, dopants), thermal_voltage(DEVICE.temperature)
    mesh = solved.mesh
    equations = atom_equations(DEVICE, mesh, dopant_charge(DEVICE, mesh, dopants))
    potential = solved.potential[1:-1] / kt
    _, screening = equations.residual(potential, solved.threshold / kt)
    linearised = Linearised(equations, layers(equations, mesh.plane), screening)
    pull = np.broadcast_to(equations.gate_pull, potential.shape)
    exact, _ = linearised.solved(pull, 1e-11)

    def until_near(inverse):
        for tolerance in 10 ** np.arange(-1, -9, -0.5):
            solution, iterations = conjugate_gradients(linearised.applied, inverse, pull, tolerance, 5000)
            away = solution - exact
            if product(away, linearised.applied(away)) < 1e-8 * product(exact, pull):
                return iterations
        raise AssertionError("never near")

    few, many = until_near(linearised.inverse), until_near(np.copy)
    assert few <= 10 and many > 10 * few


def test_conjugate_gradients_solve_and_count():
    root = RNG.normal(size=(12, 12))
    matrix, right = root @ root.T + np.eye(12), RNG.normal(size=12)
    solution, iterations = conjugate_gradients(lambda x: matrix @ x, np.copy, right, 1e-12)
    assert matrix @ solution == pytest.approx(right, rel=0, abs=1e-8)
    assert iterations <= 20
    assert conjugate_gradients(lambda x: matrix @ x, np.copy, 0 * right, 0.1)[1] == 0
    assert product(right, right) == pytest.approx(right @ right, rel=1e-14, abs=0)


@pytest.mark.parametrize("aspect", [0.5, 1.0, 2.0])
def test_an_even_sheet_conducts_as_width_over_length(aspect):
    network = SheetNetwork(7, 5, aspect)
    assert network.current(np.full((7, 5), 3.0)) == pytest.approx(3 * 7 * aspect / 5, rel=1e-12, abs=0)


def test_stripes_are_in_series_or_side_by_side():
    sheet = np.array([1.0, 4.0, 2.0])
    beside, series = SheetNetwork(3, 6, 1.0), SheetNetwork(4, 3, 1.0)
    assert beside.current(np.repeat(sheet[:, None], 6, axis=1)) == pytest.approx(7 / 6, rel=1e-12, abs=0)
    expected = 4 / (0.5 + 1 / 2 + 1 / np.sqrt(8) + 0.25)  # half a box, two links, half a box
    assert series.current(np.repeat(sheet[None], 4, axis=0)) == pytest.approx(expected, rel=1e-12, abs=0)


def smooth(seed, boxes=64):
    """A sheet whose logarithm is a smooth random field with sigma 1, mean 0, four boxes of correlation."""
    wave = np.fft.fftfreq(boxes) * 2 * np.pi
    filtered = np.exp(-4 * (wave[:, None] ** 2 + wave**2) * 2)
    field = np.fft.ifft2(np.fft.fft2(np.random.default_rng(seed).normal(size=(boxes, boxes))) * filtered).real
    return np.exp((field - field.mean()) / field.std())


@pytest.mark.parametrize("seed", range(4))
def test_the_duality_of_the_plane(seed):
    """A sheet conducts across as its reciprocal resists along: the currents multiply to 1 (Keller; Dykhne)."""
    network, sheet = SheetNetwork(64, 64, 1.0), smooth(seed)
    assert network.current(sheet) * network.current((1 / sheet).T) == pytest.approx(1.0, rel=0.02, abs=0)


def test_a_random_sheet_conducts_as_its_geometric_mean():
    """In the mean over sheets and their reciprocals, which are as likely; the arithmetic mean is 1.6 times larger."""
    network, sheets = SheetNetwork(64, 64, 1.0), [smooth(seed) for seed in range(12)]
    logarithms = np.array([[np.log(network.current(sheet**sign)) for sign in (1, -1)] for sheet in sheets]).mean(axis=1)
    assert abs(logarithms.mean()) < 3 * logarithms.std(ddof=1) / np.sqrt(12)
    assert np.mean(sheets) > 1.5
