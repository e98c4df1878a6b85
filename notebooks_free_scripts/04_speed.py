"""How fast is it, against what? Ratios measured side by side in one run; absolute times depend on the machine.

Run: python notebooks_free_scripts/04_speed.py            (about two minutes)
     python notebooks_free_scripts/04_speed.py --short    (a few seconds, the tests' choice: same code, fewer samples)
"""

import math
import subprocess
import sys
from dataclasses import replace
from importlib.resources import files
from pathlib import Path
from runpy import run_path
from statistics import median
from time import perf_counter

import numpy as np

from mc.experiment import Experiment, Inputs
from mc.intervals import Summary
from mc.plan import Block, Plan
from mc.runner import run
from physics.constants import ELEMENTARY_CHARGE, OXIDE_PERMITTIVITY, SILICON_PERMITTIVITY
from physics.silicon import thermal_voltage
from studies import spread, timing
from studies.population import Population
from studies.process_file import load_process

SHORT = "--short" in sys.argv
PROCESS = load_process(files("studies.examples") / "option_a.toml")
WIDTH, LENGTH = 0.2, 0.13


def experiment(widths=(WIDTH,), process=PROCESS):
    """The spread study's own experiment: all causes, the asked widths."""
    population = Population(process, "n")
    names = tuple(item.name for item in population.inputs if item.cause not in spread.WITHOUT_EFFECT)
    model = spread.Thresholds(
        population=population,
        geometries=tuple(population.geometry(width, LENGTH) for width in widths),
        drain_voltage=0.05,
        groups=(names,),
    )
    return Experiment.prepare(model, Inputs(seed=1, names=names, copula=population.copula))


def side_by_side(rounds, **tasks):
    """Median seconds of each task, run in turn so that a slow moment of the machine meets all alike."""
    times = {name: [] for name in tasks}
    for _ in range(rounds + 1):
        for name, task in tasks.items():
            started = perf_counter()
            task()
            times[name].append(perf_counter() - started)
    return {name: median(each[1:]) for name, each in times.items()}


def looked_up(law, normal, count):
    """The table of the counted law for one device, scalar mathematics."""
    place = (normal - law.normal_start) * law.steps_per_normal
    cell = min(max(int(place), 0), len(law.center) - 1)
    share, distance = place - cell, 1 / math.sqrt(count) - law.inverse_root
    sided = cell + (len(law.center) if distance < 0 else 0)
    center = float(law.center[cell]) + share * float(law.rise[cell])
    return center + distance * (float(law.slope[sided]) + share * float(law.slope_rise[sided]))


def one_device_after_another(draws, population, geometry):
    """The same model as a straightforward loop over devices, scalar mathematics."""
    nominal, laws = population.nominal, {item.name: item for item in population.inputs}
    kt = thermal_voltage(nominal.temperature)
    results = []
    for index in range(len(next(iter(draws.values())))):
        moved = dict.fromkeys(("oxide_thickness", "doping", "width", "length"), 0.0)
        local = {}
        for name, values in draws.items():
            item = laws[name]
            if item.law is None:
                local[item.cause] = float(values[index])
            else:
                moved[item.cause] += item.law.sigma * float(values[index])
        doping = nominal.profile.doping * (1 + moved["doping"])
        width = geometry.width + moved["width"] + geometry.active_edge_sigma * local["active_edges"]
        length = geometry.length + moved["length"] + geometry.gate_edge_sigma * local["gate_edges"]
        thickness = nominal.oxide_thickness * (1 + moved["oxide_thickness"])
        thickness *= 1 + geometry.oxide_sigma * local["oxide_roughness"]
        fermi = kt * math.log(doping / nominal.intrinsic_density)
        depletion = math.sqrt(2 * SILICON_PERMITTIVITY * 2 * fermi / (ELEMENTARY_CHARGE * doping))
        charge = ELEMENTARY_CHARGE * doping * depletion
        capacitance = OXIDE_PERMITTIVITY / thickness
        gap = 1.17 - 4.73e-4 * nominal.temperature**2 / (nominal.temperature + 636)
        decay = math.sqrt(SILICON_PERMITTIVITY * thickness * depletion / OXIDE_PERMITTIVITY)
        half, barrier = length / decay / 2, gap / 2 - fermi
        lowering = 2 * barrier + 0.05 + 2 * math.cosh(half) * math.sqrt(barrier * (barrier + 0.05))
        lowering /= 2 * math.sinh(half) ** 2
        factor = (1 + nominal.edge.shape * depletion / width) * (1 - lowering * capacitance / charge)
        flat_band = nominal.gate_work_function - 4.05 - gap / 2 - fermi - nominal.oxide_charge / capacitance
        count = doping * depletion * width * length
        sigma = ELEMENTARY_CHARGE / (capacitance * width * length) * math.sqrt(count / 3)
        scatter = sigma * looked_up(geometry.counted, local["dopants"], count)
        scatter += geometry.remainder_sigma * local["remainder"]
        results.append(flat_band + 2 * fermi + factor * charge / capacitance + scatter)
    return np.array(results)


