"""Values as bytes and back: the same bits, and nothing but plain values."""

import pickle
from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from mc.codec import Damaged, decode, encode, storable
from mc.tally import CELLS, Grid, Tally

NUMBERS = st.none() | st.booleans() | st.integers(-(2**53), 2**53) | st.floats(allow_nan=False) | st.text()
VALUES = st.recursive(
    NUMBERS,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text() | st.integers(), inner, max_size=4),
    max_leaves=12,
)


@given(VALUES)
def test_plain_values_come_back(value):
    assert decode(encode(value)) == value


@settings(max_examples=60, deadline=None)
@given(
    st.sampled_from([np.float64, np.int64, np.bool_]).flatmap(
        lambda dtype: arrays.arrays(dtype, arrays.array_shapes(min_dims=0, max_dims=3, max_side=14))
    )
)
def test_arrays_come_back_with_the_same_bits(value):
    found = decode(encode({"a": value, "b": (1.5, [value])}))["b"][1][0]
    assert found.dtype == value.dtype and found.shape == value.shape and found.tobytes() == value.tobytes()


def tally(count=5000):
    values = np.random.default_rng(1).standard_normal((11, count))
    return Tally.of(Grid.from_pilot(values), [values])


def test_a_tally_comes_back_and_can_be_added_to():
    mine = tally()
    found = decode(encode((mine, 5000)))[0]
    for name in ("powers", "cells", "smallest", "largest"):
        assert getattr(found, name).tobytes() == getattr(mine, name).tobytes()
    assert (found + mine).count == 10_000 and isinstance(found.count, int)


def test_a_histogram_takes_the_room_of_what_is_in_it():
    assert len(encode(tally())) < 11 * CELLS * 8 / 5


@pytest.mark.parametrize("place", [0, 5, 9, 40, -3])
def test_scrambled_bytes_are_noticed_or_give_plain_values(place):
    data = bytearray(encode(tally(500)))
    data[place] ^= 0xFF
    try:
        decode(bytes(data))
    except Damaged as error:
        assert "\n" not in str(error)


@pytest.mark.parametrize("data", [b"", b"\x00" * 8, encode([1.0])[:-2], b"\xff" * 60, pickle.dumps([1])])
def test_what_was_never_encoded(data):
    with pytest.raises(Damaged):
        decode(data)


def test_nothing_else_is_stored():
    @dataclass
    class Stranger:
        value: int

    for value in (Stranger(1), object(), 1j, np.array(["a"]), {1, 2}):
        with pytest.raises(TypeError):
            encode(value)
    with pytest.raises(TypeError):
        storable(object)


def test_a_record_that_is_not_declared_is_not_made():
    data = encode(Grid(center=np.zeros(2), scale=np.ones(2))).replace(b'"Grid"', b'"Path"')
    with pytest.raises(Damaged, match="Path"):
        decode(data)
