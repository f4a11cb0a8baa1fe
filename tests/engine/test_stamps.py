"""Stamps as files: what is written is what is read, and nothing else is believed."""

import dataclasses
import os

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from skykiln.engine.digests import digest_chunks
from skykiln.engine.stamps import OutputRecord, Stamp, read_stamp, void_stamp, write_stamp

names = st.text(min_size=1, max_size=12)
numbers = st.integers(0, 2**62) | st.floats(allow_nan=False, allow_infinity=False)
values = st.recursive(st.none() | st.booleans() | numbers | names, lambda inner: st.lists(inner, max_size=3))
records = st.builds(OutputRecord, names, names, st.integers(0, 2**62), st.integers(0, 2**62))
stamps = st.builds(
    Stamp,
    family=names,
    version=st.integers(1, 99),
    settings=st.dictionaries(names, values, max_size=4),
    inputs=st.dictionaries(names, names, max_size=4),
    outputs=st.dictionaries(names, records, max_size=3),
    reason=names,
    seconds=st.floats(0, 1e6),
    ended=names,
    night=names,
    on_disk=st.booleans(),
)
in_one_folder = settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)


@given(stamps)
def test_stamp_read_back_is_the_stamp_written(stamp):
    assert Stamp.from_bytes(stamp.to_bytes()) == stamp


@given(stamps, st.data())
@in_one_folder
def test_cut_stamp_is_no_stamp(tmp_path, stamp, data):
    path = tmp_path / "cut.stamp"
    whole = stamp.to_bytes()
    path.write_bytes(whole[: data.draw(st.integers(0, len(whole) - 3))])
    assert read_stamp(path) is None


@given(before=st.binary(max_size=40), after=st.binary(max_size=40), same_time=st.booleans())
@in_one_folder
def test_record_fits_equal_bytes_and_no_others_of_another_size_or_time(tmp_path, before, after, same_time):
    path = tmp_path / "output"
    path.write_bytes(before)
    status = path.stat()
    record = OutputRecord.of("output", digest_chunks([before]), status)
    path.write_bytes(after)
    os.utime(path, ns=(status.st_atime_ns, status.st_mtime_ns + (not same_time)))
    trusted_by_its_time = same_time and len(before) == len(after)
    assert record.fits(path) == (before == after or trusted_by_its_time)


def test_missing_stamp_is_none(tmp_path):
    assert read_stamp(tmp_path / "none.stamp") is None


def test_stamp_is_parsed_once_and_anew_when_another_stands_in_its_place(tmp_path):
    path = tmp_path / "x.stamp"
    stamp = Stamp("f", 1, {"a": [1]}, {}, {}, "r", 0.5, "now", "tonight", True)
    write_stamp(path, stamp)
    assert read_stamp(path) is read_stamp(path)
    write_stamp(path, dataclasses.replace(stamp, night="later"))
    assert read_stamp(path).night == "later"
    path.unlink()
    assert read_stamp(path) is None


def test_stamp_just_written_is_told_as_its_file_gives_it_back(tmp_path):
    write_stamp(tmp_path / "x.stamp", Stamp("f", 1, {"a": (1, 2)}, {}, {}, "r", 0.5, "now", "n", True))
    assert read_stamp(tmp_path / "x.stamp").settings == {"a": [1, 2]}


def test_voiding_keeps_what_is_on_record(tmp_path):
    path = tmp_path / "x.stamp"
    stamp = Stamp("f", 1, {"a": 1}, {}, {}, "r", 0.5, "now", "tonight", True)
    write_stamp(path, stamp)
    void_stamp(path, "was asked for again")
    assert read_stamp(path) == dataclasses.replace(stamp, void="was asked for again")


def test_voiding_what_was_never_stamped_does_nothing(tmp_path):
    void_stamp(tmp_path / "x.stamp", "was asked for again")
    assert not (tmp_path / "x.stamp").exists()
