"""Every public function and record of physics documents every argument with its unit, and says what it returns.

Read from the source, so that nothing has to be imported or decorated. An argument is documented as `name : text [unit]`
or `name, name : text [unit]`; the text may go on over more lines. Exempt from a unit are records of ours (annotated
with one, or "see `...`"), functions ("function of ..."), names to choose from (a quoted word) and Booleans; a method
that says "Arguments as in `...`" need not repeat its arguments.
"""

import ast
import re
from pathlib import Path

import pytest

import physics

SOURCES = sorted(Path(next(iter(physics.__path__))).glob("*.py"))

_SYMBOL = r"(?:m|V|eV|K|C|F|A|J|s|W|1|Hz|H|N|kg|rad|ohm|S|T)(?:\^-?\d+(?:\.\d+)?)?"
_PRODUCT = rf"{_SYMBOL}(?: {_SYMBOL})*"
UNIT = re.compile(rf"\[{_PRODUCT}(?:/(?:{_SYMBOL}|\({_PRODUCT}\)))*\]")
# A line that starts an entry: one or more names, a space, a colon, a space.
ENTRY = re.compile(r"^(\w+(?:, \w+)*) : (.*)$")
NO_UNIT = re.compile(r'^see `|^the channel with|^function of|"\w+"')
END = re.compile(r"^(Returns|Source|Range|Raises|Limits)\b")


def entries(docstring):
    """Documented names with the whole text of each, and the docstring without them."""
    documented, rest, current = {}, [], None
    for line in (line.strip() for line in docstring.splitlines()):
        start = ENTRY.match(line)
        if start:
            current = start.group(1).split(", ")
            documented.update(dict.fromkeys(current, start.group(2)))
        elif current and line and not END.match(line):
            documented.update({name: f"{documented[name]} {line}" for name in current})
        else:
            current = None
            rest.append(line)
    return documented, "\n".join(rest)


def public_definitions():
    """(place, node, enclosing class or None) of public functions, methods and classes."""
    for path in SOURCES:
        for node in ast.parse(path.read_text()).body:
            if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
                yield f"{path.stem}.{node.name}", node, None
                if isinstance(node, ast.ClassDef):
                    for part in node.body:
                        if isinstance(part, ast.FunctionDef) and not part.name.startswith("_"):
                            yield f"{path.stem}.{node.name}.{part.name}", part, node


DEFINITIONS = list(public_definitions())
FUNCTIONS = [(place, node, owner) for place, node, owner in DEFINITIONS if isinstance(node, ast.FunctionDef)]
CLASSES = [(place, node) for place, node, _ in DEFINITIONS if isinstance(node, ast.ClassDef)]
OWN_RECORDS = {node.name for _, node in CLASSES} | {"Edge", "Profile", "ShortChannel"}


def needs_unit(annotation, text):
    """Whether a documented quantity must carry a unit: not our own records, choices and functions."""
    named = ast.unparse(annotation) if annotation else ""
    return not (named in OWN_RECORDS | {"bool"} or NO_UNIT.search(text))


def is_property(node):
    return any(isinstance(mark, ast.Name) and mark.id == "property" for mark in node.decorator_list)


@pytest.mark.parametrize("node, owner", [row[1:] for row in FUNCTIONS], ids=[row[0] for row in FUNCTIONS])
def test_function(node, owner):
    docstring = ast.get_docstring(node)
    assert docstring, "no docstring"
    if is_property(node):
        assert UNIT.search(docstring), "a property without a unit"
        return
    documented, rest = entries(docstring)
    if "Arguments as in `" in docstring:
        assert UNIT.search(docstring), "no unit on the result"
        return
    arguments = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
    arguments = {argument.arg: argument.annotation for argument in arguments if argument.arg not in ("self", "cls")}
    assert list(documented) == list(arguments), "documented and real arguments differ, or their order does"
    for name, annotation in arguments.items():
        text = documented[name]
        assert not needs_unit(annotation, text) or UNIT.search(text), f"no unit for {name}: {text}"
    returned = re.search(r"^(Returns (?:.|\n)*?)(?=^Source|^Range|^Raises|\Z)", rest, re.MULTILINE)
    assert returned, "it does not say what it returns"
    gives_a_record = re.match(rf"Returns (?:a |an )?(?:{'|'.join(OWN_RECORDS)}|profile)\b", returned.group(1))
    assert gives_a_record or UNIT.search(returned.group(1)), "no unit on the result"


RECORDS = [pytest.param(node, id=place) for place, node in CLASSES]


@pytest.mark.parametrize("node", RECORDS)
def test_record(node):
    docstring = ast.get_docstring(node)
    assert docstring, "no docstring"
    fields = {part.target.id: part.annotation for part in node.body if isinstance(part, ast.AnnAssign)}
    for part in node.body:
        if isinstance(part, ast.FunctionDef) and part.name == "__init__":
            fields.update({argument.arg: argument.annotation for argument in part.args.args[1:] + part.args.kwonlyargs})
    documented, _ = entries(docstring)
    # Fields are given by name, so their order is free (those with defaults come last).
    assert set(documented) == set(fields), "documented and real fields differ"
    for name, annotation in fields.items():
        text = documented[name]
        assert not needs_unit(annotation, text) or UNIT.search(text), f"no unit for {name}: {text}"


# Formulas are module-level functions; these join formulas that name their own sources, and have none to add.
JOINERS = {"threshold.electrostatics", "threshold.threshold_voltage"}
FORMULAS = [(place, node) for place, node, owner in FUNCTIONS if owner is None and place not in JOINERS]


@pytest.mark.parametrize("place, node", FORMULAS, ids=[row[0] for row in FORMULAS])
def test_formula_names_its_source(place, node):
    assert re.search(r"^Source: \S", ast.get_docstring(node), re.MULTILINE)


@pytest.mark.parametrize("module", SOURCES, ids=[path.stem for path in SOURCES])
def test_module_says_its_job(module):
    tree = ast.parse(module.read_text())
    assert not tree.body or ast.get_docstring(tree)


def test_unit_grammar():
    # The check itself: units pass, other things in brackets do not.
    for unit in ("[1]", "[m^-3]", "[V^0.5]", "[m^2/(V s)]", "[V m]", "[C/m^2]", "[1/V]", "[kg m^2/s^2]"):
        assert UNIT.fullmatch(unit), unit
    for other in ("[nm]", "[mV]", "[]", "[cm^-3]", "[1 - r(1 - exp(-1/r))]", "[metres]", "[m/]", "[m^]"):
        assert not UNIT.fullmatch(other), other


def test_constants_have_their_units_beside_them():
    for line in next(path for path in SOURCES if path.stem == "constants").read_text().splitlines():
        assert not re.match(r"[A-Z_]+ = ", line) or UNIT.search(line.split("#")[-1]), line
