"""The table of solved edges: as good as it says, the same bits from the cache, and never the reason of a failure.

Weak doping under a thick oxide makes sections of few nodes, so that a hundred of them are solved in two seconds.
"""

import ast
import dataclasses
from importlib.resources import files

import numpy as np
import pytest

from physics.cross_section import solve_threshold
from physics.cross_section_dopants import dopant_scatter, dopant_weights
from physics.dopants import dopant_sigma
from physics.edge_patch import edge_patch
from physics.edge_surface import NARROWEST, surface_sections
from physics.profile import StepProfile, UniformProfile
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.section_lines import section_scales
from physics.threshold import oxide_capacitance
from studies import cache, edge_solutions
from studies.edge_solutions import key_of, solutions
from studies.edge_table import GOAL, edge_table

WEAK = Section(
    width=1e-6,
    oxide_thickness=20e-9,
    profile=UniformProfile(doping=2e22),
    temperature=300.0,
    edge=FieldStep(field_oxide_thickness=400e-9),
)
SHAPES = {
    "field oxide": WEAK,
    "trench": dataclasses.replace(WEAK, edge=TrenchWall(trench_depth=600e-9)),
    "divot": dataclasses.replace(WEAK, edge=TrenchWall(trench_depth=600e-9, divot=60e-9)),
}


@pytest.fixture
def own_cache(tmp_path, monkeypatch):
    """A cache folder of the test's own, and no memory of what was solved before."""
    monkeypatch.setenv(cache.VARIABLE, str(tmp_path / "cache"))
    solutions.cache_clear()
    edge_table.cache_clear()
    yield tmp_path / "cache"
    solutions.cache_clear()
    edge_table.cache_clear()


@pytest.fixture
def solves(monkeypatch):
    """How many sections are solved, a list of one number."""
    count, real = [0], edge_solutions._numbers

    def counting(section, refinement):
        count[0] += 1
        return real(section, refinement)

    monkeypatch.setattr(edge_solutions, "_numbers", counting)
    return count


def some(number=2):
    """A few sections that are quickly solved."""
    return surface_sections(WEAK, 3)[:number]


@pytest.mark.parametrize("name", SHAPES)
def test_the_table_keeps_its_goal_where_it_was_not_solved(name):
    section, random = SHAPES[name], np.random.default_rng(3)
    edge = edge_table(section).edge
    assert edge.charge_error < GOAL and edge.sigma_error < GOAL
    for _ in range(4):
        doping, oxide = 1 + 0.25 * random.uniform(-1, 1, 2)
        held = dataclasses.replace(
            section, profile=section.profile.scaled(doping), oxide_thickness=section.oxide_thickness * oxide
        )
        depletion = section_scales(held).depletion_width
        held = dataclasses.replace(held, width=float(depletion * 10 ** random.uniform(-0.4, 1.2)))
        solved = solve_threshold(held)
        found = edge.charge_factor(depletion, held.width, held.oxide_thickness) - 1
        assert found == pytest.approx(solved.charge_factor - 1, rel=GOAL, abs=GOAL / 100)


@pytest.mark.parametrize("name", SHAPES)
def test_patches_follow_the_table_at_every_width(name):
    edge = edge_table(SHAPES[name]).edge
    widths = edge.depletion_width * np.geomspace(1.01 * NARROWEST, 100, 40)
    assert max(edge_patch(edge, width).error for width in widths) < 0.004


def test_the_scatter_is_that_of_a_direct_solution():
    edge = edge_table(WEAK).edge
    section = dataclasses.replace(WEAK, width=0.37e-6)
    solved = solve_threshold(section)
    sigma = dopant_scatter(solved, dopant_weights(solved), 1e-6).sigma
    place = section.profile, section_scales(section).depletion_width, section.width, 1e-6
    law = dopant_sigma(*place, oxide_capacitance(section.oxide_thickness))
    assert edge.sigma_ratio(section.width) == pytest.approx(sigma / law, rel=GOAL, abs=0)


def test_a_coarse_table_says_that_it_misses_its_goal():
    table = edge_table(SHAPES["divot"], 4)
    assert table.edge.charge_error > GOAL
    assert any("misses its goal" in note for note in table.notes)
    assert not edge_table(WEAK).notes


def test_the_cache_gives_the_same_bits_without_solving(own_cache, solves):
    first = solutions(some())
    assert solves == [2] and len(list(own_cache.iterdir())) == 1
    solutions.cache_clear()
    second = solutions(some())
    assert solves == [2]
    for name in edge_solutions.NAMES:
        assert getattr(first, name).tobytes() == getattr(second, name).tobytes()
    assert first.notes == second.notes == ()


def test_nothing_is_solved_twice_in_one_run(own_cache, solves):
    assert solutions(some()) is solutions(some())
    assert solves == [2]


def spoiled(content: bytes):
    """Ways in which a file is damaged."""
    middle = len(content) // 2
    yield "empty", b""
    yield "cut", content[:middle]
    yield "flipped", content[:middle] + bytes([content[middle] ^ 255]) + content[middle + 1 :]
    yield "text", b"not ours"
    yield "long", b"\0" * (cache.LARGEST_FILE + 1)


