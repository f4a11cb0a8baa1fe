"""The scene's closed forms: what rays meet, and how it lies to the sky."""

import numpy as np
import pytest

from skykiln.light.quay_scene import (
    FIELD_OF_VIEW,
    QUAY_SCENE,
    TARGET,
    Material,
    Shape,
    first_hits,
    scene_eye,
    view_rays,
)

GREY = Material("grey", (0.2, 0.2, 0.2), (0.04, 0.04, 0.04), (0.2, 0.8))


def hits_from(eye, ray, *shapes):
    ray = np.array([ray], float)
    return first_hits(np.array(eye, float), ray / np.linalg.norm(ray), shapes)


def test_picture_centre_looks_along_the_yaw_and_plus_x_is_left_of_plus_z():
    rays = view_rays(5, 3, 0.0, 0.0, np.radians(90))
    np.testing.assert_allclose(rays[1, 2], [0, 0, 1], atol=1e-12)
    assert rays[1, 0, 0] > 0 > rays[1, 4, 0]
    assert rays[0, 2, 1] > 0 > rays[2, 2, 1]
    np.testing.assert_allclose(view_rays(1, 1, np.radians(90), 0, 1)[0, 0], [1, 0, 0], atol=1e-12)


def test_upper_edge_lies_at_half_the_field_of_view():
    top = view_rays(1, 2, 0.3, 0.0, np.radians(60))[0, 0]  # the centre of the upper of two rows
    assert np.arcsin(top[1]) == pytest.approx(np.arctan(np.tan(np.radians(30)) / 2))


def test_eye_looks_at_the_target():
    eye = scene_eye(0.7, -0.3)
    centre = view_rays(1, 1, 0.7, -0.3, FIELD_OF_VIEW)[0, 0]
    np.testing.assert_allclose(np.cross(np.array(TARGET) - eye, centre), 0, atol=1e-12)


def test_ball_mirrors_its_own_normal():
    ball = Shape((0, 0, 0), (0, 0, 0), 0.5, GREY)
    found = hits_from((0, 0.3, -2), (0, 0, 1), ball)
    np.testing.assert_allclose(found.n, [[0, 0.6, -0.8]], atol=1e-12)
    assert not hits_from((0, 0.51, -2), (0, 0, 1), ball).hit[0]
    assert not hits_from((0, 0, 2), (0, 0, 1), ball).hit[0]  # it lies behind


def test_rod_has_a_straight_mantle_round_ends_and_roughness_along_it():
    rod = Shape((0, 0, 0), (2, 0, 0), 0.5, GREY)
    middle = hits_from((1.5, 3, 0), (0, -1, 0), rod)
    np.testing.assert_allclose(middle.n, [[0, 1, 0]], atol=1e-12)
    assert middle.roughness[0] == pytest.approx(0.2 + 0.6 * 0.75)
    end = hits_from((5, 0.3, 0), (-1, 0, 0), rod)
    np.testing.assert_allclose(end.n, [[0.8, 0.6, 0]], atol=1e-12)
    assert end.roughness[0] == pytest.approx(0.8)


def test_box_shows_the_face_that_is_met_first():
    box = Shape((-1, 0, -1), (1, 1, 1), 0.0, GREY)
    np.testing.assert_allclose(hits_from((0.5, 3, 0), (0, -1, 0), box).n, [[0, 1, 0]])
    side = hits_from((-3, 0.5, 0), (1, 0, 0), box)
    np.testing.assert_allclose(side.n, [[-1, 0, 0]])
    assert side.roughness[0] == pytest.approx(0.2)
    assert not hits_from((-3, 1.5, 0), (1, 0, 0), box).hit[0]


def test_every_shape_is_seen_from_the_front_with_unit_normals_towards_the_eye():
    rays = view_rays(160, 100, 0.0, np.radians(-12), FIELD_OF_VIEW).reshape(-1, 3)
    found = first_hits(scene_eye(0.0, np.radians(-12)), rays)
    np.testing.assert_allclose(np.linalg.norm(found.n, axis=1), 1)
    assert ((found.n * rays).sum(1)[found.hit] < 0).all()
    seen = {tuple(albedo) for albedo in found.albedo[found.hit]} | {tuple(f0) for f0 in found.f0[found.hit]}
    assert {shape.material.albedo for shape in QUAY_SCENE} <= seen
    assert {shape.material.f0 for shape in QUAY_SCENE} <= seen
    assert not found.hit.reshape(100, 160)[:, [0, -1]].any()  # the picture holds it all


def test_steps_along_a_ray_find_the_same_surface():
    """An independent way: signed distances to the shapes, marched along the ray."""
    rays = view_rays(24, 15, 0.5, np.radians(-20), FIELD_OF_VIEW).reshape(-1, 3)
    eye = scene_eye(0.5, np.radians(-20))
    found = first_hits(eye, rays)
    walked = np.zeros(len(rays))
    for _ in range(400):
        walked += np.min([distance_to(shape, eye + walked[:, None] * rays) for shape in QUAY_SCENE], axis=0)
    met = walked < 50
    points = eye + walked[:, None] * rays
    np.testing.assert_array_equal(found.hit, met)
    slopes = np.stack(
        [scene_distance(points + step) - scene_distance(points - step) for step in 1e-6 * np.eye(3)], axis=1
    ) / 2e-6
    np.testing.assert_allclose(slopes[met], found.n[met], atol=2e-2)


def scene_distance(points):
    return np.min([distance_to(shape, points) for shape in QUAY_SCENE], axis=0)


def distance_to(shape, points):
    start, end = np.array(shape.start), np.array(shape.end)
    if shape.radius:
        way = end - start
        share = np.clip((points - start) @ way / max(way @ way, 1e-12), 0, 1)
        return np.linalg.norm(points - start - share[:, None] * way, axis=1) - shape.radius
    off = np.abs(points - (start + end) / 2) - (end - start) / 2
    return np.linalg.norm(np.maximum(off, 0), axis=1) + np.minimum(off.max(1), 0)
