"""Which texels an audit looks at, and where they lie."""

import numpy as np
import pytest
from panorama_reference import coloured_linear, small_sun

from skykiln.light.directions import FACE_AXES, cube_directions, cube_texel_solid_angles
from skykiln.light.faces import extract_faces
from skykiln.light.source_tree import source_tree
from skykiln.light.texel_draw import (
    Texels,
    draw_texels,
    texel_at,
    texel_edges,
    texel_normals,
    texel_solid_angles,
    yaw_rotation,
)


def generator(seed=1):
    return np.random.Generator(np.random.Philox(key=seed))


def every_texel(size):
    face, row, column = (index.ravel() for index in np.indices((6, size, size)))
    return Texels(np.zeros_like(face), face, row, column)


@pytest.mark.parametrize("size", [1, 2, 8])
def test_a_texels_own_direction_falls_on_it(size):
    texels = every_texel(size)
    found = texel_at(cube_directions(size).reshape(-1, 3), size)
    np.testing.assert_array_equal(found, np.stack(texels[1:]))


def test_normals_and_solid_angles_are_those_of_the_texels():
    texels = every_texel(4)
    np.testing.assert_allclose(
        texel_normals([4], texels, 0.0), cube_directions(4).reshape(-1, 3), atol=1e-15
    )
    np.testing.assert_allclose(
        texel_solid_angles([4], texels), np.tile(cube_texel_solid_angles(4).ravel(), 6)
    )


def test_a_direction_is_inside_the_edges_of_its_own_texel_alone():
    random = np.random.default_rng(3)
    directions = random.normal(size=(300, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    edges = texel_edges([4], every_texel(4), 0.0)
    inside = (np.einsum("tei,ni->nte", edges, directions) >= 0).all(axis=2)
    face, row, column = texel_at(directions, 4)
    np.testing.assert_array_equal(inside.sum(axis=1), 1)
    np.testing.assert_array_equal(inside.argmax(axis=1), (face * 4 + row) * 4 + column)


def test_positive_yaw_turns_what_lay_at_z_towards_x():
    np.testing.assert_allclose(yaw_rotation(np.pi / 2) @ [0, 0, 1], [1, 0, 0], atol=1e-15)
    # The texel that looks along world +x reads the panorama at +z.
    texels = Texels(*np.array([[0], [0], [0], [0]]))
    np.testing.assert_allclose(texel_normals([1], texels, np.pi / 2), [[0, 0, 1]], atol=1e-15)
    middle = texel_edges([1], texels, np.pi / 2)[0] @ [0, 0, 1]
    np.testing.assert_allclose(middle, np.sqrt(0.5), rtol=1e-12)


def test_yaw_is_that_of_the_faces():
    panorama = coloured_linear(64)
    faces = extract_faces(panorama, 4, yaw=0.7)
    texels = every_texel(4)
    expected = 1 + 0.8 * texel_normals([4], texels, 0.7)
    np.testing.assert_allclose(faces.reshape(-1, 3), expected, atol=0.03)


def test_every_map_and_face_is_drawn_from_and_none_twice():
    tree = source_tree(coloured_linear(32))
    sizes, alphas = [16, 8, 2], np.array([0.0, 0.1, 1.0])
    texels = draw_texels(tree, sizes, alphas, 2, 0.3, generator())
    for chart, size in enumerate(sizes):
        chosen = np.stack(texels[1:])[:, texels.chart == chart]
        assert set(chosen[0]) == set(range(6))
        assert chosen[1:].min() >= 0 and chosen[1:].max() < size
        assert np.unique(chosen, axis=1).shape == chosen.shape


def test_half_of_the_texels_lie_where_the_light_is():
    panorama = small_sun(64)
    brightest = np.unravel_index(panorama.sum(axis=2).argmax(), panorama.shape[:2])
    tree = source_tree(panorama)
    alphas = np.array([0.0, 0.05])
    texels = draw_texels(tree, [16, 64], alphas, 4, 0.0, generator())
    normals = texel_normals([16, 64], texels, 0.0)
    longitude, latitude = (
        np.pi - 2 * np.pi * (brightest[1] + 0.5) / 128,
        np.pi / 2 - np.pi * (brightest[0] + 0.5) / 64,
    )
    sun = [
        np.cos(latitude) * np.sin(longitude), np.sin(latitude), np.cos(latitude) * np.cos(longitude)
    ]  # fmt: skip
    near = normals @ sun > np.cos(0.3)
    assert near[texels.chart == 1].sum() > 12
    assert near[texels.chart == 0].sum() >= 1


def test_draws_follow_from_the_seed_and_black_sources_are_drawn_evenly():
    tree = source_tree(coloured_linear(16))
    again = [draw_texels(tree, [8], np.array([0.2]), 2, 0.0, generator(7)) for _ in range(2)]
    np.testing.assert_array_equal(again[0], again[1])
    other = draw_texels(tree, [8], np.array([0.2]), 2, 0.0, generator(8))
    assert not np.array_equal(np.stack(again[0]), np.stack(other))
    black = source_tree(np.zeros((8, 16, 3), np.float32))
    assert draw_texels(black, [8], np.array([0.2]), 2, 0.0, generator()).face.size <= 12


def test_faces_are_those_of_the_conventions():
    # The middle of each face looks along its own axis.
    face, row, column = texel_at(FACE_AXES[:, 0], 3)
    np.testing.assert_array_equal(face, range(6))
    np.testing.assert_array_equal([row, column], 1)
