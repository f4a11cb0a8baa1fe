"""A stage whose values change must get a new version, or nobody's old outputs would be made anew."""

import numpy as np
import pytest
from golden import FILE, golden_pipeline, stage_outputs


@pytest.fixture(scope="module")
def outputs(tmp_path_factory):
    pipeline = golden_pipeline(tmp_path_factory.mktemp("golden"))
    pipeline.bake()
    return stage_outputs(pipeline)


@pytest.mark.parametrize("name", [name for name in np.load(FILE).files if not name.endswith(" version")])
def test_values_change_only_with_the_stage_s_version(outputs, name):
    stored = np.load(FILE)
    array, version = outputs[name]
    assert version == stored[f"{name} version"], "store the new version's values with golden.py"
    assert array.shape == stored[name].shape
    # Vector units of other CPUs sum in other orders; half floats then round the other way now and then.
    tolerance = 1e-3 if "ktx2" in name else 1e-4
    scale = np.abs(stored[name]).max()
    np.testing.assert_allclose(array, stored[name], rtol=tolerance, atol=1e-6 * scale)


def test_every_numeric_output_has_a_golden_one(outputs):
    assert {name for name in np.load(FILE).files if not name.endswith(" version")} == set(outputs)
