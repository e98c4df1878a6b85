"""How wide must a retention latch's transistor be before its threshold spreads by less than 10 mV, in option A?

Run: python notebooks_free_scripts/01_how_wide_is_wide_enough.py
"""

from importlib.resources import files

from mc.search import first_crossing
from studies import spread
from studies.process_file import load_process
from studies.settings import Settings, Workers

LIMIT_MV = 10.0

process = load_process(files("studies.examples") / "option_a.toml")
question = spread.Question(device="n", width_um=[0.12, 0.16, 0.2, 0.25, 0.3, 0.4, 0.5], length_um=0.13)
answer = spread.answer(question, process, Settings(seed=3, samples=100_000), Workers(jobs=1))
table = answer.table

print(table[["width_um", "vth_sigma_mv", "vth_sigma_low_mv", "vth_sigma_high_mv", "share_dopants"]].round(3).to_string())
width, low, high = (
    first_crossing(question.width_um, -table[f"vth_sigma{bound}_mv"].to_numpy(), -LIMIT_MV)
    for bound in ("", "_low", "_high")
)
print(f"sigma falls below {LIMIT_MV:g} mV at W = {width:.3f} um [{low:.3f}, {high:.3f}], interpolated between widths")

assert 0.25 < low < width < high < 0.4
assert table.vth_sigma_mv.is_monotonic_decreasing
