"""Poisson's equation in three dimensions with single dopants: box scheme, Newton's method, conjugate gradients.

Potentials are over kT/q and measured from neutral silicon deep in the substrate. Electrons follow Boltzmann's law. Holes
follow it where they are fewer than in neutral silicon; where they crowd, around an acceptor, only its first-order term
is kept (P. Debye and E. Hueckel, Phys. Z. 24, 185 (1923)). The whole law would bind a hole to every acceptor in neutral
silicon and at the soft depletion edge: the well of a point charge has no bottom on a fine mesh, while in silicon these
acceptors are ionised.
"""

from dataclasses import dataclass

import numpy as np

from physics.atom_layers import LayeredOperator, conjugate_gradients
from physics.atom_mesh import AtomDevice, AtomMesh
from physics.constants import ELEMENTARY_CHARGE, VACUUM_PERMITTIVITY
from physics.silicon import thermal_voltage

_STEEP = 1.0  # steps beyond it are shortened to their logarithm [kT/q]


@dataclass(frozen=True, kw_only=True)
class AtomEquations:
    """The equations of one device. Arrays cover the free lines: all but the highest, in the gate, and the lowest.

    fixed : nodes in the gate, array (lines, along the width, 1) [1]
    depth_links : relative permittivity times face over distance between lines, one more than free lines [m]
    width_links, length_links : the same between neighbours along the width and the length [m]
    gate_pull : flux that a gate raised by kT/q sends to each node [m], array as `fixed`
    volume : silicon in each box [m^3], array as `fixed`
    neutral : potential of neutral silicon with the doping there [1], array as `fixed`
    dopants : acceptors in each box [1], array (lines, along the width, along the length)
    substrate_doping : doping deep in the substrate [m^-3]
    electron_density : electrons where the potential is zero, body bias included [m^-3]
    charge_scale : elementary charge over vacuum permittivity and kT/q [m]
    bound_holes : whether holes follow Boltzmann's law where they crowd, too
    """

    fixed: np.ndarray
    depth_links: np.ndarray
    width_links: np.ndarray
    length_links: np.ndarray
    gate_pull: np.ndarray
    volume: np.ndarray
    neutral: np.ndarray
    dopants: np.ndarray
    substrate_doping: float
    electron_density: float
    charge_scale: float
    bound_holes: bool

    def electrons(self, potential):
        """Electrons in each box [1]. Arguments as in `holes`."""
        return self.volume * self.electron_density * np.exp(np.where(self.volume > 0, potential, 0.0))

    def holes(self, potential):
        """Holes in each box, and how fast they grow fewer with the potential.

        potential : over kT/q, array (lines, along the width, along the length) [1]
        Returns holes [1] and their loss per kT/q [1].
        Source: Boltzmann's law, and its first order where holes crowd; see the module.
        """
        above = potential - self.neutral
        most = self.volume * self.substrate_doping * np.exp(-self.neutral)
        thinned = most * np.exp(-above if self.bound_holes else -np.maximum(above, 0.0))
        if self.bound_holes:
            return thinned, thinned
        return thinned - most * np.minimum(above, 0.0), thinned

    def displacement(self, potential):
        """Dielectric flux out of each box, with the gate and the lowest line at zero.

        potential : over kT/q, array (lines, along the width, along the length) [1]
        Returns flux over vacuum permittivity and kT/q [m].
        Source: box scheme.
        """
        flux = potential * (self.depth_links[:-1] + self.depth_links[1:])
        flux[1:] -= self.depth_links[1:-1] * potential[:-1]
        flux[:-1] -= self.depth_links[1:-1] * potential[1:]
        step = self.width_links * np.diff(potential, axis=1)
        flux[:, :-1] -= step
        flux[:, 1:] += step
        step = self.length_links * np.diff(potential, axis=2)
        flux[:, :, :-1] -= step
        flux[:, :, 1:] += step
        return flux

    def residual(self, potential, gate):
        """What is missing in each box to Gauss's law, and what screens there.

        potential : over kT/q, array (lines, along the width, along the length), that of the gate at its nodes [1]
        gate : potential of the gate over kT/q [1]
        Returns charge over vacuum permittivity and kT/q, zero in the gate [m], and its growth per kT/q [m].
        Source: box integral of Poisson's equation.
        """
        electrons = self.electrons(potential)
        holes, loss = self.holes(potential)
        charge = holes - electrons - self.dopants
        missing = self.displacement(potential) - self.charge_scale * charge
        missing[0] -= gate * self.depth_links[0]
        return np.where(self.fixed, 0.0, missing), self.charge_scale * (electrons + loss)

    def charges(self, potential, gate):
        """Charges on the gate, in the silicon of the free lines, and below them; by Gauss's law their sum is zero.

        potential : over kT/q, array (lines, along the width, along the length) [1]
        gate : potential of the gate over kT/q [1]
        Returns three charges over vacuum permittivity and kT/q [m].
        Source: fluxes through the highest and the lowest line.
        """
        top = self.depth_links[0] * (gate - potential[0])
        raised = self.displacement(potential)
        raised[0] -= self.depth_links[0] * gate
        on_gate = float(top.sum() + (raised * self.fixed).sum())
        silicon = self.charge_scale * float((self.holes(potential)[0] - self.electrons(potential) - self.dopants).sum())
        return on_gate, silicon, -float((self.depth_links[-1] * potential[-1]).sum())


