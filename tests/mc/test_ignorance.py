"""Arrows point one way: mc knows nothing of transistors or of questions."""

import ast
from pathlib import Path

import pytest

import mc

MODULES = sorted(Path(mc.__file__).parent.glob("**/*.py"))


def imported(path):
    """Top-level packages a module imports, wherever in the file; a relative import counts as its own package."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name.split(".")[0] for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            yield "mc" if node.level else node.module.split(".")[0]


def test_the_package_was_found():
    assert "runner.py" in [path.name for path in MODULES]
    assert "numpy" in {name for path in MODULES for name in imported(path)}


@pytest.mark.parametrize("path", MODULES, ids=lambda path: path.name)
def test_imports_nothing_of_physics_or_studies(path):
    assert not {"physics", "studies", "tests"} & set(imported(path))
