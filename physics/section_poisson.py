"""Poisson's equation with Boltzmann carriers on the mesh of a section: box scheme, full Newton, sparse direct solve.

Potentials are normalised to kT/q and measured from neutral silicon deep in the substrate, which holds the body's Fermi
level; the inversion layer holds the source's, a body bias away. The gate's potential can be given, or be one more
unknown that a wanted inversion charge decides.
"""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csc_array
from scipy.sparse.linalg import splu

from physics.constants import ELEMENTARY_CHARGE, VACUUM_PERMITTIVITY
from physics.section_geometry import Section
from physics.section_mesh import SectionMesh
from physics.silicon import thermal_voltage

_LARGEST_STEP = 4.0  # of the potential in silicon in one iteration [kT/q]
_SMALL_STEP = 1e-5  # below it the next iterate is exact to its square
_MOST_ITERATIONS = 200


@dataclass(frozen=True, kw_only=True)
class BoxEquations:
    """The equations of one section on one mesh. Arrays of nodes have the mesh's shape (depth, lateral).

    fixed : nodes whose potential is given: in the gate, and the lowest line [1]
    is_gate : nodes in the gate [1]
    is_silicon : nodes with silicon in their box [1]; elsewhere large potentials would overflow the carriers
    along, down : relative permittivity times box face over distance between neighbours [1]
    silicon_area : silicon in each box [m^2]
    dopants : acceptors in each box per unit length [m^-1]
    substrate_doping : doping deep in the substrate [m^-3]
    electron_density : electrons where the potential is zero, body bias included [m^-3]
    charge_scale : elementary charge over vacuum permittivity and kT/q [m]
    """

    fixed: np.ndarray
    is_gate: np.ndarray
    is_silicon: np.ndarray
    along: np.ndarray
    down: np.ndarray
    silicon_area: np.ndarray
    dopants: np.ndarray
    substrate_doping: float
    electron_density: float
    charge_scale: float

    @property
    def gate_pull(self):
        """Right-hand side [1] that a gate raised by kT/q brings to the nodes beside it; zero at fixed nodes."""
        return np.where(self.fixed, 0.0, -self.displacement(self.is_gate.astype(float)))

    def inversion(self, potential):
        """Electrons in each box per unit length [m^-1] at a potential [1]. Arguments as in `holes`."""
        return self.silicon_area * (self.electron_density * np.exp(potential * self.is_silicon))

    def holes(self, potential):
        """Holes in each box.

        potential : over kT/q, array of nodes [1]
        Returns holes per unit length [m^-1].
        Source: Boltzmann statistics.
        """
        return self.silicon_area * (self.substrate_doping * np.exp(-potential * self.is_silicon))

    def residual(self, potential):
        """What is missing in each box to Gauss's law; zero at fixed nodes.

        potential : over kT/q, array of nodes [1]
        Returns charge over vacuum permittivity and kT/q [1].
        Source: box integral of Poisson's equation.
        """
        charge = self.holes(potential) - self.inversion(potential) - self.dopants
        return np.where(self.fixed, 0.0, self.displacement(potential) - self.charge_scale * charge)

    def displacement(self, potential):
        """Dielectric flux out of each box.

        potential : over kT/q, array of nodes [1]
        Returns flux over vacuum permittivity and kT/q [1].
        Source: box scheme.
        """
        flux = np.zeros_like(potential)
        along = self.along * np.diff(potential, axis=1)
        down = self.down * np.diff(potential, axis=0)
        flux[:, :-1] -= along
        flux[:, 1:] += along
        flux[:-1] -= down
        flux[1:] += down
        return flux


def box_equations(section: Section, mesh: SectionMesh):
    """Equations of a section on a mesh.

    section : see `physics.section_geometry.Section`
    mesh : see `physics.section_mesh.SectionMesh`
    Returns BoxEquations.
    Source: box integration of Poisson's equation; S. Selberherr, Analysis and Simulation of Semiconductor Devices
    (1984), ch. 6 (memory).
    """
    kt, doping = thermal_voltage(section.temperature), section.profile.doping
    fixed = mesh.is_gate.copy()
    fixed[-1] = True
    along, down = mesh.conductances
    silicon_area = mesh.silicon_area
    return BoxEquations(
        fixed=fixed,
        is_gate=mesh.is_gate,
        is_silicon=silicon_area > 0,
        along=along,
        down=down,
        silicon_area=silicon_area,
        dopants=mesh.dopants,
        substrate_doping=doping,
        electron_density=section.intrinsic_density**2 / doping * np.exp(-section.body_bias / kt),
        charge_scale=ELEMENTARY_CHARGE / (VACUUM_PERMITTIVITY * kt),
    )


