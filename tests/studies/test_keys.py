"""The key reference tells every key of a process file, and only those."""

import re
from importlib.resources import files

from studies.cli import main
from studies.keys import key_lines


def told():
    return {line.split(":")[0] for line in key_lines()}


def test_every_key_of_the_demo_is_told():
    text = (files("studies.examples") / "option_b.toml").read_text()
    keys = set(re.findall(r"^(\w+) =", text, re.M)) - {"inputs", "value"}
    last = {key.split(".")[-1] for key in told()} | {key.split(".")[-2] for key in told() if key.count(".") > 2}
    assert keys <= last


def test_ranges_defaults_and_meanings_are_told():
    text = "\n".join(key_lines())
    assert "device.NAME.oxide_thickness_nm: above 0.2, 2000 or less; required" in text
    flowing = " ".join(text.split())
    assert "device.NAME.scatter.dopants: 'counted' or 'normal' or 'off'; 'counted' when not given" in flowing
    assert "FieldInfo" not in text and max(map(len, text.splitlines())) <= 80


def test_the_command_prints_them(capsys):
    assert main(["keys"]) == 0
    assert "device.NAME.edge.kind" in capsys.readouterr().out
