"""A model driven by named standard normals, block by block: draws -> model -> tally."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from mc.correlation import Copula
from mc.groups import GROUPS, Groups
from mc.laws import Law
from mc.plan import Block
from mc.streams import Streams
from mc.tally import Grid, Moments, Tally

SLICE = 8192  # samples evaluated at once: a dozen arrays of this length stay in a core's cache
NAMED = 3  # inputs that are named when an output is not finite
SLICES_A_BLOCK = 8  # by which the groups of one block's slices go on from those of the block before
PILOT = 4096  # samples that center and scale the tallies

Model = Callable[[Mapping[str, np.ndarray]], Any]


@dataclass(frozen=True, kw_only=True)
class Inputs:
    """The random inputs of a model.

    seed : see `mc.streams`
    names : inputs the model reads
    copula : correlations among them and others
    slice_size : samples evaluated at once
    """

    seed: int
    names: tuple[str, ...]
    copula: Copula = field(default_factory=Copula)
    slice_size: int = SLICE

    def __post_init__(self):
        if not isinstance(self.seed, int) or self.seed < 0:
            raise ValueError(f"seed {self.seed!r}: a whole number, 0 or more, is needed")

    def slices(self, block: Block):
        """The block's draws, a dictionary of (up to slice_size,) arrays at a time."""
        streams = Streams(self.seed, block.number, self.copula.needed(self.names))
        for start in range(0, block.size, self.slice_size):
            yield self.copula.mix(streams.take(min(self.slice_size, block.size - start)), self.names)


@dataclass(frozen=True, kw_only=True)
class LawModel:
    """A model of physical inputs turned into a model of standard normals.

    model : function of a dictionary of values
    laws : law of every input, by name
    """

    model: Model
    laws: Mapping[str, Law]

    def __call__(self, draws):
        return self.model({name: law.from_normal(draws[name]) for name, law in self.laws.items()})


def _outputs(model, draws):
    """A model's outputs, shape (outputs, n); raises ValueError when n is not that of the draws."""
    outputs, count = np.atleast_2d(model(draws)), len(next(iter(draws.values())))
    if outputs.ndim != 2 or outputs.shape[1] != count:
        raise ValueError(
            f"a model of {count} draws returned outputs of shape {outputs.shape}: (outputs, {count}) is needed"
        )
    return outputs


@dataclass(frozen=True, kw_only=True)
class Experiment:
    """A task for the runner: tally a model's outputs over a block.

    model : function of a dictionary of standard normals, each (n,); returns outputs (outputs, n), or (n,) for one
    inputs : see `Inputs`
    grid : where the tallies are centered, see `Experiment.prepare`
    tally : `Tally`, or `Moments` where no quantile will be asked for
    """

    model: Model
    inputs: Inputs
    grid: Grid
    tally: type[Moments] = Tally

    @classmethod
    def prepare(cls, model: Model, inputs: Inputs, tally: type[Moments] = Tally) -> "Experiment":
        """An experiment whose grid comes from a pilot, the first slice of block 0, which the run will see again."""
        draws = next(inputs.slices(Block(0, PILOT)))
        return cls(model=model, inputs=inputs, grid=Grid.from_pilot(_outputs(model, draws)), tally=tally)

    def __call__(self, block: Block) -> Moments:
        """Tally of one block. Raises FloatingPointError that names the inputs when an output is not finite."""
        try:
            return self.tally.of(self.grid, self._evaluated(block))
        except FloatingPointError as error:
            raise FloatingPointError(f"{error}{self._culprit(block)}") from None

    def _culprit(self, block) -> str:
        """The inputs furthest out at the first sample whose outputs are not finite."""
        for draws in self.inputs.slices(block):
            bad = np.flatnonzero(~np.isfinite(_outputs(self.model, draws)).all(axis=0))
            if bad.size:
                at = {name: float(values[bad[0]]) for name, values in draws.items()}
                furthest = sorted(at, key=lambda name: -abs(at[name]))[:NAMED]
                return " at " + ", ".join(f"{name} = {at[name]:+.2f} sigma" for name in furthest)
        return ""

    def _evaluated(self, block):
        for draws in self.inputs.slices(block):
            outputs = _outputs(self.model, draws)
            del draws  # the next slice then takes their place in the cache
            yield outputs


@dataclass(frozen=True, kw_only=True)
class GroupedExperiment:
    """An experiment whose tallies are kept in groups, slice by slice: a block is large for speed, a group need not be.

    experiment : see `Experiment`
    """

    experiment: Experiment

    def __call__(self, block: Block) -> Groups:
        """Tallies of one block's slices. Raises FloatingPointError as `Experiment` does."""
        tallies, sizes = {}, {}
        try:
            for index, outputs in enumerate(self.experiment._evaluated(block)):
                number = (SLICES_A_BLOCK * block.number + index) % GROUPS
                tally = self.experiment.tally.of(self.experiment.grid, [outputs])
                tallies[number] = tallies[number] + tally if number in tallies else tally
                sizes[number] = sizes.get(number, 0) + outputs.shape[1]
        except FloatingPointError as error:
            raise FloatingPointError(f"{error}{self.experiment._culprit(block)}") from None
        return Groups(tallies, sizes)