def against_the_floor():
    ours = experiment()
    block = Block(0, 65536)
    times = side_by_side(
        3 if SHORT else 25, floor=lambda: [None for _ in ours.inputs.slices(block)], ours=lambda: ours(block)
    )
    ratio = times["ours"] / times["floor"]
    print(f"one width: {65536 / times['ours'] / 1e6:.2f} million thresholds a second and core, {ratio:.2f} times the")
    print(f"  time of drawing their {len(ours.inputs.names)} random numbers and nothing else")
    wide = experiment(np.geomspace(0.12, 2, 11))
    more = side_by_side(2 if SHORT else 7, one=lambda: ours(block), eleven=lambda: wide(block))
    print(f"eleven widths on the same draws cost {more['eleven'] / more['one']:.1f} times one width")
    return ratio


def against_other_ways():
    ours, population = experiment(), Population(PROCESS, "n")
    geometry = population.geometry(WIDTH, LENGTH)
    few, many = 500 if SHORT else 4000, 100_000 if SHORT else 2_000_000
    draws = next(ours.inputs.slices(Block(0, 8192)))
    some = {name: values[:few] for name, values in draws.items()}
    assert np.allclose(one_device_after_another(some, population, geometry), ours.model(some)[0], rtol=1e-9, atol=0)

    def unblocked():
        random = np.random.default_rng(1)
        values = ours.model({name: random.standard_normal(many) for name in ours.inputs.names})[0]
        return values.mean(), values.std(), np.quantile(values, [0.001, 0.999])

    times = side_by_side(
        1 if SHORT else 3,
        loop=lambda: one_device_after_another(some, population, geometry),
        unblocked=unblocked,
        ours=lambda: run(ours, Plan(samples=many, block_size=spread.BLOCK)),
    )
    ours_each = times["ours"] / many
    print(f"against a Python loop over devices: {times['loop'] / few / ours_each:.0f} times faster")
    print(f"against one big unblocked numpy expression: {times['unblocked'] / many / ours_each:.2f} times faster")


def two_workers():
    ours = experiment(np.geomspace(0.12, 2, 4))
    plan = Plan(samples=spread.BLOCK * (8 if SHORT else 480), block_size=spread.BLOCK)
    times = side_by_side(1 if SHORT else 3, one=lambda: run(ours, plan), two=lambda: run(ours, plan, jobs=2))
    print(f"two workers against one: {times['one'] / times['two']:.2f} times faster")


def solved_edges():
    device = PROCESS.process.device["n"]
    device = device.model_copy(update={"edge": device.edge.model_copy(update={"method": "solved"})})
    changed = PROCESS.process.model_copy(update={"device": PROCESS.process.device | {"n": device}})
    started, block = perf_counter(), Block(0, 65536)
    Population(replace(PROCESS, process=changed), "n")
    print(f"a table of solved edges, or reading it from the cache: {perf_counter() - started:.1f} s")
    for widths in ((WIDTH,), np.geomspace(0.12, 2, 11)):
        closed, solved = experiment(widths), experiment(widths, replace(PROCESS, process=changed))
        times = side_by_side(2 if SHORT else 15, closed=lambda: closed(block), solved=lambda: solved(block))  # noqa: B023
        print(f"solved edges, {len(widths)} widths: {times['solved'] / times['closed']:.2f} times closed forms")


def conditioning():
    script = run_path(str(Path(__file__).with_name("03_every_device_of_every_chip.py")))
    question = timing.Question(
        width_um=[0.16],
        length_um=LENGTH,
        period_ps=4800,
        paths=100 if SHORT else 1500,
        stages=40,
        supply_v=0.6,
        wire_capacitance_ff=0.4,
    )
    (outcomes, probabilities, _), drawn, conditional = script["compare"](question, PROCESS, 50 if SHORT else 400)
    saving = drawn * outcomes.var() / (conditional * probabilities.var())
    print(f"timing by conditioning: {saving:.0f} times fewer device evaluations at equal interval width")
    return saving


MEMORY = """
import sys
from runpy import run_path
sys.argv = ["04_speed.py", "--short"]
script = run_path({path!r})
from mc.plan import Plan
from mc.runner import run
run(script["experiment"](), Plan(samples={samples}, block_size=65536))
# the kernel's high-water mark of this process alone; getrusage would count the parent that forked it
print(int(next(line for line in open("/proc/self/status") if line.startswith("VmHWM")).split()[1]) / 1024)
"""


def peak_memory():
    peaks = []
    sizes = (10**5, 10**6) if SHORT else (10**6, 10**8)
    for samples in sizes:
        code = MEMORY.format(path=str(Path(__file__)), samples=samples)
        peaks.append(float(subprocess.run([sys.executable, "-c", code], capture_output=True, check=True).stdout))
    print(f"peak memory: {peaks[0]:.0f} MB for {sizes[0]:.0e} samples, {peaks[1]:.0f} MB for {sizes[1]:.0e}")
    return peaks[1] / peaks[0]


if __name__ == "__main__":
    against_the_floor()
    against_other_ways()
    two_workers()
    solved_edges()
    saving = conditioning()
    growth = peak_memory()
    # times are noisy and asserted nowhere; counts and memory are not
    assert growth < 1.1
    assert saving > 10
    assert Summary(experiment()(Block(0, 8192))).sigma().value > 0
