"""One name, one unit: the glossary in DEVELOPERS.md against the docstrings of physics/; README and CI say the same."""

import ast
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ENTRY = re.compile(r"^(\w+(?:, \w+)*) : (.*?)(?=^\w+(?:, \w+)* : |^Returns|^Raises|^Source|^Range|\Z)", re.M | re.S)


def glossary():
    rows = [line.split("|")[1:5] for line in (ROOT / "DEVELOPERS.md").read_text().splitlines() if line.startswith("| ")]
    named = {row[0].strip(): row[2].strip() for row in rows if re.fullmatch(r" [a-z_]+ ", row[0]) and len(row) == 4}
    return {name: set(unit.split(", ")) for name, unit in named.items() if name != "name"}


def documented():
    for path in sorted((ROOT / "physics").glob("*.py")):
        for node in ast.walk(ast.parse(path.read_text())):
            if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
                for names, text in ENTRY.findall(ast.get_docstring(node) or ""):
                    units = set(re.findall(r"\[([^\]]+)\]", text)) - {"1", "SI"}
                    for name in names.split(", "):
                        if units:
                            yield pytest.param(name, units, id=f"{path.stem}.{node.name}.{name}")


@pytest.mark.parametrize("name, units", list(documented()))
def test_a_physical_name_has_the_glossary_unit(name, units):
    assert name in glossary(), f"'{name}' is not in the glossary"
    assert units <= glossary()[name]


def test_every_glossary_entry_is_used():
    used = {parameter.values[0] for parameter in documented()}
    assert set(glossary()) == used


def commands(text):
    return [line.strip() for line in text.splitlines() if line.strip().startswith("python3 -m venv")]


def test_ci_and_developers_run_the_readme_test_command_word_for_word():
    main, tests = commands((ROOT / "README.md").read_text())
    assert "widthwise run" in main and "pytest" in tests
    assert commands((ROOT / ".ci" / "run").read_text()) == [tests]
    assert commands((ROOT / "DEVELOPERS.md").read_text()) == [tests]
