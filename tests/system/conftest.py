"""What the tests of several graphics interfaces share: one baked probe."""

import pytest
from packed_probe import baked_probe


@pytest.fixture(scope="session")
def probe(tmp_path_factory):
    return baked_probe(tmp_path_factory.mktemp("probe"))
