"""Plain records of arrays as bytes and back, without pickle: reading a file can never run code.

A value is JSON with its arrays in a block behind it. Only classes that were declared with `storable` are made again.
"""

import json
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

_CLASSES: dict[str, type] = {}
_DTYPES = ("<f8", "<i8", "<i4", "|b1")
_WORTH_CUTTING = 1000  # whole numbers; below it an array is kept as it is


class Damaged(ValueError):
    """Bytes that are no value of ours."""


def storable(cls: type) -> type:
    """Declare a dataclass whose fields `encode` can hold; use as a decorator."""
    if not is_dataclass(cls):
        raise TypeError(f"{cls.__name__} is no dataclass")
    _CLASSES[cls.__name__] = cls
    return cls


def encode(value) -> bytes:
    """A value as bytes: numbers, strings, None, lists, tuples, dictionaries, arrays, and `storable` records of them.

    Raises TypeError for anything else.
    """
    arrays: list[bytes] = []
    text = json.dumps(_plain(value, arrays), separators=(",", ":")).encode()
    return b"".join([len(text).to_bytes(8, "little"), text, *arrays])


def decode(data: bytes) -> Any:
    """The value that `encode` made bytes of. Raises Damaged."""
    try:
        size = int.from_bytes(data[:8], "little")
        return _value(json.loads(data[8 : 8 + size]), memoryview(data)[8 + size :])
    except Damaged:
        raise
    except (ValueError, TypeError, KeyError, IndexError, RecursionError) as error:
        raise Damaged(f"stored value cannot be read ({error})") from None


def _plain(value, arrays):
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, (bool, int, float, str)):
        return value
    if isinstance(value, np.ndarray):
        return {"array": _array(value, arrays)}
    if isinstance(value, (list, tuple)):
        return {type(value).__name__: [_plain(each, arrays) for each in value]}
    if isinstance(value, dict):
        return {"dict": [[_plain(key, arrays), _plain(each, arrays)] for key, each in value.items()]}
    name = type(value).__name__
    if _CLASSES.get(name) is not type(value):
        raise TypeError(f"{name} is not storable")
    return {"record": [name, {each.name: _plain(getattr(value, each.name), arrays) for each in fields(value)}]}


def _array(value, arrays) -> list:
    """An array's offset, type, shape, and the columns from and to which it is kept: histograms are mostly empty."""
    if value.dtype.str not in _DTYPES:
        raise TypeError(f"arrays of {value.dtype} are not stored")
    start, stop, kept = 0, value.shape[-1] if value.ndim else 0, value
    if value.dtype.kind == "i" and value.size > _WORTH_CUTTING:
        filled = np.flatnonzero(value.any(axis=tuple(range(value.ndim - 1))))
        start, stop = (int(filled[0]), int(filled[-1]) + 1) if filled.size else (0, 0)
        kept = value[..., start:stop]
        if kept.size and kept.min() >= 0 and kept.max() < 2**31:
            kept = kept.astype("<i4")
    offset = sum(map(len, arrays))
    arrays.append(np.ascontiguousarray(kept).tobytes())
    return [offset, kept.dtype.str, value.dtype.str, list(value.shape), start, stop]


def _made_array(content, buffer):
    offset, kept_dtype, dtype, shape, start, stop = content
    if kept_dtype not in _DTYPES or dtype not in _DTYPES:
        raise Damaged("no such array is stored")
    kept_shape = [*shape[:-1], stop - start] if shape else []
    count = int(np.prod(kept_shape, dtype=int))
    kept = np.frombuffer(buffer, kept_dtype, count, offset).reshape(kept_shape)
    if kept_shape == shape:
        return kept.astype(dtype)
    value = np.zeros(shape, dtype)
    value[..., start:stop] = kept
    return value


def _value(plain, buffer):
    if not isinstance(plain, dict):
        return plain
    ((kind, content),) = plain.items()
    if kind == "array":
        return _made_array(content, buffer)
    if kind in ("list", "tuple"):
        items = [_value(each, buffer) for each in content]
        return tuple(items) if kind == "tuple" else items
    if kind == "dict":
        return {_value(key, buffer): _value(each, buffer) for key, each in content}
    if kind == "record":
        name, entries = content
        if name not in _CLASSES:
            raise Damaged(f"no record {name!r} is stored")
        return _CLASSES[name](**{key: _value(each, buffer) for key, each in entries.items()})
    raise Damaged(f"no {kind!r} is stored")
