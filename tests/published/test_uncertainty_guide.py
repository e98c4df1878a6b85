"""Worked examples of JCGM 101:2008 (propagation of distributions by Monte Carlo), as in the list's section 7."""

import numpy as np
from scipy import stats

from mc.experiment import Experiment, Inputs, LawModel
from mc.intervals import Summary, bounded_mean
from mc.laws import Normal, Uniform
from mc.plan import Plan
from mc.runner import run

SAMPLES = 2**22
FIVE_STANDARD_ERRORS = 2 * stats.norm.cdf(5) - 1


def summaries(model, laws, outputs=1):
    """Summary of every output of a model of physical inputs; their intervals are five standard errors wide each way."""
    inputs = Inputs(seed=101, names=tuple(laws))
    experiment = Experiment.prepare(LawModel(model=model, laws=laws), inputs)
    tally, _ = run(experiment, Plan(samples=SAMPLES, block_size=2**18))
    return [Summary(tally, output, level=FIVE_STANDARD_ERRORS) for output in range(outputs)]


def holds(estimate, printed, last_digit=0.0):
    """Whether an estimate agrees with a printed value that was rounded to half of `last_digit`."""
    return estimate.low - last_digit / 2 < printed < estimate.high + last_digit / 2


def additive(values):
    """The additive model of JCGM 101:2008, 9.2: the sum of its inputs."""
    return sum(values.values())


def rectangular(sigma):
    """Rectangular law about zero with a given standard deviation."""
    return Uniform(low=-np.sqrt(3) * sigma, high=np.sqrt(3) * sigma)


# 9.2.3, second hand: u = 2.00, 95 % interval +-3.88; exact end 3.879407 (derived).
def test_four_rectangular_inputs():
    (total,) = summaries(additive, {name: rectangular(1) for name in "abcd"})
    assert holds(total.mean(), 0.0)
    assert holds(total.sigma(), 2.0)
    assert holds(total.quantile(0.025), -3.879407, 1e-6)
    assert holds(total.quantile(0.975), 3.879407, 1e-6)
    assert f"{total.quantile(0.975).value:.2f}" == "3.88"
    # a normal law of the same sigma would say 3.92
    assert not holds(total.quantile(0.975), 2 * stats.norm.ppf(0.975))


# 9.2.4, from memory: u = 10.1, +-17.0; derived: sqrt(103) = 10.1489, exact end 17.015814.
def test_one_rectangular_input_ten_times_wider():
    (total,) = summaries(additive, {name: rectangular(sigma) for name, sigma in zip("abcd", (1, 1, 1, 10))})
    assert holds(total.mean(), 0.0)
    assert holds(total.sigma(), 10.1489, 1e-4)
    assert holds(total.quantile(0.025), -17.015814, 1e-6)
    assert holds(total.quantile(0.975), 17.015814, 1e-6)
    assert f"{total.quantile(0.975).value:.1f}" == "17.0"


# 9.3, inputs in print: masses in mg, densities in kg/m^3.
MASS_LAWS = {
    "mass": Normal(mean=100_000.0, sigma=0.050),
    "small_mass": Normal(mean=1.234, sigma=0.020),
    "air_density": Uniform(low=1.10, high=1.30),
    "weight_density": Uniform(low=7000, high=9000),
    "reference_density": Uniform(low=7950, high=8050),
}
BEST = {
    "mass": 100_000.0,
    "small_mass": 1.234,
    "air_density": 1.2,
    "weight_density": 8000.0,
    "reference_density": 8000.0,
}
PRINTED_ENDS = (1.0834, 1.3825)


def mass_deviation(values):
    """Deviation of a weight from its nominal 100 g [mg], buoyancy corrected."""
    buoyancy = (values["air_density"] - 1.2) * (1 / values["weight_density"] - 1 / values["reference_density"])
    return (values["mass"] + values["small_mass"]) * (1 + buoyancy) - 100_000.0


def deviation_and_whether_inside(values):
    """The deviation, and 1 where it lies between the document's ends."""
    deviation = mass_deviation(values)
    return np.stack([deviation, (deviation > PRINTED_ENDS[0]) & (deviation < PRINTED_ENDS[1])])


def test_mass_calibration():
    deviation, inside = summaries(deviation_and_whether_inside, MASS_LAWS, outputs=2)
    # from memory: the document's u = 0.0754, of about 1e6 draws; second figure: 1e8 draws of our own list
    assert holds(deviation.mean(), 1.234, 1e-3)
    assert holds(deviation.sigma(), 0.0754, 1e-4)
    assert holds(deviation.sigma(), 0.07549, 1e-5)
    # probabilistically symmetric interval, 1e8 draws
    assert holds(deviation.quantile(0.025), 1.0844, 1e-4)
    assert holds(deviation.quantile(0.975), 1.3836, 1e-4)
    # The document's ends (from memory) are its SHORTEST interval, 0.001 below the symmetric one: the end moves freely
    # along a flat minimum. What must hold is that they contain 95 %. Each end is rounded by up to 0.00005, where the
    # density is below that of a normal's two-sigma point, 0.06/0.0755 per mg: 0.0001 in all.
    total = inside.mean().value * inside.n
    share = bounded_mean(total, total, inside.n, FIVE_STANDARD_ERRORS)
    assert holds(share, 0.95, 2e-4)


def test_first_order_propagation_misses_the_mass_calibration():
    # 9.3, from memory: 0.0539. Both factors of the buoyancy term vanish at the best estimates, so no slope sees their
    # product; this is why one samples.
    def slope(name):
        step = 1e-4 * BEST[name]
        ends = [mass_deviation(BEST | {name: BEST[name] + sign * step}) for sign in (1, -1)]
        return (ends[0] - ends[1]) / (2 * step)

    sigmas = {"mass": 0.050, "small_mass": 0.020}
    rectangles = {name: (law.high - law.low) / np.sqrt(12) for name, law in MASS_LAWS.items() if name not in sigmas}
    first_order = np.sqrt(sum((slope(name) * sigma) ** 2 for name, sigma in (sigmas | rectangles).items()))
    assert f"{first_order:.4f}" == "0.0539"
    (deviation,) = summaries(mass_deviation, MASS_LAWS)
    assert deviation.sigma().low > 1.3 * first_order
    # second order (derived): the product of the two buoyancy factors carries the rest of the variance
    density_ends = ((7000, 9000), (7950, 8050))
    means = [np.log(high / low) / (high - low) for low, high in density_ends]  # of 1/density
    variances = [1 / (low * high) - mean**2 for (low, high), mean in zip(density_ends, means)]
    factor = np.sqrt(sum(variances) + (means[0] - means[1]) ** 2)  # root mean square of 1/rW - 1/rR
    product = 100_001.234 * (0.1 / np.sqrt(3)) * factor
    assert holds(deviation.sigma(), np.hypot(first_order, product), 1e-6)
