"""A cube unrolled: every face in its place, all twelve edges inside."""

import numpy as np

from skykiln.light.directions import cube_directions
from skykiln.report.belt import belt, belt_directions, off_belt, panorama_of

FACE_NUMBERS = np.repeat(np.arange(6), 16).reshape(6, 4, 4, 1)


def test_sides_stand_in_the_order_of_a_panorama_and_the_lids_above_and_below():
    numbers = belt(FACE_NUMBERS, 4)[..., 0]
    assert numbers[4].tolist() == [5, 5, 0, 0, 0, 0, 4, 4, 4, 4, 1, 1, 1, 1, 5, 5]  # -z +x +z -x -z
    assert set(numbers[0]) == {2}
    assert set(numbers[7]) == {3}


def test_neighbouring_pixels_of_the_belt_look_in_neighbouring_directions():
    directions = belt_directions(16)
    directions = directions / np.linalg.norm(directions, axis=-1, keepdims=True)
    shown = ~off_belt(16)
    for axis in (0, 1):
        step = np.linalg.norm(np.diff(directions, axis=axis), axis=-1)
        both = shown[1:] & shown[:-1] if axis == 0 else shown[:, 1:] & shown[:, :-1]
        assert step[both].max() < 2.5 / 16


def test_quarters_of_the_lids_cover_them_once():
    directions, shown = belt_directions(32), ~off_belt(32)
    top = directions[:16][shown[:16]]
    counted, _, _ = np.histogram2d(top[:, 0], top[:, 2], bins=4, range=[[-1, 1], [-1, 1]])
    assert counted.min() > 0.8 * 32 * 32 / 16
    assert counted.max() < 1.2 * 32 * 32 / 16


def test_panorama_shows_the_texel_that_lies_in_a_direction():
    faces = cube_directions(8)
    picture = panorama_of(faces, 64)
    assert picture.shape == (32, 64, 3)
    assert picture[16, 32] @ [0, 0, 1] > 0.98
    assert picture[16, 16] @ [1, 0, 0] > 0.98
    assert picture[0, 5] @ [0, 1, 0] > 0.98
