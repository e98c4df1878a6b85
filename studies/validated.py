"""Records that refuse nonsense when they are made, and the one line that says so."""

import tomllib
from pathlib import Path

from pydantic import BaseModel, ConfigDict, ValidationError, model_validator

from studies.errors import InputError, nearest, one_line
from studies.units import split_unit

LARGEST_FILE = 32_000_000  # bytes; a process or a job is a page or two


class Record(BaseModel):
    """A frozen record with known keys only, strict types and finite numbers."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, strict=True, allow_inf_nan=False, use_attribute_docstrings=True
    )

    @model_validator(mode="before")
    @classmethod
    def _known_keys(cls, data):
        if isinstance(data, dict):
            known = keys_of(cls)
            for key in data:
                if key not in known:
                    raise ValueError(_unknown_key(key, known))
        return data


def keys_of(model: type[Record]) -> dict[str, str]:
    """The keys a person writes, each with the name of its field."""
    return {field.alias or name: name for name, field in model.model_fields.items()}


def _unknown_key(key, fields) -> str:
    quantity, unit = split_unit(str(key))
    for known in fields:
        if unit and known != key and split_unit(known)[0] == quantity:
            return f"key '{one_line(key)}' has the wrong unit; this quantity is given as '{known}'"
    return f"unknown key '{one_line(key)}'; {nearest(key, fields)}"


def read_toml(path: Path) -> dict:
    """The table in a TOML file. Raises InputError for whatever is not one."""
    try:
        if path.is_dir():
            raise InputError(f"{one_line(path)}: is a folder, a TOML file is needed")
        if path.exists() and not path.is_file():
            raise InputError(f"{one_line(path)}: is not a file")
        if path.stat().st_size > LARGEST_FILE:
            raise InputError(f"{one_line(path)}: larger than {LARGEST_FILE // 1_000_000} MB, not a file of ours")
        text = path.read_bytes().decode("utf-8-sig").replace("\r\n", "\n")
    except FileNotFoundError:
        raise InputError(f"{one_line(path)}: no such file") from None
    except UnicodeDecodeError:
        raise InputError(f"{one_line(path)}: not UTF-8 text") from None
    except (OSError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"{one_line(path)}: cannot be read ({getattr(error, 'strerror', error)})") from None
    if not text.strip():
        raise InputError(f"{one_line(path)}: empty file")
    try:
        return tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as error:
        raise InputError(f"{one_line(path)}: not TOML ({one_line(error)})") from None


def validated(model: type[Record], data, where) -> Record:
    """A record made from a table. Raises InputError with file, key, value and what is allowed."""
    try:
        return model.model_validate(data)
    except ValidationError as error:
        raise InputError(f"{one_line(where)}: {_first_fault(error)}") from None


def _first_fault(error: ValidationError) -> str:
    fault = error.errors(include_url=False)[0]
    key = ".".join(one_line(part) for part in fault["loc"])
    message = fault["msg"].removeprefix("Value error, ")
    message = message[0].lower() + message[1:]
    if fault["type"] == "missing":
        return f"{key} is missing"
    if fault["type"] == "value_error" or isinstance(fault.get("input"), (dict, list)):
        return f"{key}: {message}" if key else message
    return f"{key} = {one_line(repr(fault['input']))}: {message}"
