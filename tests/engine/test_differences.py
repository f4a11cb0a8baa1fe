"""Settings that hold lists and mappings, in words."""

import pytest

from skykiln.engine.differences import setting_reasons

SMALL, LARGE = {"name": "small", "pixels": "rgb9e5"}, {"name": "large", "pixels": "rgba16f"}


@pytest.mark.parametrize(
    ("before", "after", "told"),
    [
        ([SMALL], [SMALL, LARGE], ["packs: large is new"]),
        ([SMALL, LARGE], [LARGE], ["packs: small is gone"]),
        ([], [LARGE], ["packs: large is new"]),
        ([SMALL], [{**SMALL, "pixels": "half"}], ["packs: small: pixels was rgb9e5, is half"]),
        ({"hour": 13}, {"hour": 14, "day": 1}, ["packs: day is new", "packs: hour was 13, is 14"]),
        ({"a": {"b": [1, 2]}}, {"a": {"b": [1, 3]}}, ["packs: a: b was [1, 2], is [1, 3]"]),
        ([1.0, 2.0], [1.0], ["packs was [1, 2], is [1]"]),
        (None, {"a": 1}, ['packs was null, is {"a": 1}']),
    ],
)
def test_lists_and_mappings_are_told_by_what_differs_in_them(before, after, told):
    assert list(setting_reasons({"packs": before}, {"packs": after})) == told
