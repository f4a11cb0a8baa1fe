"""Shards: every probe has one owner, by its name alone."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skykiln.engine.shards import Shard

names = st.text(min_size=1, max_size=20)


@given(st.lists(names, max_size=20), st.integers(1, 40))
def test_every_name_has_exactly_one_owner(names, count):
    for name in names:
        assert [Shard(number, count).owns(name) for number in range(count)].count(True) == 1


def test_names_are_shared_out_evenly():
    owned = [sum(Shard(k, 4).owns(f"room_{number}") for number in range(4000)) for k in range(4)]
    assert all(900 < count < 1100 for count in owned)


def test_owner_of_a_name_stays_the_same():
    """By SHA-256 of the name: other machines and later versions must agree."""
    names = ("ferry_noon", "quay_night", "concourse/hall_01")
    assert [name for name in names if Shard(0, 2).owns(name)] == ["ferry_noon", "concourse/hall_01"]


def test_shard_is_read_from_what_a_batch_script_gives():
    assert Shard.parse("3/16") == (3, 16)
    assert Shard.parse("3/16").file_name == "3-of-16"


@pytest.mark.parametrize("text", ["", "3", "/", "4/4", "-1/4", "a/b", "0/0", "1/2/3"])
def test_anything_else_is_refused(text):
    with pytest.raises(ValueError):
        Shard.parse(text)