def atom_equations(device: AtomDevice, mesh: AtomMesh, charge):
    """Equations of a device on its mesh.

    device : see `physics.atom_mesh.AtomDevice`
    mesh : see `physics.atom_mesh.AtomMesh`
    charge : acceptors in each box, from `physics.atom_dopants.dopant_charge` [1]
    Returns AtomEquations.
    Source: box integration of Poisson's equation; S. Selberherr, Analysis and Simulation of Semiconductor Devices
    (1984), ch. 6 (memory).
    """
    kt, doping = thermal_voltage(device.temperature), device.profile.doping
    height, wide, long = np.diff(mesh.depth)[:, None], mesh.box_width, mesh.box_length
    down = (mesh.permittivity * wide * long / height)[..., None]
    halves = mesh.permittivity * height / 2
    along = halves[:-1] + halves[1:]
    series = [2 * part[:, :-1] * part[:, 1:] / (part[:, :-1] + part[:, 1:]) for part in (halves[:-1], halves[1:])]
    inner = slice(1, -1)
    volume = mesh.gathered(mesh.is_silicon.astype(float))
    held = mesh.gathered(mesh.doping)
    local = np.divide(held, volume, out=np.full_like(held, doping), where=volume > 0)
    equations = AtomEquations(
        fixed=mesh.is_gate[inner, :, None],
        depth_links=down,
        width_links=((series[0] + series[1]) * long / wide)[..., None],
        length_links=(along * wide / long)[..., None],
        gate_pull=np.zeros((mesh.depth.size - 2, mesh.plane[0], 1)),
        volume=volume[inner, :, None],
        neutral=-np.log(local / doping)[inner, :, None],
        dopants=charge[inner],
        substrate_doping=doping,
        electron_density=device.intrinsic_density**2 / doping * np.exp(-device.body_bias / kt),
        charge_scale=ELEMENTARY_CHARGE / (VACUUM_PERMITTIVITY * kt),
        bound_holes=device.bound_holes,
    )
    pull = -equations.displacement(equations.fixed.astype(float))
    pull[0] += down[0]
    equations.gate_pull[...] = np.where(equations.fixed, 0.0, pull)
    return equations


def layers(equations: AtomEquations, plane):
    """The layered operator of a device: its conductances averaged along the width.

    equations : see `AtomEquations`
    plane : boxes along the width and along the length [1]
    Returns a LayeredOperator.
    Source: average, own choice; exact for a channel without edges.
    """
    links = equations.depth_links, equations.width_links, equations.length_links
    means = [part.mean(axis=(1, 2)) for part in links]
    return LayeredOperator(*means, plane)


class Linearised:
    """The linearised equations at one potential, and loose solutions of them.

    equations : see `AtomEquations`
    operator : see `physics.atom_layers.LayeredOperator`
    screening : what carriers add to the diagonal, from `AtomEquations.residual` [m]
    """

    def __init__(self, equations: AtomEquations, operator: LayeredOperator, screening):
        self.equations, self._screening = equations, screening
        self._operator = operator.screened(screening.mean(axis=(1, 2)) + held(equations))
        self._free = None if not equations.fixed.any() else ~equations.fixed

    def applied(self, direction):
        """Product of the matrix with a direction.

        direction : array (lines, along the width, along the length), zero in the gate [1]
        Returns product, zero in the gate [m].
        Source: box scheme.
        """
        image = self.equations.displacement(direction)
        image += self._screening * direction
        return image if self._free is None else image * self._free

    def inverse(self, missing):
        """Approximate solution by the layers.

        missing : array (lines, along the width, along the length), zero in the gate [m]
        Returns solution, zero in the gate [1].
        Source: see `physics.atom_layers`.
        """
        solution = self._operator.solved(missing)
        return solution if self._free is None else solution * self._free

    def solved(self, missing, tolerance):
        """Solution by conjugate gradients.

        missing : right-hand side, array (lines, along the width, along the length), zero in the gate [m]
        tolerance : see `physics.atom_layers.conjugate_gradients` [1]
        Returns solution [1] and iterations [1].
        Source: see there.
        """
        return conjugate_gradients(self.applied, self.inverse, missing, tolerance)


def held(equations: AtomEquations):
    """What the gate adds to the layers beside it: as if each line were held in proportion to its nodes in the gate.

    equations : see `AtomEquations`
    Returns conductance per free line [m], zero below the gate.
    Source: own choice, for the preconditioner alone.
    """
    share = equations.fixed.mean(axis=(1, 2))
    own = (equations.depth_links[:-1] + equations.depth_links[1:]).mean(axis=(1, 2))
    return own * share / (1 - share)


def newton_step(linearised: Linearised, missing, tolerance):
    """One step of Newton's method, shortened where it is large.

    linearised : see `Linearised`
    missing : from `AtomEquations.residual`, array (lines, along the width, along the length) [m]
    tolerance : of the linear solution [1]
    Returns the step [1] and linear iterations [1].
    Source: Newton's method, its linear equations solved loosely: R. S. Dembo, S. C. Eisenstat and T. Steihaug, SIAM J.
    Numer. Anal. 19, 400 (1982). A step s beyond 1 becomes 1 + ln s in silicon, own choice: carriers follow exp(s).
    """
    equations = linearised.equations
    step, iterations = linearised.solved(-missing, tolerance)
    steep = (np.abs(step) > _STEEP if equations.bound_holes else step > _STEEP) & (equations.volume > 0)
    step[steep] = np.sign(step[steep]) * (_STEEP + np.log(np.abs(step[steep]) / _STEEP))
    return step, iterations
