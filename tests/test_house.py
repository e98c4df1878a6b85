"""The house stands as DEVELOPERS.md draws it: which way the imports point, and where things may lie."""

import ast
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ARROWS = {"physics": set(), "mc": set(), "studies": {"physics", "mc"}}  # package: what else of ours it may import
FILES = [path for package in ARROWS for path in sorted((ROOT / package).rglob("*.py"))]
OF_THE_BORDER = {"pandas", "matplotlib", "seaborn", "pydantic", "rich", "argparse"}  # only studies meets the person
LONGEST_FILE = 320
AT_THE_TOP = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "LICENSE",
    "mc",
    "physics",
    "studies",
    "notebooks_free_scripts",
    "tests",
}


def named(path):
    """A file's name in the house, for the test's own name."""
    return str(path.relative_to(ROOT))


def imported(path):
    """Dotted names that a file imports, wherever in it, those by import_module("...") included."""
    names = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            # a relative import would hide which package it means
            assert node.level == 0, f"{named(path)}:{node.lineno}: relative import"
            names |= {f"{node.module}.{alias.name}" for alias in node.names}
        elif isinstance(node, ast.Call) and getattr(node.func, "id", getattr(node.func, "attr", "")) == "import_module":
            names |= {
                part.value for part in ast.walk(node) if isinstance(part, ast.Constant) and isinstance(part.value, str)
            }
    return names


def first_parts(path):
    """Top packages that a file imports."""
    return {name.split(".")[0] for name in imported(path)}


def test_the_reading_of_imports_reads(tmp_path):
    """A test of imports that sees none would pass for ever."""
    tmp_path = tmp_path / "some.py"
    tmp_path.write_text("def f():\n    import a.b\n    from c import d\n    import_module(f'studies.{kind}')\n")
    assert first_parts(tmp_path) == {"a", "c", "studies"}
    assert {"mc", "physics"} <= set().union(*map(first_parts, FILES))
    assert len(FILES) > 30


@pytest.mark.parametrize("path", FILES, ids=named)
def test_arrows_point_one_way(path):
    package = path.relative_to(ROOT).parts[0]
    ours = first_parts(path) & {*ARROWS, "tests", "notebooks_free_scripts"}
    assert ours <= ARROWS[package] | {package}


@pytest.mark.parametrize("path", [path for path in FILES if path.relative_to(ROOT).parts[0] != "studies"], ids=named)
def test_only_studies_meets_the_person(path):
    assert not first_parts(path) & OF_THE_BORDER
    calls = [node.func for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))) if isinstance(node, ast.Call)]
    assert not {getattr(call, "id", "") for call in calls} & {"print", "open", "input"}


@pytest.mark.parametrize("path", [path for path in FILES if path.relative_to(ROOT).parts[0] == "physics"], ids=named)
def test_physics_draws_nothing(path):
    """Randomness is an argument: a formula that drew its own numbers could not be repeated or correlated."""
    names = {part for name in imported(path) for part in name.split(".")}
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names |= {node.attr} if isinstance(node, ast.Attribute) else {node.id} if isinstance(node, ast.Name) else set()
    assert not names & {"random", "secrets", "rvs", "default_rng", "Generator", "uuid", "urandom"}


@pytest.mark.parametrize("path", FILES, ids=named)
def test_a_file_has_one_job(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) < LONGEST_FILE


@pytest.mark.parametrize("path", [path for path in FILES if path.name == "__init__.py"], ids=named)
def test_init_files_hold_nothing_but_a_version(path):
    for node in ast.parse(path.read_text(encoding="utf-8")).body:
        assert isinstance(node, ast.Assign) and [target.id for target in node.targets] == ["__version__"]


def test_nothing_else_at_the_top():
    if not (ROOT / ".git").exists():
        pytest.skip("not a git checkout: what belongs to the project cannot be told from what lies about")
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout
    top = {line.split("/")[0] for line in listed.splitlines()}
    assert {name for name in top if not name.startswith(".")} <= AT_THE_TOP
