"""Counting and mending of impossible pixels."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from skykiln.light.repair import INF, NAN, NEGATIVE, Repairs, repair_pixels


def sky(height=8, width=16, value=1.0):
    return np.full((height, width, 3), value, dtype=np.float32)


def test_good_pictures_pass_through_without_a_copy():
    pixels = sky()
    same, repairs, _ = repair_pixels(pixels)
    assert same is pixels
    assert repairs == Repairs(0, 0, 0)


def test_negative_zero_is_a_valid_zero():
    pixels = sky(value=-0.0)
    same, repairs, _ = repair_pixels(pixels)
    assert same is pixels
    assert sum(repairs) == 0


def test_each_pixel_counts_once_as_the_worst_it_holds():
    pixels = sky()
    pixels[1, 1] = [np.nan, np.inf, -1]
    pixels[2, 5] = [-np.inf, -1, 2]
    pixels[3, 9] = [1, -1e-6, 2]
    pixels[6, 9, 2] = -np.nan
    mended, repairs, _ = repair_pixels(pixels)
    assert repairs == Repairs(nan=2, inf=1, negative=1)
    np.testing.assert_array_equal(mended[6, 9], [1, 1, 1])


def test_only_the_channel_at_fault_changes_and_the_input_stays():
    pixels = sky()
    pixels[3, 3] = [7, -2, 9]
    mended, _, _ = repair_pixels(pixels)
    np.testing.assert_array_equal(mended[3, 3], [7, 1, 9])
    assert pixels[3, 3, 1] == -2


def test_value_is_the_mean_of_the_eight_neighbours():
    rng = np.random.default_rng(3)
    pixels = rng.random((5, 7, 3)).astype(np.float32)
    pixels[2, 3] = np.nan
    around = pixels[1:4, 2:5].reshape(9, 3)
    expected = np.delete(around, 4, axis=0).mean(axis=0)
    np.testing.assert_allclose(repair_pixels(pixels)[0][2, 3], expected, rtol=1e-6)


def test_left_and_right_edges_are_neighbours():
    pixels = sky(4, 6, 0.0)
    pixels[:, 5] = 8.0
    pixels[1, 0] = np.nan
    # Of the eight around column 0, three lie in column 5.
    np.testing.assert_allclose(repair_pixels(pixels)[0][1, 0], 3.0)


def test_above_the_top_row_lies_the_same_row_half_a_turn_away():
    pixels = sky(4, 8, 0.0)
    pixels[0, 4:7] = 16.0  # column 1 + 4 and its neighbours
    pixels[0, 1] = np.nan
    np.testing.assert_allclose(repair_pixels(pixels)[0][0, 1], 6.0)


def test_wide_holes_close_smoothly_between_their_rims():
    pixels = sky(32, 64)
    pixels[:, 32:] = 3.0
    pixels[8:24, 24:40] = np.inf
    mended, repairs, _ = repair_pixels(pixels)
    assert repairs.inf == 256
    assert mended.min() >= 1.0 and mended.max() <= 3.0
    assert (np.diff(mended[16, 22:42, 0]) >= -1e-6).all()


def test_pictures_without_a_valid_value_are_refused():
    with pytest.raises(ValueError, match="every value"):
        repair_pixels(sky(value=np.nan))
    pixels = sky()
    pixels[..., 1] = -1
    with pytest.raises(ValueError, match="every value"):
        repair_pixels(pixels)


@settings(max_examples=60, deadline=None)
@given(arrays(np.float32, (4, 6, 3), elements=st.floats(width=32, allow_nan=True)))
def test_mended_values_lie_between_the_valid_ones(pixels):
    valid = np.isfinite(pixels) & (pixels >= 0)
    if not valid.any(axis=(0, 1)).all():
        with pytest.raises(ValueError, match="every value"):
            repair_pixels(pixels)
        return
    mended, repairs, _ = repair_pixels(pixels)
    assert sum(repairs) == (~valid.all(axis=-1)).sum()
    np.testing.assert_array_equal(mended[valid], pixels[valid])
    for channel in range(3):
        known = pixels[..., channel][valid[..., channel]]
        assert float(mended[..., channel].min()) >= float(known.min())
        assert float(mended[..., channel].max()) <= float(known.max()) * (1 + 1e-6)


def test_places_say_where_and_what_the_worst_was():
    pixels = np.ones((8, 16, 3), np.float32)
    pixels[2, 3, 0], pixels[4, 4], pixels[5, 1, 2] = np.nan, np.inf, -1
    pixels[2, 3, 1] = -2
    _, _, places = repair_pixels(pixels)
    np.testing.assert_array_equal(places, [[2, 3, NAN], [4, 4, INF], [5, 1, NEGATIVE]])
    assert repair_pixels(np.ones((8, 16, 3), np.float32))[2].shape == (0, 3)
