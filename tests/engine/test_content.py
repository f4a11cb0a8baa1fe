"""Arrays, JSON and bytes as files, and what is kept at hand."""

import io

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as st_numpy

from skykiln.engine import content
from skykiln.engine.content import Input, chunks_of, keep_at_hand
from skykiln.engine.digests import json_bytes


@given(st_numpy.arrays(np.float32, st_numpy.array_shapes(max_dims=4), elements=st.floats(width=32)))
def test_chunks_of_an_array_are_what_numpy_saves(array):
    saved = io.BytesIO()
    np.save(saved, array)
    assert b"".join(chunks_of(array)) == saved.getvalue()


def test_array_that_is_not_contiguous_is_saved_as_its_copy():
    array = np.arange(12, dtype=np.float32).reshape(3, 4).T
    loaded = np.load(io.BytesIO(b"".join(chunks_of(array))))
    np.testing.assert_array_equal(loaded, array)


def test_json_tells_numbers_exactly_and_refuses_what_json_has_not():
    assert json_bytes({"a": 1 / 3}) == b'{\n "a": 0.3333333333333333\n}\n'
    with pytest.raises(ValueError, match="not JSON compliant"):
        json_bytes({"a": float("nan")})


def test_array_is_read_from_its_file_as_a_plain_writable_array(tmp_path):
    path = tmp_path / "a.npy"
    np.save(path, np.ones((2, 3), np.float32))
    array = Input(path, "digest").array()
    assert type(array) is np.ndarray
    assert array.flags.writeable  # else Numba would compile its kernels a second time
    array[:] = 7
    np.testing.assert_array_equal(np.load(path), 1)


def test_array_at_hand_is_known_by_its_digest(tmp_path):
    path = tmp_path / "a.npy"
    np.save(path, np.ones(3))
    at_hand = np.zeros(3)
    keep_at_hand(Input(path, "first"), at_hand)
    assert Input(path, "first").array() is at_hand
    np.testing.assert_array_equal(Input(path, "second").array(), 1)


def test_what_is_at_hand_stays_within_its_limit(tmp_path):
    block = np.zeros(content.AT_HAND_BYTES // 8, np.uint8)
    for number in range(12):
        keep_at_hand(Input(tmp_path / "a.npy", str(number)), block)
    keep_at_hand(Input(tmp_path / "a.npy", "huge"), np.zeros(content.AT_HAND_BYTES, np.uint8))
    assert sum(kept.nbytes for kept in content._at_hand.values()) <= content.AT_HAND_BYTES
    assert (str(tmp_path / "a.npy"), "11") in content._at_hand
    assert (str(tmp_path / "a.npy"), "huge") not in content._at_hand


def test_an_empty_array_is_an_npy_file_too(tmp_path):
    path = tmp_path / "empty.npy"
    path.write_bytes(b"".join(chunks_of(np.empty((0, 3), np.int32))))
    assert np.load(path).shape == (0, 3)
