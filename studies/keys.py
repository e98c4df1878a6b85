"""Every key of a process file with its range and meaning, from the records that check it: it cannot go out of date."""

from textwrap import fill
from types import NoneType
from typing import Literal, get_args, get_origin

from pydantic.fields import FieldInfo

from studies.process_file import Device, Process
from studies.validated import Record

BOUNDS = {"gt": "above {}", "ge": "{} or more", "lt": "below {}", "le": "{} or less"}


def key_lines() -> list[str]:
    """One paragraph a key, in the file's order, 80 columns wide."""
    lines = list(_paragraphs(Process, ""))
    return lines + list(_paragraphs(Device, "device.NAME."))


def _paragraphs(model: type[Record], path: str):
    for name, field in model.model_fields.items():
        kinds = [kind for kind in (field.annotation, *get_args(field.annotation)) if kind is not NoneType]
        inner = next((kind for kind in kinds if isinstance(kind, type) and issubclass(kind, Record)), None)
        if inner is Device:
            continue  # comes last, for it is long
        if inner is not None:
            yield from _paragraphs(inner, f"{path}{name}.")
        else:
            text = "; ".join(part for part in (_allowed(field), field.description) if part)
            yield fill(f"{path}{name}: {text}", 80, subsequent_indent="    ")


def _allowed(field: FieldInfo) -> str:
    """What may stand there, and what stands there when nothing is given."""
    kinds = (field.annotation, *get_args(field.annotation))
    choices = [repr(choice) for kind in kinds if get_origin(kind) is Literal for choice in get_args(kind)]
    metadata = [item for kind in kinds for item in getattr(kind, "__metadata__", ())]
    limits = [limit for item in metadata for limit in getattr(item, "metadata", [])] + list(field.metadata)
    bounds = [
        text.format(f"{value:g}") for limit in limits for key, text in BOUNDS.items()
        if isinstance(value := getattr(limit, key, None), int | float)
    ]  # fmt: skip
    allowed = " or ".join(choices) or ", ".join(bounds) or str(getattr(field.annotation, "__name__", field.annotation))
    if "list" in str(field.annotation):
        allowed = "a list"
    allowed = {"str": "text", "bool": "true or false", "str | None": "text"}.get(allowed, allowed)
    if field.is_required():
        return f"{allowed}; required"
    default = field.get_default(call_default_factory=True)
    return allowed if default in (None, "", []) else f"{allowed}; {default!r} when not given"
