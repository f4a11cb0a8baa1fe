"""Key/value data: typed bytes, round trips, broken entries."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skykiln.formats.key_values import broken_key_value_rules, read_key_values, write_key_values

TEXT = st.text(st.characters(exclude_characters="\0", exclude_categories=["Cs"]))
KEYS = TEXT.filter(lambda key: key and not key.lower().startswith("ktx"))


def test_entries_have_these_bytes():
    # KTX 2.0, "Key/Value Data": length of key, NUL and value; padding to four bytes; sorted keys.
    data = write_key_values({"sky:x": "day", "KTXorientation": "rd", "a": b"\1\2\3\4\5\6"})
    assert data == (
        b"\x12\0\0\0KTXorientation\0rd\0\0\0"
        b"\x08\0\0\0a\0\1\2\3\4\5\6"
        b"\x0a\0\0\0sky:x\0day\0\0\0"
    )  # fmt: skip


def test_no_pairs_are_no_bytes():
    assert write_key_values({}) == b""
    assert read_key_values(b"") == {}


@given(st.dictionaries(KEYS, TEXT | st.binary().map(lambda value: value + b"\xff"), max_size=5))
def test_pairs_survive(pairs):
    data = write_key_values(pairs)
    assert len(data) % 4 == 0
    assert list(broken_key_value_rules(data)) == []
    assert read_key_values(data) == pairs


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"\4\0\0\0b\0\0\0" + b"\4\0\0\0a\0\0\0", "not sorted"),
        (b"\4\0\0\0a\0\0\0" * 2, "twice"),
        (b"\5\0\0\0a\0bc\0\0\0\1", "padding"),
        (b"\5\0\0\0a\0bc\0", "padding"),
        (b"\4\0\0\0a\0", "doesn't fit"),
        (b"\xff\xff\xff\xffa\0\0\0", "doesn't fit"),
        (b"\0\0\0\0", "doesn't fit"),
        (b"\4\0\0\0abcd", "no key"),
        (b"\4\0\0\0\0abc", "no key"),
        (b"\4\0\0\0\xff\0aa", "utf-8"),
        (b"\4\0", "inside an entry's length"),
        (write_key_values({"ktxOwn": "1"}), "may begin with KTX"),
        (write_key_values({"KTXglFormat": "1"}), "must not appear"),
        (write_key_values({"KTXorientation": "ru"}), "must be 'rd'"),
        (write_key_values({"KTXorientation": b"rd"}), "must be 'rd'"),
        (write_key_values({"KTXwriter": b"me"}), "ends in a NUL"),
    ],
)
def test_broken_entries_are_named(data, words):
    assert [rule for rule in broken_key_value_rules(data) if words in rule]


@given(st.binary(max_size=60))
def test_any_bytes_are_judged(data):
    if not list(broken_key_value_rules(data)):
        assert write_key_values(read_key_values(data)) == data
