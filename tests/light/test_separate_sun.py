"""The sun of every kind of sky: found or not, its numbers, and that no light is lost or invented."""

from pathlib import Path

import numpy as np
import pytest
import sun_skies
from panorama_reference import spread_directions
from sun_skies import LOW, NOON, toward, with_disc

from skykiln.formats.source_files import read_source
from skykiln.light.bright_regions import SUN_RADIUS, compact_regions, filled_from_rim, rim_of
from skykiln.light.directions import panorama_directions
from skykiln.light.facing import irradiance_facing
from skykiln.light.orientation import source_to_world, turned
from skykiln.light.photometry import LUMINANCE_WEIGHTS, horizontal_illuminance
from skykiln.light.separate_sun import restored_sun, separate_sun, with_restored_sun
from skykiln.light.tangent_frames import around, tangent_frame

SUNNY = {
    "clear_noon": NOON,
    "hazy_evening": LOW,
    "clipped_noon": NOON,
    "behind_thin_cloud": NOON,
    "evening_over_water": LOW,
    "moonlit": NOON,
}
SUNLESS = ["overcast", "overcast_with_a_lamp", "night_with_lamps"]


@pytest.fixture(scope="module")
def separated():
    skies = {name: getattr(sun_skies, name)() for name in (*SUNNY, *SUNLESS)}
    return {name: (sky, *separate_sun(sky)) for name, sky in skies.items()}


def angle(a, b):
    return float(np.degrees(2 * np.arcsin(np.linalg.norm(a - b) / 2)))


def disc_irradiance(sun, normals, points=2000):
    """Irradiance (n, 3) of a uniform disc, by points on it."""
    share = (np.arange(points) + 0.5) / points
    cosines = 1 - 2 * np.sin(sun.angular_radius / 2) ** 2 * share
    d = around(np.broadcast_to(sun.direction, (points, 3)), cosines, np.arange(points) * 0.618034 % 1)
    facing = np.maximum(d @ np.transpose(normals), 0).mean(0) / (d @ sun.direction).mean()
    return facing[:, None] * sun.irradiance


def pixelwise_irradiance(excess, normals, parts=12):
    """Irradiance (n, 3) of a few lit pixels, each cut into parts x parts."""
    rows, columns = np.nonzero(excess.any(-1))
    height, width, _ = excess.shape
    step = (np.arange(parts) + 0.5) / parts
    latitude = np.pi * (0.5 - (rows[:, None, None] + step[:, None]) / height)
    longitude = np.pi - 2 * np.pi * (columns[:, None, None] + step) / width
    d = np.stack(np.broadcast_arrays(
        np.cos(latitude) * np.sin(longitude), np.sin(latitude), np.cos(latitude) * np.cos(longitude)
    ), -1)  # fmt: skip
    weights = np.cos(latitude) * np.ones(parts) * np.pi / height * 2 * np.pi / width / parts**2
    shares = np.stack([(np.maximum(d @ n, 0) * weights).sum((1, 2)) for n in normals])
    return shares @ excess[rows, columns].astype(np.float64)


def normals_about(direction):
    """All around, and close to where the sun stands on the surface's own horizon."""
    x, y = tangent_frame(direction)
    turns = np.linspace(0, 2 * np.pi, 12, endpoint=False)
    level = np.cos(turns)[:, None] * x + np.sin(turns)[:, None] * y
    tilted = np.concatenate([level + lift * direction for lift in (-0.01, -0.003, 0, 0.002, 0.006, 0.02)])
    return np.concatenate([spread_directions(40), tilted / np.linalg.norm(tilted, axis=1, keepdims=True)])


@pytest.mark.parametrize("name", SUNNY)
def test_the_sun_is_found_where_it_stands(name, separated):
    _, _, sun = separated[name]
    assert angle(sun.direction, SUNNY[name]) < 0.02
    assert np.linalg.norm(sun.direction) == pytest.approx(1)


@pytest.mark.parametrize("name", SUNLESS)
def test_skies_without_a_sun_stay_as_they_are(name, separated):
    sky, rest, sun = separated[name]
    assert sun is None
    assert rest is sky


@pytest.mark.parametrize("name", SUNNY)
def test_sky_and_sun_together_are_the_source_in_every_direction(name, separated):
    sky, rest, sun = separated[name]
    normals = normals_about(sun.direction)
    largest = irradiance_facing(sky, sun.direction)
    difference = pixelwise_irradiance(sky.astype(np.float64) - rest, normals)
    difference -= disc_irradiance(sun, normals)
    assert (np.abs(difference) / largest).max() < 1e-3


