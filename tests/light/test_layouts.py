"""Every layout gives the same probe; what flips, mirrors or loses light is caught."""

import numpy as np
import pytest
from layout_pictures import (
    CROSS_HORIZONTAL,
    GROUND,
    PROJECTIONS,
    TABLE,
    angular,
    equirect,
    fisheye,
    marked_sky,
    marked_sky_over_ground,
    mirror_ball,
    photographed,
    pixel_solid_angle,
    sampled_with,
    tiled,
)

from skykiln.light.cube_axes import SAMPLING_SIGNS
from skykiln.light.directions import cube_directions, panorama_directions
from skykiln.light.faces import extract_faces
from skykiln.light.layouts import (
    FACE_CONVENTIONS,
    LAYOUTS,
    fitting_layouts,
    likely_convention,
    panorama_from,
    panorama_of_faces,
    world_faces,
)
from skykiln.light.orientation import source_to_world
from skykiln.light.photometry import mean_radiance

EDGE = 128
UPPER = [name for name, layout in LAYOUTS.items() if layout.upper]
WHOLE = [name for name, layout in LAYOUTS.items() if not layout.upper]


def picture_of(layout, sky, edge=EDGE):
    projection, (w, h) = PROJECTIONS[layout]
    return photographed(sky, projection, w * edge, h * edge)


@pytest.fixture(scope="module")
def expected():
    """Panoramas of both skies, twice as fine as the pictures, and their probes."""
    panoramas = {
        sky: photographed(sky, equirect, 1024, 512, samples=1) for sky in (marked_sky, marked_sky_over_ground)
    }
    return {sky: (panorama, extract_faces(panorama, 32)) for sky, panorama in panoramas.items()}


def differences(found, wanted):
    """Differences against the texel's value or the mean, whichever is more."""
    return np.abs(found - wanted) / np.maximum(wanted, wanted.mean((0, 1, 2)))


@pytest.mark.parametrize("layout", LAYOUTS)
def test_every_layout_gives_the_same_probe_and_flux(layout, expected):
    sky = marked_sky_over_ground if layout in UPPER else marked_sky
    panorama = panorama_from(picture_of(layout, sky), layout, ground=("colour", GROUND))
    assert panorama.shape[1] == 2 * panorama.shape[0]
    source, faces = expected[sky]
    np.testing.assert_allclose(mean_radiance(panorama), mean_radiance(source), rtol=5e-4)
    found = differences(extract_faces(panorama, 32), faces)
    if layout == "mirror_ball":  # its rim, where one pixel shows 8 degrees of what lies at +z
        found[cube_directions(32)[..., 2] > np.cos(np.radians(12))] = 0
    assert found.max() < 0.05
    assert found.mean() < 1e-3


@pytest.mark.parametrize("layout", [name for name in LAYOUTS if not name.startswith("equirect")])
@pytest.mark.parametrize("place", [(0.4, 0.46), (0.61, 0.42), (0.03, 0.46)])
def test_a_sun_of_one_source_pixel_keeps_its_flux_and_place(layout, place):
    projection, (w, h) = PROJECTIONS[layout]
    width, height = 64 * w, 64 * h
    column, row = int(place[0] * width), int(place[1] * height)
    if layout in ("strip_vertical", "cube"):
        column, row = int(place[0] * width), int(place[1] * 64)
    picture = np.zeros((height, width, 3), np.float32)
    picture[row, column] = 1e5
    panorama = panorama_from(picture, layout, ground=("colour", 0))
    flux = 4 * np.pi * mean_radiance(panorama)[0]
    wanted = 1e5 * pixel_solid_angle(projection, width, height, column, row)
    assert flux == pytest.approx(wanted, rel=5e-3)
    centre = projection(np.array([(column + 0.5) / width]), np.array([(row + 0.5) / height]))[0]
    found = (panorama[..., :1] * panorama_directions(panorama.shape[1], panorama.shape[0])).sum((0, 1))
    assert found @ centre / np.linalg.norm(found) > np.cos(0.5 * np.pi / 128)


@pytest.mark.parametrize("layout", WHOLE)
def test_constant_stays_constant(layout):
    _, (w, h) = PROJECTIONS[layout]
    panorama = panorama_from(np.full((16 * h, 16 * w, 3), 3, np.float32), layout)
    np.testing.assert_allclose(panorama, 3, rtol=1e-6)


