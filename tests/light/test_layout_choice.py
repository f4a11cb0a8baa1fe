"""Layouts that nobody named, and names that can't be right."""

import pytest
from layout_pictures import PROJECTIONS, TABLE, marked_sky, photographed, tiled

from skykiln.light.layout_choice import check_fit, face_convention, likely_layout
from skykiln.light.layouts import LAYOUTS


def test_the_aspect_tells_a_layout_where_only_one_has_it():
    assert likely_layout(2048, 1024) == "equirect"
    assert likely_layout(2048, 512) == "equirect_upper"
    assert likely_layout(1024, 768) == "cross_horizontal"
    assert likely_layout(64, 384) == "strip_vertical"


def test_the_file_s_own_word_comes_before_the_aspect():
    assert likely_layout(64, 384, "cube") == "cube"
    assert likely_layout(1000, 600, "latlong") == "equirect"


def test_squares_may_be_several_and_are_told_with_the_choices():
    with pytest.raises(ValueError, match="512 x 512 may be angular, mirror_ball, fisheye; say which"):
        likely_layout(512, 512)


def test_other_aspects_are_none():
    with pytest.raises(ValueError, match="1920 x 1080 is not twice as wide as high"):
        likely_layout(1920, 1080)


@pytest.mark.parametrize("layout", LAYOUTS)
def test_every_layout_refuses_a_picture_of_another_aspect(layout):
    across, down = LAYOUTS[layout].aspect
    check_fit(12 * across, 12 * down, layout)
    with pytest.raises(ValueError, match="can't be"):
        check_fit(12 * across + 1, 12 * down, layout)


@pytest.mark.parametrize("size", [(1, 1), (2, 1), (2, 2), (2, 8)])
def test_what_is_too_small_is_refused(size):
    for layout in LAYOUTS:
        with pytest.raises(ValueError, match="can't be"):
            check_fit(*size, layout)


def test_strips_are_told_apart_by_how_their_images_join():
    cube = photographed(marked_sky, PROJECTIONS["cube"][0], 32, 192)
    assert face_convention(cube, "strip_vertical", "auto") == "openexr"
    strip = photographed(marked_sky, tiled([TABLE]), 192, 32)
    assert face_convention(strip, "strip_horizontal", "auto") == "negate_x"
    assert face_convention(strip, "strip_horizontal", "direct") == "direct"
    assert face_convention(cube, "cube", "auto") is None