@pytest.mark.parametrize("name", SUNNY)
def test_level_illuminance_is_kept_exactly(name, separated):
    sky, rest, sun = separated[name]
    lux = horizontal_illuminance(rest) + float(sun.irradiance @ LUMINANCE_WEIGHTS) * sun.direction[1]
    assert lux == pytest.approx(horizontal_illuminance(sky), rel=1e-6)


@pytest.mark.parametrize(
    ("name", "colour"),
    [
        ("clear_noon", np.array([1.0, 0.95, 0.85]) * 2e5),
        ("behind_thin_cloud", np.array([1.0, 0.97, 0.9]) * 6e3),
        ("hazy_evening", np.array([1.0, 0.55, 0.2]) * 4e3),
        ("moonlit", np.array([250.0, 240, 220])),
    ],
)
def test_irradiance_is_that_of_the_disc_alone(name, colour, separated):
    sun = separated[name][2]
    expected = np.pi * np.sin(SUN_RADIUS) ** 2 * colour  # disc facing the surface: pi sin^2 r L
    np.testing.assert_allclose(sun.irradiance, expected, rtol=0.03)
    assert np.degrees(sun.angular_radius) == pytest.approx(np.degrees(SUN_RADIUS), rel=0.15)


def test_the_suns_radius_is_the_iaus():
    # IAU 2015 nominal radius over one astronomical unit: 0.5329 degrees across.
    assert 2 * np.degrees(SUN_RADIUS) == pytest.approx(0.5329, abs=5e-5)


@pytest.mark.parametrize("name", SUNNY)
def test_nothing_of_the_sun_is_left_and_nothing_else_is_touched(name, separated):
    sky, rest, sun = separated[name]
    changed = (sky != rest).any(-1)
    away = sun_skies.away_from(sun.direction)
    assert away[changed].max() < 3
    assert (rest <= sky).all() and rest.min() >= 0
    assert rest[changed].max() <= 1.05 * sky[(away < 6) & ~changed].max()


def test_only_the_clipped_sun_is_called_clipped(separated):
    assert {name for name in SUNNY if separated[name][2].clipped} == {"clipped_noon"}


def levelled_capture(elevation, tilt, height, **clipping):
    """A clipped picture of a camera that stood askew, levelled again; and where its sun stands then."""
    place, turn = toward(25.3, elevation), source_to_world(*np.radians(tilt))
    return turned(sun_skies.clipped_noon(height, turn.T @ place, **clipping), turn), place


def assert_found_clipped(elevation, tilt, height, **clipping):
    capture, place = levelled_capture(elevation, tilt, height, **clipping)
    sun = separate_sun(capture)[1]
    assert (sun.clipped, angle(sun.direction, place) < 0.2) == (True, True)


@pytest.mark.parametrize("elevation", [8, 58])
@pytest.mark.parametrize("tilt", [(1, 0.5), (4, -6), (15, 10)])
def test_a_clipped_sun_is_called_so_after_levelling(elevation, tilt):
    assert_found_clipped(elevation, tilt, 256)


@pytest.mark.long
@pytest.mark.parametrize("elevation", [8, 30, 58, 80])
@pytest.mark.parametrize("tilt", [(1, 0.5), (4, -6), (15, 10)])
@pytest.mark.parametrize(("glare", "end"), [(0.2, 60), (0.35, 60), (0.7, 1000)])
def test_every_clipped_sun_whose_top_is_wide_is_called_so(elevation, tilt, glare, end):
    assert_found_clipped(elevation, tilt, 512, glare=glare, end=end)


@pytest.mark.parametrize("height", [128, 256])
@pytest.mark.parametrize("rows_up", [0, 20, 32])  # corners of four pixels, and the pole
def test_a_whole_sun_between_like_pixels_is_not_called_clipped(height, rows_up):
    place = toward(0, rows_up * 180 / 64)
    assert not separate_sun(sun_skies.clear_noon(height, place))[1].clipped


@pytest.mark.long
@pytest.mark.parametrize("height", [1024, 2048])
def test_a_whole_sun_in_haze_is_not_called_clipped_where_pixels_resolve_its_disc(height):
    assert not separate_sun(sun_skies.hazy_evening(height))[1].clipped


@pytest.mark.parametrize("height", [64, 128, 1024])
def test_resolution_changes_neither_place_nor_power(height):
    _, sun = separate_sun(sun_skies.clear_noon(height))
    assert angle(sun.direction, NOON) < 0.5 * 180 / height  # a pixel doesn't tell where in it the sun is
    # Pixels of 2.8 degrees hold some of the aureole too.
    assert sun.irradiance[0] == pytest.approx(np.pi * np.sin(SUN_RADIUS) ** 2 * 2e5, rel=0.05)


