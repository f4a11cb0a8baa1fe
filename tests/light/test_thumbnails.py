"""Small copies of a chain, and how two of them differ."""

import numpy as np
import pytest

from skykiln.light.chain_change import brightest_spot, level_change
from skykiln.light.directions import cube_directions
from skykiln.light.thumbnails import block_means, restored, stored, thumbnails


def _levels(*sizes):
    generator = np.random.default_rng(5)
    return [np.exp(generator.normal(0, 4, (6, size, size, 3))).astype(np.float32) for size in sizes]


def test_a_copy_s_texel_is_the_mean_of_those_it_stands_for():
    (level,) = _levels(64)
    (copy,) = thumbnails([level])
    assert copy.shape == (6, 32, 32, 3)
    np.testing.assert_allclose(copy[4, 3, 7], level[4, 6:8, 14:16].mean((0, 1)), rtol=1e-5)


def test_block_means_leave_out_what_is_no_whole_block():
    image = np.arange(2 * 5 * 7, dtype=np.float32).reshape(1, 5, 14, 1)
    assert block_means(image, 3).shape == (1, 1, 4, 1)
    assert block_means(image, 3)[0, 0, 1, 0] == image[0, :3, 3:6].mean()


def test_stored_copies_come_back_to_a_twentieth_of_a_percent():
    sizes = (48, 16, 2)
    copies = thumbnails(_levels(*sizes))
    for copy, back in zip(copies, restored(stored(copies), sizes), strict=True):
        np.testing.assert_allclose(back, copy, rtol=5e-4)


def test_black_and_a_sun_are_stored_too():
    copy = np.zeros((6, 1, 1, 3), np.float32)
    copy[2] = 1.6e9
    (back,) = restored(stored([copy]), [1])
    assert (back[0] == 0).all()
    np.testing.assert_allclose(back[2], 1.6e9, rtol=5e-4)


def test_copies_of_another_chain_are_refused():
    with pytest.raises(ValueError, match="are not the copies"):
        restored(stored(thumbnails(_levels(8, 4))), [8, 2])


def test_brighter_by_a_tenth_is_a_change_of_a_tenth():
    (level,) = _levels(8)
    change = level_change(level, level * np.float32(1.1))
    assert change == pytest.approx((0.1, 0.1), rel=1e-4)


def test_one_texel_counts_by_its_solid_angle_and_dark_ones_are_held_at_the_floor():
    level = np.ones((6, 2, 2, 3))
    level[0, 0, 0] = 0
    after = level.copy()
    after[0, 0, 0] = 0.5
    change = level_change(level, after)
    mean = 23 / 24  # 24 texels of equal solid angle
    assert change.largest == pytest.approx(0.5 / (1e-3 * mean))
    assert change.mean == pytest.approx(0.5 / 24 / mean)


def test_chains_of_other_sizes_are_compared_by_the_smaller():
    (level,) = _levels(16)
    assert level_change(level, block_means(level, 2)).mean == pytest.approx(0, abs=1e-6)


def test_black_that_stays_black_did_not_change():
    black = np.zeros((6, 2, 2, 3))
    assert level_change(black, black) == (0, 0)
    assert level_change(black, black + 1) == (1, 1)


def test_brightest_spot_is_between_the_texels_that_share_a_sun():
    faces = np.full((6, 32, 32, 3), 0.1)
    faces[4, 10, 12] = faces[4, 10, 13] = 100
    faces[1, 3, 3] = 60  # a lamp elsewhere
    direction, luminance = brightest_spot(faces, [0.2, 0.7, 0.1])
    middle = cube_directions(32)[4, 10, 12:14].sum(0)
    np.testing.assert_allclose(direction, middle / np.linalg.norm(middle), atol=1e-3)
    assert luminance == pytest.approx(100)
