"""Threshold voltage of a device whose dopants are counted one by one: Poisson's equation in three dimensions.

The threshold is the gate voltage above flat band at which the low-drain current through the inversion sheet, a network
of resistors as conductive as the local inversion charge, equals that of a device with C_ox kT/q of inversion charge per
area everywhere: the criterion of `physics.cross_section`. The places of the dopants are an argument.
"""

from dataclasses import dataclass

import numpy as np

from physics.atom_dopants import Dopants, continuous_doping, dopant_charge
from physics.atom_layers import LayeredOperator
from physics.atom_mesh import AtomDevice, AtomMesh, atom_mesh
from physics.atom_poisson import AtomEquations, Linearised, atom_equations, layers, newton_step
from physics.atom_sheet import SheetNetwork
from physics.constants import ELEMENTARY_CHARGE, VACUUM_PERMITTIVITY
from physics.cross_section import solve_threshold
from physics.edges import NoEdge
from physics.section_geometry import Section
from physics.silicon import thermal_voltage
from physics.threshold import oxide_capacitance

_MOST_ITERATIONS = 80
_LARGEST_RISE = 4.0  # of the gate in one iteration [kT/q]
_NEAR = 0.5  # steps below it leave the current to the gate, so that its slope can be measured [kT/q]
_LINEAR_TOLERANCE = 0.1  # of the equations of one step
_GATE_TOLERANCE = 0.01  # of the response to the gate, a direction of search
_STEP_OVER_PRECISION = 20.0  # last step allowed: what it leaves is a tenth of it at its highest node


@dataclass(frozen=True, kw_only=True)
class AtomThreshold:
    """A device at threshold.

    device : see `physics.atom_mesh.AtomDevice`
    mesh : see `physics.atom_mesh.AtomMesh`
    threshold : gate against source, above flat band [V]
    uniform_threshold : the same with continuous doping, on the same mesh [V]
    potential : against neutral substrate [V], array (depth, along the width, along the length)
    inversion_sheet : electrons per area [m^-2], array (along the width, along the length)
    device_gate_charge : on the gate [C]
    device_silicon_charge : in the silicon above the lowest line [C]
    substrate_charge : what neutral silicon from the lowest line on adds [C]
    iterations : steps of Newton's method [1]
    linear_iterations : steps of conjugate gradients in all [1]
    """

    device: AtomDevice
    mesh: AtomMesh
    threshold: float
    uniform_threshold: float
    potential: np.ndarray
    inversion_sheet: np.ndarray
    device_gate_charge: float
    device_silicon_charge: float
    substrate_charge: float
    iterations: int
    linear_iterations: int

    @property
    def lowering(self):
        """Threshold with continuous doping less this one [V]."""
        return self.uniform_threshold - self.threshold

    @property
    def surface_potential(self):
        """Potential of the silicon surface [V], array (along the width, along the length)."""
        return self.potential[self.mesh.surface]


class _Sheet:
    """The inversion sheet of a device: which boxes carry it, and how much current is missing."""

    def __init__(self, device, mesh):
        self._carries = mesh.is_silicon[mesh.surface]
        self._network = SheetNetwork(int(self._carries.sum()), mesh.plane[1], mesh.box_width / mesh.box_length)
        self._box = mesh.box_width * mesh.box_length
        kt = thermal_voltage(device.temperature)
        density = device.charge_level * oxide_capacitance(device.oxide_thickness) * kt / ELEMENTARY_CHARGE
        self._wanted = density * device.width / device.length

    def density(self, electrons):
        return electrons.sum(axis=0) / self._box

    def missing(self, electrons):
        """Logarithm of the current wanted over the current."""
        return float(np.log(self._wanted / self._network.current(self.density(electrons)[self._carries])))


@dataclass(frozen=True, kw_only=True)
class _State:
    """Potential and gate over kT/q at threshold, the potential's response to the gate, and what they took."""

    potential: np.ndarray
    gate: float
    response: np.ndarray | None = None
    iterations: int = 0
    linear_iterations: int = 0


def _driven(sheet: _Sheet, equations: AtomEquations, operator: LayeredOperator, guess: _State, precision):
    """The state at threshold. Every step of Newton's method also moves the gate by the current missing over its slope."""
    gate, linear, slope, before, response = guess.gate, 0, 1.0, (0.0, 0.0), guess.response
    potential = np.where(equations.fixed, gate, guess.potential)
    for iteration in range(1, _MOST_ITERATIONS + 1):
        residual, screening = equations.residual(potential, gate)
        linearised = Linearised(equations, operator, screening)
        step, count = newton_step(linearised, residual, _LINEAR_TOLERANCE)
        if guess.response is None:
            response, _ = linearised.solved(np.broadcast_to(equations.gate_pull, step.shape), _GATE_TOLERANCE)
        potential, linear, largest = potential + step, linear + count, float(np.abs(step).max())
        electrons = equations.electrons(potential)
        missing = sheet.missing(electrons)
        if largest >= _NEAR or not before[1]:
            slope = float((electrons * response).sum() / electrons.sum())
        elif abs(before[1]) > precision:
            slope = float(np.clip((before[0] - missing) / before[1], slope / 2, 2 * slope))
        raised = float(np.clip(missing / slope, -_LARGEST_RISE, _LARGEST_RISE))
        gate, before = gate + raised, (missing, raised)
        potential = np.where(equations.fixed, gate, potential + raised * response)
        if largest < _STEP_OVER_PRECISION * precision and abs(raised) < precision:
            return _State(
                potential=potential, gate=gate, response=response, iterations=iteration, linear_iterations=linear
            )
    raise RuntimeError(
        f"Newton's iteration did not end after {_MOST_ITERATIONS} steps; the last was {largest:.3g} kT/q, of the gate "
        f"{raised:.3g} kT/q"
    )