def test_a_lost_suns_light_comes_back_in_its_own_colour_and_narrows_the_light(separated):
    sun = separated["clipped_noon"][2]
    more = restored_sun(sun, 1000.0)
    assert (more.irradiance - sun.irradiance) @ LUMINANCE_WEIGHTS == pytest.approx(1000)
    np.testing.assert_allclose(more.irradiance / sun.irradiance, more.irradiance[0] / sun.irradiance[0])
    assert SUN_RADIUS < more.angular_radius < 1.01 * SUN_RADIUS < sun.angular_radius


def test_a_lost_suns_light_comes_back_into_the_sky_from_the_suns_own_disc(separated):
    source, _, sun = separated["clipped_noon"]
    restored = with_restored_sun(source, sun, 1000.0)
    more = irradiance_facing(restored, sun.direction) - irradiance_facing(source, sun.direction)
    np.testing.assert_allclose(more, (restored_sun(sun, 1000.0).irradiance - sun.irradiance), rtol=1e-3)
    rows, columns = np.nonzero((restored != source).any(-1))
    d = panorama_directions(1024, 512)[rows, columns]
    assert np.degrees(np.arccos(d @ sun.direction)).max() < np.degrees(SUN_RADIUS) + 0.3


@pytest.mark.parametrize("place", [toward(0, 90), toward(180, 30), toward(37, 89.8)])
def test_seam_and_pole_are_no_places_apart(place):
    sky = with_disc(np.full((256, 512, 3), 0.5, np.float32), place, np.array([9e4, 9e4, 9e4]))
    rest, sun = separate_sun(sky)
    assert angle(sun.direction, place) < 0.5 * 180 / 256
    np.testing.assert_allclose(rest, 0.5, rtol=1e-6)


def test_scaling_the_sky_scales_the_sun_alone():
    sky = sun_skies.clear_noon(128)
    _, sun = separate_sun(sky)
    _, bright = separate_sun(sky * np.float32(1024))
    np.testing.assert_allclose(bright.irradiance, sun.irradiance * 1024, rtol=1e-12)
    np.testing.assert_array_equal(bright.direction, sun.direction)
    assert bright.contrast_ev == sun.contrast_ev


def test_a_wide_lamp_is_no_sun():
    room = np.full((256, 512, 3), 0.5, np.float32)
    colour = np.array([2000.0, 2000, 2000])
    lamp = sun_skies.glow(NOON, 4000, 1.0, 256) + with_disc(room, NOON, colour, np.radians(1.2))
    assert separate_sun(lamp.astype(np.float32))[1] is None


def test_black_and_constant_skies_have_no_sun():
    for value in (0.0, 1.0):
        assert separate_sun(np.full((32, 64, 3), value, np.float32))[1] is None


def test_contrast_is_the_stops_down_to_the_surroundings():
    sky = np.ones((256, 512), np.float32)
    sky[60, 100] = 1024
    (region,) = compact_regions(sky, 1)
    assert region.contrast_ev == pytest.approx(10, abs=0.25)
    assert (region.rows[0], region.columns[0]) == (60, 100)
    assert len(region.rows) == 9  # and those that touch it


def test_the_rim_goes_around_the_seam_and_over_the_pole():
    rows, columns = rim_of(np.array([0]), np.array([0]), 8, 16)
    assert set(zip(rows.tolist(), columns.tolist(), strict=True)) == {
        (0, 1), (0, 15), (1, 0), (1, 1), (1, 15), (0, 7), (0, 8), (0, 9)
    }  # fmt: skip


def test_a_filled_gradient_is_continued():
    columns, rows = (grid.ravel() for grid in np.meshgrid(np.arange(100, 106), np.arange(60, 66)))
    sky = np.empty((128, 256, 3), np.float32)
    sky[:] = np.arange(256)[:, None]
    fill = filled_from_rim(sky, rows, columns)
    np.testing.assert_allclose(fill[:, 0], columns, atol=0.6)


# Where making the samples puts the sun: azimuth and elevation in degrees; None where it has none.
SAMPLES = {
    "ferry_noon.exr": (150, 58),
    "low_sun_evening.exr": (-44, 5.5),
    "night_quay.exr": None,
    "overcast_quay.hdr": None,
}


@pytest.mark.parametrize("name", SAMPLES)
def test_the_samples_suns_are_where_they_were_drawn(name):
    pixels = read_source(Path(__file__).parents[2] / "sample_assets" / name).pixels
    _, sun = separate_sun(pixels)
    if SAMPLES[name] is None:
        assert sun is None
    else:
        assert angle(sun.direction, toward(*SAMPLES[name])) < 0.1
        assert not sun.clipped