def test_a_damaged_file_is_noticed_and_rebuilt(own_cache, solves):
    true = solutions(some())
    (path,) = own_cache.iterdir()
    content = path.read_bytes()
    for number, (how, bad) in enumerate(spoiled(content), start=2):
        path.write_bytes(bad)
        solutions.cache_clear()
        again = solutions(some())
        assert solves == [2 * number], how
        assert np.array_equal(again.shift, true.shift)
        assert "damaged" in again.notes[0]
        solutions.cache_clear()
        assert not solutions(some()).notes and solves == [2 * number], how


@pytest.mark.parametrize("numbers", [np.ones((2, 3)), np.full((2, 4), np.nan)], ids=["shape", "not finite"])
def test_a_file_with_other_numbers_is_not_used(own_cache, numbers):
    key = key_of(some(), 1.0)
    assert cache.keep(key, numbers) == ""
    assert cache.kept(key, (2, 4)) == (None, True)


def test_a_renamed_file_is_not_used(own_cache):
    cache.keep("a", np.ones(3))
    (own_cache / "a.npz").rename(own_cache / "b.npz")
    assert cache.kept("b", (3,)) == (None, True)


def test_a_pickle_is_not_read(own_cache):
    own_cache.mkdir()
    np.savez(own_cache / "a.npz", numbers=np.array([{}], object), digest=np.array(""))
    assert cache.kept("a", (1,)) == (None, True)


def test_an_unwritable_cache_costs_a_note(tmp_path, monkeypatch, own_cache, solves):
    (tmp_path / "file").write_text("in the way")
    monkeypatch.setenv(cache.VARIABLE, str(tmp_path / "file" / "cache"))
    found = solutions(some())
    assert np.all(np.isfinite(found.shift))
    (note,) = found.notes
    assert "cannot be written" in note and "WIDTHWISE_CACHE" in note


def test_a_full_disk_leaves_no_half_file(own_cache, monkeypatch):
    def full(*_, **__):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(np, "savez", full)
    assert cache.keep("a", np.ones(3)) == "No space left on device"
    assert list(own_cache.iterdir()) == []


def test_where_the_cache_lies(monkeypatch, tmp_path):
    monkeypatch.setattr("sys.platform", "linux")
    monkeypatch.delenv(cache.VARIABLE, raising=False)
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.delenv("XDG_CACHE_HOME", raising=False)
    assert cache.cache_folder() == tmp_path / ".cache" / "widthwise"
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "xdg"))
    assert cache.cache_folder() == tmp_path / "xdg" / "widthwise"
    monkeypatch.setenv(cache.VARIABLE, str(tmp_path / "own"))
    assert cache.cache_folder() == tmp_path / "own"


CHANGED = {
    "width": 1.1e-6,
    "oxide_thickness": 21e-9,
    "profile": StepProfile(surface_doping=2e22, surface_depth=1e-8, doping=2e22),
    "temperature": 301.0,
    "body_bias": 0.1,
    "intrinsic_density": 1e16,
    "edge": FieldStep(field_oxide_thickness=401e-9),
}
DETAILS = [
    {"taper_length": 1e-8},
    {"implant_doping": 1e22, "implant_depth": 1e-7},
    {"field_width": 3e-6},
]


def test_the_key_changes_with_every_input(monkeypatch):
    assert set(CHANGED) == {field.name for field in dataclasses.fields(Section)}
    sections = [WEAK, *(dataclasses.replace(WEAK, **{name: value}) for name, value in CHANGED.items())]
    sections += [dataclasses.replace(WEAK, edge=dataclasses.replace(WEAK.edge, **detail)) for detail in DETAILS]
    sections += [SHAPES["trench"], SHAPES["divot"]]
    keys = [key_of((section,), 1.0) for section in sections]
    keys += [key_of((WEAK,), 2.0), key_of((WEAK, WEAK), 1.0)]
    monkeypatch.setattr(edge_solutions, "__version__", "another")
    keys.append(key_of((WEAK,), 1.0))
    monkeypatch.undo()
    monkeypatch.setattr(edge_solutions, "_physics", lambda: b"another solver")
    keys.append(key_of((WEAK,), 1.0))
    assert len(set(keys)) == len(keys)


def needed(name, seen):
    """Modules of the physics that one of them imports, itself included."""
    if name not in seen:
        seen.add(name)
        for node in ast.walk(ast.parse((files("physics") / f"{name}.py").read_text())):
            if isinstance(node, ast.ImportFrom) and node.module.startswith("physics."):
                needed(node.module.removeprefix("physics."), seen)
    return seen


def test_the_key_depends_on_every_module_of_the_solver():
    modules = needed("cross_section_dopants", needed("dopants", set()))
    # of these only closed-form edges, the device's record and the short channel's type have no part in a solution
    assert modules - {"edges", "edge_surface", "edge_patch", "device", "short_channel"} == set(edge_solutions.MODULES)
