"""The kinds of question, by name. Their modules are imported only when one is asked: they bring the heavy libraries."""

from importlib import import_module
from types import ModuleType

SUMMARIES = {
    "spread": "Threshold voltage against width: mean, sigma, skew, tails, and which cause contributes how much.",
    "timing": "Timing yield of chips with many equal paths against width, and the period or width a target yield needs.",
    "loss": "Yield loss of narrow devices: shares outside their limits down to 1e-10, chip yield with spares, and area.",
    "edge": "The channel's edge solved: threshold shift and dopant scatter against width, and how far closed forms hold.",
    "atoms": "Dopants placed one by one in three dimensions: lowering and sigma of the threshold, beside the fast model's.",
    "pair": "Smallest width of matched pairs that keeps their offset or current error inside a limit on enough chips.",
}
NOT_COMPARED = {
    "edge": "is not sampled",
    "atoms": "has dopants of its own for each option",
}  # so there is nothing to pair
COMPARABLE = tuple(kind for kind in SUMMARIES if kind not in NOT_COMPARED)


def question_module(kind: str) -> ModuleType:
    """Module of a kind of question; it has `Question` and `answer`. Kind: of SUMMARIES."""
    return import_module(f"studies.{kind}")