def _guess(device, mesh):
    """State of the channel without edges, fading out beyond them."""
    kt = thermal_voltage(device.temperature)
    names = ("width", "oxide_thickness", "profile", "temperature", "body_bias", "intrinsic_density")
    wide = solve_threshold(Section(edge=NoEdge(), **{name: getattr(device, name) for name in names}))
    column = np.interp(mesh.depth, wide.mesh.depth, wide.potential[:, 0]) / kt
    fade = 1 / (1 + np.maximum(mesh.beyond, 0) / np.sqrt(device.depth * device.oxide_thickness))
    potential = np.repeat((column[:, None] * fade)[1:-1, :, None], mesh.plane[1], axis=2)
    return _State(potential=potential, gate=(wide.threshold + device.body_bias) / kt)


@dataclass(frozen=True, kw_only=True)
class UniformThreshold:
    """A device with continuous doping at its own threshold; nothing changes along its length.

    threshold : gate against source, above flat band [V]
    column : potential over kT/q of the free lines, array (lines, along the width, 1) [1]
    response : its growth with the gate's potential, the same shape [1]
    """

    threshold: float
    column: np.ndarray
    response: np.ndarray


def uniform_threshold(device: AtomDevice, precision=2e-6) -> UniformThreshold:
    """Threshold of a device with continuous doping, on the mesh of the atomistic one.

    device : see `physics.atom_mesh.AtomDevice`
    precision : of the gate voltage at the end [V]
    Returns UniformThreshold. Raises RuntimeError where the iteration does not end.
    Range: as `solve_device`.
    Source: Poisson's equation, see `physics.atom_poisson`.
    """
    short, kt = device.shortened(), thermal_voltage(device.temperature)
    mesh = atom_mesh(short)
    equations = atom_equations(short, mesh, dopant_charge(short, mesh, continuous_doping()))
    operator = layers(equations, mesh.plane)
    state = _driven(_Sheet(short, mesh), equations, operator, _guess(short, mesh), precision / kt)
    column, response = state.potential[:, :, :1], state.response[:, :, :1]
    return UniformThreshold(threshold=state.gate * kt - device.body_bias, column=column, response=response)


def solve_device(device: AtomDevice, dopants: Dopants, uniform=None, precision=2e-5) -> AtomThreshold:
    """Threshold of a device with its single dopants.

    device : see `physics.atom_mesh.AtomDevice`
    dopants : see `physics.atom_dopants.Dopants`
    uniform : see `uniform_threshold`, worth keeping for many devices of one kind; None to solve it here
    precision : of the gate voltage at the end [V]
    Returns AtomThreshold. Raises RuntimeError where the iteration does not end, and ValueError for a dopant outside the
    silicon and for a `uniform` of another mesh.
    Range: a long channel with mirrors at source and drain; low drain voltage; full ionisation; no quantum shift; an ideal
    gate. Mobility is the same everywhere. The box of 1 nm does not resolve the layer that inverts along a trench's wall.
    Source: Poisson's equation, see `physics.atom_poisson`; the kind of model of A. Asenov, IEEE Trans. Electron Devices
    45, 2505 (1998) (memory), without its junctions.
    """
    uniform = uniform or uniform_threshold(device)
    mesh, kt = atom_mesh(device), thermal_voltage(device.temperature)
    if uniform.column.shape[:2] != (mesh.depth.size - 2, mesh.plane[0]):
        raise ValueError("uniform belongs to a device with another mesh: solve uniform_threshold for this one")
    equations, sheet = atom_equations(device, mesh, dopant_charge(device, mesh, dopants)), _Sheet(device, mesh)
    start, gate = np.repeat(uniform.column, mesh.plane[1], axis=2), (uniform.threshold + device.body_bias) / kt
    guess = _State(potential=start, gate=gate, response=uniform.response)
    state = _driven(sheet, equations, layers(equations, mesh.plane), guess, precision / kt)
    gate_charge, silicon_charge, below = equations.charges(state.potential, state.gate)
    unit = VACUUM_PERMITTIVITY * kt
    top = np.full((1, *mesh.plane), state.gate)
    return AtomThreshold(
        device=device,
        mesh=mesh,
        threshold=state.gate * kt - device.body_bias,
        uniform_threshold=uniform.threshold,
        potential=np.concatenate([top, state.potential, 0 * top]) * kt,
        inversion_sheet=sheet.density(equations.electrons(state.potential)),
        device_gate_charge=unit * gate_charge,
        device_silicon_charge=unit * silicon_charge,
        substrate_charge=unit * below,
        iterations=state.iterations,
        linear_iterations=state.linear_iterations,
    )