class NewtonMatrix:
    """The symmetric, positive definite matrix of the linearised equations, over the nodes that are not fixed.

    equations : see `BoxEquations`
    """

    def __init__(self, equations: BoxEquations):
        free = ~equations.fixed
        number = np.cumsum(free).reshape(free.shape) - 1
        size = int(number[-1, -1]) + 1
        pairs = [(slice(None, -1), slice(None)), (slice(1, None), slice(None))]
        pairs = [tuple(pairs), tuple((columns, rows) for rows, columns in pairs)]
        first, second, value, diagonal = [np.arange(size)], [np.arange(size)], [np.zeros(size)], np.zeros(free.shape)
        for (one, other), conductance in zip(pairs, (equations.down, equations.along)):
            diagonal[one] += conductance
            diagonal[other] += conductance
            both = free[one] & free[other]
            first += [number[one][both], number[other][both]]
            second += [number[other][both], number[one][both]]
            value += [-conductance[both]] * 2
        indices = np.concatenate(first), np.concatenate(second)
        self._matrix = csc_array((np.concatenate(value), indices), shape=(size, size))
        self._matrix.sort_indices()
        columns = np.repeat(np.arange(size), np.diff(self._matrix.indptr))
        self._on_diagonal = np.flatnonzero(self._matrix.indices == columns)
        self._equations, self._free, self._conductance = equations, free, diagonal[free]

    def factored(self, potential):
        """Factor the matrix at a potential.

        potential : over kT/q, array of nodes [1]
        Returns a function from right-hand sides (nodes, any number of sides last) to solutions, zero at fixed nodes [1].
        Source: sparse LU without pivoting, which a positive definite matrix does not need; the ordering is minimum degree.
        """
        equations, free = self._equations, self._free
        carriers = equations.inversion(potential) + equations.holes(potential)
        self._matrix.data[self._on_diagonal] = self._conductance + equations.charge_scale * carriers[free]
        factor = splu(self._matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})

        def solved(right):
            solution = np.zeros(right.shape)
            solution[free] = factor.solve(right[free])
            return solution

        return solved


@dataclass(frozen=True, kw_only=True)
class Solution:
    """Potential and gate that satisfy the equations.

    potential : over kT/q, array of nodes (depth, lateral) [1]
    gate : potential of the gate over kT/q, against neutral substrate [1]
    iterations : how many linear solves it took [1]
    """

    potential: np.ndarray
    gate: float
    iterations: int


def newton(equations: BoxEquations, potential, gate, inversion_goal=None):
    """Solve the equations from a guess.

    equations : see `BoxEquations`
    potential : guess over kT/q, array of nodes [1]
    gate : potential of the gate over kT/q [1]; a guess where a goal is given
    inversion_goal : electrons per unit length that the gate shall bring about [m^-1]; None to keep the gate
    Returns a Solution. Raises RuntimeError where the iteration does not end.
    Source: Newton's method; the goal, on a logarithmic scale, is one more row and column of the matrix, eliminated by a
    second right-hand side.
    """
    matrix, silicon, free = NewtonMatrix(equations), equations.is_silicon, ~equations.fixed
    potential = np.where(equations.is_gate, gate, potential)
    potential[-1] = 0.0
    gate_pull = equations.gate_pull
    for iteration in range(1, _MOST_ITERATIONS + 1):
        right = np.stack([-equations.residual(potential), gate_pull], axis=-1)
        step, per_gate = np.moveaxis(matrix.factored(potential)(right), -1, 0)
        raised = 0.0
        if inversion_goal is not None:
            electrons = equations.inversion(potential) * free
            total = electrons.sum()
            wanted = np.log(inversion_goal / total) - (electrons * step).sum() / total
            raised = wanted / ((electrons * per_gate).sum() / total)
            step = step + raised * (per_gate + equations.is_gate)
        largest = np.abs(step[silicon]).max()
        damping = min(1.0, _LARGEST_STEP / largest) if largest else 1.0
        potential = potential + damping * step
        gate = gate + damping * raised
        if damping == 1.0 and max(np.abs(step).max(), abs(raised)) < _SMALL_STEP:
            return Solution(potential=potential, gate=float(gate), iterations=iteration)
    raise RuntimeError(
        f"Newton's iteration did not end after {_MOST_ITERATIONS} steps; the last was {largest:.3g} kT/q"
    )
