"""What is to be computed: how many samples, in which blocks. Where it runs is the runner's business."""

from collections.abc import Iterator
from dataclasses import dataclass
from math import ceil
from typing import NamedTuple


class Block(NamedTuple):
    """A unit of work: its number, and how many samples it holds."""

    number: int
    size: int


@dataclass(frozen=True, kw_only=True)
class Plan:
    """A number of samples, or a precision to be reached.

    samples : total number of samples; with a precision, the most that may be spent
    block_size : samples per block, fixed for a study so that a longer run starts with a shorter one's blocks
    precision : half-width of the 95 % interval to be reached, in the study's own measure; None for a fixed number
    minimum_blocks : blocks of the pilot that sets the length of a precision-driven run
    """

    samples: int
    block_size: int
    precision: float | None = None
    minimum_blocks: int = 4

    def __post_init__(self):
        if self.samples < 1 or self.block_size < 1 or self.minimum_blocks < 1:
            raise ValueError("samples, block_size and minimum_blocks must be 1 or more")
        if self.precision is not None and not self.precision > 0:
            raise ValueError("precision must be above 0")

    def blocks(self, first_sample: int, samples: int) -> Iterator[Block]:
        """Blocks that hold the samples from `first_sample` (a multiple of block_size) up to `samples`, one at a time."""
        for start in range(first_sample, samples, self.block_size):
            yield Block(start // self.block_size, min(self.block_size, samples - start))

    def count(self, first_sample: int, samples: int) -> int:
        """How many `blocks` gives."""
        return len(range(first_sample, samples, self.block_size))

    def first_target(self) -> int:
        """Samples of the first round: everything, or the pilot of a precision-driven run."""
        if self.precision is None:
            return self.samples
        return min(self.samples, self.minimum_blocks * self.block_size)

    def next_target(self, done: int, half_width: float) -> int:
        """Samples to go on to after `done` gave `half_width`; `done` itself when that is enough.

        The interval shrinks with the root of the samples, so one round after the pilot nearly always suffices; 5 % are
        added for the pilot's own error. Targets are whole blocks and depend on the data of whole rounds alone, never on
        which worker was quick. Deciding once from a pilot, not after every block, keeps the estimate unbiased.
        """
        if self.precision is None or done >= self.samples or half_width <= self.precision:
            return done
        growth = 1.05 * (half_width / self.precision) ** 2
        wanted = ceil(min(done * growth, self.samples) / self.block_size) * self.block_size
        return min(max(wanted, done + self.block_size), self.samples)
