"""How far codings may move a value: never farther than said, and nearly so far."""

import numpy as np
import pytest

from skykiln.formats.coding_steps import FINEST_FIRST, largest_rounding
from skykiln.formats.exr_levels import EXR_PIXELS
from skykiln.formats.pixels import PIXELS

BOUNDED = ["half", "rgba16f", "rgb9e5", "r11g11b10f"]


def decoded(pixels, level):
    if pixels in EXR_PIXELS:
        return EXR_PIXELS[pixels](level).astype(np.float32)
    coding = PIXELS[pixels]
    return coding.decode(coding.encode(level).tobytes(), level.shape[:3])


def level_of(low, high, seed=1, size=16):
    random = np.random.default_rng(seed)
    return np.exp2(random.uniform(low, high, (6, size, size, 3))).astype(np.float32)


@pytest.mark.parametrize("pixels", BOUNDED)
@pytest.mark.parametrize(("low", "high"), [(-3, 3), (10, 15.9), (-26, -12), (-0.02, 0.02)])
def test_no_value_is_moved_farther_than_said_and_some_nearly_so_far(pixels, low, high):
    level = level_of(low, high)
    coded = decoded(pixels, level)
    used = np.abs(coded - level) / largest_rounding(pixels, coded)
    assert used.max() <= 1
    assert used.max() > 0.45


def test_floats_are_kept():
    level = level_of(-30, 15)
    np.testing.assert_array_equal(largest_rounding("float", decoded("float", level)), 0)


def test_a_block_may_move_its_texels_within_its_own_range():
    level = level_of(-1, 1)
    level[0, 5, 6] = 60_000
    bound = largest_rounding("bc6h", decoded("bc6h", level))
    assert (np.abs(decoded("bc6h", level) - level) <= bound).all()
    assert bound[0, 4:8, 4:8].min() > 10_000
    assert bound[0, :4].max() < 12


def test_every_coding_of_cube_maps_has_its_bound():
    tables = {"rg16f", "r16f"}
    assert set(FINEST_FIRST) == PIXELS.keys() - tables | EXR_PIXELS.keys()
