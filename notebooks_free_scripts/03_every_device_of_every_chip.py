"""Does conditioning on the die give the same timing yield as drawing every device of every chip, and what does it save?

The brute-force twin draws each device of each stage of each path. On the same dies the conditional probabilities must
agree with its yes-or-no outcomes within their binomial error; the saving is the ratio of device evaluations at an equal
width of the yield's interval.

Run: python notebooks_free_scripts/03_every_device_of_every_chip.py
"""

from importlib.resources import files

import numpy as np

from mc.plan import Block
from studies import timing
from studies.chip import fail_probability
from studies.process_file import load_process
from studies.settings import Settings


def slowest_of_every_device(stage, die, paths, random):
    """Slowest path of each chip with every device drawn [s], and the number of device evaluations.

    stage : studies.chip.Stage; die : draws above device level, each (dies,); random : numpy Generator
    """
    load = stage.load(die)[:, None]
    above = {name: normal[:, None] for name, normal in die.items()}
    shape = (load.shape[0], paths * stage.stages)
    delays = []
    for side in stage.sides:
        local = {name: random.standard_normal(shape) for name in side.population.names(level="device")}
        draws = {**above, **local}
        delay = stage.delay(side, draws, side.population.silicon(draws), load)
        delays.append(delay.reshape(-1, paths, stage.stages))
    down, up = delays
    edge_a = down[:, :, 0::2].sum(axis=2) + up[:, :, 1::2].sum(axis=2)
    edge_b = up[:, :, 0::2].sum(axis=2) + down[:, :, 1::2].sum(axis=2)
    return np.maximum(edge_a.max(axis=1), edge_b.max(axis=1)), 2 * shape[0] * shape[1]


def compare(question, process, dies, seed=11):
    """Outcomes and conditional probabilities at the question's period on the same dies, and evaluations of each."""
    chips = timing.prepare(question, process, Settings(seed=seed))
    stage, random = chips.stages[0], np.random.default_rng(seed)
    outcomes, probabilities, drawn, slowest = [], [], 0, []
    for die in chips.inputs.slices(Block(0, dies)):
        every, count = slowest_of_every_device(stage, die, question.paths, random)
        slowest.append(every)
        drawn += count
        outcomes.append(every <= chips.periods[0, 0])
        probabilities.append(1 - fail_probability(stage.path_cumulants(die), chips.periods[0, 0], question.paths))
    return map(np.concatenate, (outcomes, probabilities, slowest)), drawn, dies * stage.evaluations_per_die


if __name__ == "__main__":
    process = load_process(files("studies.examples") / "option_a.toml")
    question = timing.Question(
        width_um=[0.16], length_um=0.13, period_ps=1260, paths=200, stages=10, supply_v=0.6, wire_capacitance_ff=0.4
    )
    (outcomes, probabilities, slowest), drawn, conditional = compare(question, process, dies=1000)
    error = np.sqrt((probabilities * (1 - probabilities)).sum()) / len(outcomes)
    difference = outcomes.mean() - probabilities.mean()
    print(f"yield with every device drawn {outcomes.mean():.4f}, by conditioning {probabilities.mean():.4f};")
    print(f"on the same dies they differ by {difference:+.4f}, {abs(difference) / error:.2f} standard errors")
    # evaluations for an equal interval: proportional to variance per die times evaluations per die
    saving = (drawn * outcomes.var()) / (conditional * probabilities.var())
    print(f"device evaluations: {drawn} against {conditional}, at equal interval width {saving:.0f} times fewer")
    assert abs(difference) < 4 * error
    assert saving > 25
