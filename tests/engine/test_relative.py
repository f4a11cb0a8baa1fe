"""Paths relative to a record's folder: there and back."""

import pytest

from skykiln.engine.relative import joined, relative_to


@pytest.mark.parametrize(
    ("path", "told"),
    [
        ("/b/work/quay/faces.npy", "faces.npy"),
        ("/b/work/quay/packed/a.ktx2", "packed/a.ktx2"),
        ("/b/probes/quay/probe.json", "../../probes/quay/probe.json"),
        ("/b/work/quay_2/faces.npy", "../quay_2/faces.npy"),
        ("/b/work/quay/a..b/..c", "a..b/..c"),
    ],
)
def test_path_is_told_from_the_record_s_folder_and_found_again(path, told):
    assert relative_to("/b/work/quay", path) == told
    assert joined("/b/work/quay", told) == path
    assert joined("/moved/work/quay", told) == path.replace("/b/", "/moved/")
