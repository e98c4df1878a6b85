"""Every worked script runs to its end; each ends in an assert of its own."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

SCRIPTS = sorted((Path(__file__).parents[1] / "notebooks_free_scripts").glob("*.py"))


@pytest.mark.parametrize("script", SCRIPTS, ids=lambda path: path.stem)
def test_script_runs(script):
    short = ["--short"] if "--short" in script.read_text() else []
    done = subprocess.run([sys.executable, str(script), *short], capture_output=True, text=True, timeout=300)
    assert done.returncode == 0, done.stderr
    assert done.stdout, "a script shows its result"


@pytest.mark.parametrize("script", SCRIPTS, ids=lambda path: path.stem)
def test_script_can_fail(script):
    assert any(isinstance(node, ast.Assert) for node in ast.walk(ast.parse(script.read_text())))