@pytest.mark.parametrize("layout", [name for name in WHOLE if name != "equirect"])
def test_a_picture_saved_mirrored_is_told_from_the_right_one(layout, expected):
    picture = picture_of(layout, marked_sky, 32)[:, ::-1]
    found = extract_faces(panorama_from(picture, layout), 32)
    assert differences(found, expected[marked_sky][1]).mean() > 0.1


def test_points_of_the_discs_lie_where_the_docstring_says():
    half, zero, quarter = np.array([0.5]), np.array([0.0]), np.array([0.25])
    np.testing.assert_allclose(angular(half, half)[0], [0, 0, 1], atol=1e-12)
    np.testing.assert_allclose(angular(quarter, half)[0], [1, 0, 0], atol=1e-12)  # +x on the left
    np.testing.assert_allclose(fisheye(half, half)[0], [0, 1, 0], atol=1e-12)
    np.testing.assert_allclose(fisheye(half, zero)[0], [0, 0, 1], atol=1e-12)  # +z above
    np.testing.assert_allclose(mirror_ball(half, half)[0], [0, 0, -1], atol=1e-12)
    np.testing.assert_allclose(mirror_ball(half, zero)[0], [0, 0, 1], atol=1e-12)
    side = mirror_ball(half - np.sqrt(0.5) / 2, half)[0]
    np.testing.assert_allclose(side, [1, 0, 0], atol=1e-12)


@pytest.mark.parametrize("convention", SAMPLING_SIGNS)
def test_strips_may_follow_any_of_the_renderers_conventions(convention, expected):
    axes = sampled_with(np.array(SAMPLING_SIGNS[convention]))
    picture = photographed(marked_sky, tiled([axes]), 6 * EDGE, EDGE)
    faces = extract_faces(panorama_from(picture, "strip_horizontal", faces=convention), 32)
    assert differences(faces, expected[marked_sky][1]).max() < 0.05


@pytest.mark.parametrize("convention", FACE_CONVENTIONS)
def test_single_images_become_world_faces_without_resampling(convention):
    if convention == "openexr":
        picture = photographed(lambda d: d, PROJECTIONS["cube"][0], 8, 48, samples=1)
    else:
        axes = [[face] for face in sampled_with(np.array(SAMPLING_SIGNS[convention]))]
        picture = photographed(lambda d: d, tiled(axes), 8, 48, samples=1)
    images = picture.reshape(6, 8, 8, 3)
    np.testing.assert_allclose(world_faces(images, convention), cube_directions(8), atol=1e-6)


def test_the_images_themselves_tell_right_handed_sets_from_left_handed_ones():
    images = picture_of("cube", marked_sky, 32).reshape(6, 32, 32, 3)
    assert likely_convention(images) == "openexr"
    images = photographed(marked_sky, tiled([[face] for face in TABLE]), 32, 192).reshape(6, 32, 32, 3)
    assert likely_convention(images) == "negate_x"


@pytest.mark.parametrize("layout", ["cross_vertical", "angular", "equirect"])
def test_a_turn_is_taken_with_the_layout(layout, expected):
    turn = source_to_world(pitch=0.5, roll=0.2, flip=True)
    panorama = panorama_from(picture_of(layout, lambda d: marked_sky(d @ turn.T)), layout, turn=turn)
    assert differences(extract_faces(panorama, 32), expected[marked_sky][1]).max() < 0.07


def test_faces_cut_from_a_cross_and_given_singly_agree():
    faces = photographed(marked_sky, PROJECTIONS["cube"][0], 16, 96).reshape(6, 16, 16, 3)
    cross = photographed(marked_sky, CROSS_HORIZONTAL, 64, 48)
    np.testing.assert_allclose(
        panorama_of_faces(world_faces(faces, "openexr")),
        panorama_from(cross, "cross_horizontal"),
        rtol=1e-5,
    )


def test_an_aspect_may_fit_several_layouts_or_none():
    assert fitting_layouts(4096, 2048) == ("equirect",)
    assert fitting_layouts(300, 400) == ("cross_vertical",)
    assert fitting_layouts(512, 512) == ("angular", "mirror_ball", "fisheye")
    assert fitting_layouts(256, 1536) == ("cube", "strip_vertical")
    assert fitting_layouts(1920, 1080) == ()


def test_a_sky_without_its_lower_half_asks_for_a_ground():
    with pytest.raises(ValueError, match="ground"):
        panorama_from(np.ones((16, 16, 3), np.float32), "fisheye")
