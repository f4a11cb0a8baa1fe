"""From files of every kind to probe.json: layouts, colour, calibration, the sun, and what is told of them."""

import json
import re

import numpy as np
import pytest
import sun_skies
from layout_pictures import GROUND, PROJECTIONS, marked_sky_over_ground, photographed
from panorama_reference import spread_directions

from skykiln.formats.ktx2 import read_ktx2
from skykiln.light.facing import irradiance_facing
from skykiln.light.layouts import LAYOUTS
from skykiln.light.photometry import LUMINANCE_WEIGHTS, horizontal_illuminance
from tiny_pipeline import TinyPipeline, sky_pixels, write_sky

REC2020 = (0.708, 0.292, 0.170, 0.797, 0.131, 0.046, 0.3127, 0.3290)


@pytest.fixture
def pipeline(tmp_path):
    return TinyPipeline(tmp_path, probes=["sky"])


def baked(pipeline, pixels=None, name="sky", header=None, **settings):
    """The record of a probe whose entry says `settings`."""
    if pixels is not None:
        write_sky(pipeline.folder / f"{name}.exr", pixels=pixels, **(header or {}))
    pipeline.settings["sources"][name] |= settings
    pipeline.bake()
    assert pipeline.night.failures == []
    return pipeline.probe_record(name)


def refused(pipeline, pixels=None, header=None, **settings):
    """Why the probe was not baked."""
    if pixels is not None:
        write_sky(pipeline.folder / "sky.exr", pixels=pixels, **(header or {}))
    pipeline.settings["sources"]["sky"] |= settings
    pipeline.bake()
    ((_, failure),) = pipeline.night.failures
    assert failure.traceback == ""
    return failure.cause


def work(pipeline, file, name="sky"):
    return np.load(pipeline.build / "work" / name / file)


def picture_of(layout, edge=48):
    projection, (width, height) = PROJECTIONS[layout]
    return photographed(marked_sky_over_ground, projection, width * edge, height * edge)


@pytest.fixture(scope="module")
def expected(tmp_path_factory):
    """Faces of the sky of all layouts."""
    pipeline = TinyPipeline(tmp_path_factory.mktemp("equirect"), probes=["sky"])
    baked(pipeline, photographed(marked_sky_over_ground, PROJECTIONS["equirect"][0], 512, 256))
    return work(pipeline, "faces.npy")


@pytest.mark.parametrize("layout", LAYOUTS)
def test_every_layout_gives_the_same_probe(pipeline, layout, expected):
    settings = {"layout": layout} | ({"ground": list(GROUND)} if LAYOUTS[layout].upper else {})
    record = baked(pipeline, picture_of(layout), **settings)
    assert record["source"]["layout"] == layout
    found = np.abs(work(pipeline, "faces.npy") - expected) / np.maximum(expected, expected.mean())
    assert found.mean() < 0.01
    assert found.max() < 0.15 if layout != "mirror_ball" else np.median(found) < 0.01


def test_six_files_give_the_same_probe_and_pin_them_all(pipeline, expected):
    faces = picture_of("cube").reshape(6, 48, 48, 3)
    names = dict(zip(("+x", "-x", "+y", "-y", "+z", "-z"), "abcdef", strict=True))
    for face, name in zip(faces, names.values(), strict=True):
        write_sky(pipeline.folder / f"{name}.exr", pixels=face)
    files = {axis: f"{name}.exr" for axis, name in names.items()}
    pipeline.settings["sources"]["sky"] = {"faces": files, "recipe": "tiny"}
    record = baked(pipeline)
    assert (record["source"]["layout"], record["source"]["face_axes"]) == ("faces", "openexr")
    assert record["source"]["faces"] == list(files.values())
    found = np.abs(work(pipeline, "faces.npy") - expected) / np.maximum(expected, expected.mean())
    assert (found.mean() < 0.01, found.max() < 0.15) == (True, True)
    write_sky(pipeline.folder / "f.exr", pixels=faces[5] * np.float32(2))
    assert "panorama of sky" in pipeline.bake()
    write_sky(pipeline.folder / "f.exr", pixels=faces[5][:40, :40])
    assert "f.exr: 40 x 40; six faces must be squares of one size" in refused(pipeline)


def test_orientation_is_told_and_a_cube_that_stands_on_z_is_stood_up(pipeline, expected):
    turn = np.array([[-1.0, 0, 0], [0, 0, 1], [0, -1, 0]])  # flipped, then z up
    picture = photographed(lambda d: marked_sky_over_ground(d @ turn.T), PROJECTIONS["cube"][0], 48, 288)
    record = baked(pipeline, picture, layout="cube", flip=True, up="z")
    found = np.abs(work(pipeline, "faces.npy") - expected) / np.maximum(expected, expected.mean())
    assert found.mean() < 0.01
    told = {key: record["source"][key] for key in ("flip", "up", "yaw_deg", "pitch_deg", "roll_deg")}
    assert told == {"flip": True, "up": "z", "yaw_deg": 0, "pitch_deg": 0, "roll_deg": 0}


def test_square_pictures_and_skies_without_ground_are_told_with_the_choices(pipeline):
    cause = refused(pipeline, sky_pixels(0)[:, :8])
    assert cause.endswith("sky.exr: 8 x 8 may be angular, mirror_ball, fisheye; say which with layout:")
    assert refused(pipeline, np.ones((4, 16, 3), np.float32)).endswith("shows the sky alone; set ground:")
    assert "can't be of layout cross_vertical" in refused(pipeline, layout="cross_vertical")


def test_pixels_that_a_window_leaves_open_need_a_ground(pipeline):
    header = {"dataWindow": ((0, 0), (15, 5)), "displayWindow": ((0, 0), (15, 7))}
    sky = sky_pixels(0)[:6]
    assert "32 of its pixels are not covered; set ground:" in refused(pipeline, sky, header)
    record = baked(pipeline, ground=0.25)
    assert record["source"]["uncovered"] == 32
    np.testing.assert_array_equal(work(pipeline, "panorama.npy")[6:], 0.25)
    np.testing.assert_array_equal(work(pipeline, "panorama.npy")[:6], sky)


def test_colours_of_the_file_reach_the_working_primaries_and_the_textures(pipeline):
    pipeline.recipe["colour"] = {"working": "acescg"}
    record = baked(pipeline, np.ones((8, 16, 3), np.float32), header={"chromaticities": REC2020})
    np.testing.assert_allclose(work(pipeline, "panorama.npy"), 1, rtol=1e-5)  # white stays white
    assert record["primaries"] == "acescg"
    assert (record["source"]["colour"]["assumed"], record["source"]["out_of_gamut"]["pixels"]) == (False, 0)
    data = (pipeline.build / "probes/sky/specular.rgba16f.ktx2").read_bytes()
    assert read_ktx2(data, "sky").primaries == "acescg"


def test_colours_outside_the_working_primaries_are_counted_and_clipped(pipeline):
    pixels = np.ones((8, 16, 3), np.float32)
    pixels[3, 4] = [0, 1, 0]  # Rec. 2020's green
    record = baked(pipeline, pixels, header={"chromaticities": REC2020})
    assert record["source"]["out_of_gamut"]["pixels"] == 1
    assert -0.6 < record["source"]["out_of_gamut"]["deepest"] < -0.3
    assert work(pipeline, "panorama.npy").min() == 0


def test_a_recipe_says_what_silent_files_hold(pipeline):
    pixels = np.ones((8, 16, 3), np.float32)
    pixels[3, 4] = [0, 1, 0]
    pipeline.recipe["colour"] = {"assume": "rec2020"}
    record = baked(pipeline, pixels)
    assert (record["source"]["colour"]["assumed"], record["source"]["out_of_gamut"]["pixels"]) == (True, 1)


def test_repairs_are_mapped_by_row_column_and_kind(pipeline):
    pixels = sky_pixels(0)
    pixels[2, 3, 0], pixels[4, 4], pixels[5, 1, 2] = np.nan, np.inf, -1
    assert baked(pipeline, pixels)["source"]["repaired"] == {"nan": 1, "inf": 1, "negative": 1}
    np.testing.assert_array_equal(work(pipeline, "repairs.npy"), [[2, 3, 1], [4, 4, 2], [5, 1, 3]])


def test_a_calibrated_file_needs_no_measurement_and_a_cautious_word_goes_with_it(pipeline):
    record = baked(pipeline, sky_pixels(0), header={"whiteLuminance": 250.0})
    assert (record["units"], record["source"]["calibrated_by"]) == ("cd/m2", ["white_luminance"])
    np.testing.assert_allclose(work(pipeline, "panorama.npy"), 250 * sky_pixels(0), rtol=1e-6)
    assert "Never look at the sun" in record["caution"]
    assert baked(pipeline, sky_pixels(0))["caution"] is None


def test_contradicting_measurements_are_told_with_both_numbers(pipeline):
    sky = sun_skies.clear_noon(128)
    cause = refused(pipeline, sky, horizontal_lux=98000, sun_lux=30000)
    assert "sky.exr: sun_lux 30000 and horizontal_lux 98000 contradict each other" in cause


def test_a_patch_is_looked_up_in_the_turned_world(pipeline):
    sky = np.ones((64, 128, 3), np.float32)
    sky[24:40, 56:72] = 3  # straight ahead, +z; a yaw of 90 degrees takes it to +x
    patch = {"direction": [2, 0, 0], "size_deg": 10, "cd_m2": 600}
    record = baked(pipeline, sky, yaw_deg=90, patch=patch)
    assert record["source"]["scale"] == pytest.approx(200)


def test_a_limit_of_luminance_tells_what_it_took(pipeline):
    sky = np.ones((8, 16, 3), np.float32)
    sky[1, 5] = 1001
    record = baked(pipeline, sky, max_luminance=1)
    lost = horizontal_illuminance(sky) - np.pi
    assert record["energy"]["limited"]["lost_illuminance"] == pytest.approx(lost, rel=1e-4)
    assert record["energy"]["horizontal_illuminance"] == pytest.approx(np.pi, rel=1e-4)


def separating(pipeline):
    pipeline.recipe["sun"] = {"action": "separate"}
    return pipeline


def test_sky_and_sun_are_the_source_in_every_direction(pipeline):
    source = sun_skies.clear_noon(256)
    record = baked(separating(pipeline), source, yaw_deg=40)
    sky, sun = work(pipeline, "sky.npy"), record["sun"]
    turn = np.radians(40)
    yaw = np.array([[np.cos(turn), 0, np.sin(turn)], [0, 1, 0], [-np.sin(turn), 0, np.cos(turn)]])
    toward = np.array(sun["direction"]) @ yaw  # back into the source
    assert np.degrees(np.arccos(toward @ sun_skies.NOON)) < 0.2
    assert sun["angular_radius_deg"] == pytest.approx(0.27, abs=0.15)
    facing = float(irradiance_facing(source, toward) @ LUMINANCE_WEIGHTS)
    for normal in spread_directions(60):
        together = irradiance_facing(sky, normal) + max(0.0, normal @ toward) * np.array(sun["irradiance"])
        lost = (irradiance_facing(source, normal) - together) @ LUMINANCE_WEIGHTS
        assert abs(lost) < 1e-3 * facing
    assert record["energy"]["horizontal_illuminance"] == pytest.approx(horizontal_illuminance(sky), rel=1e-4)
    assert (sun["clipped"], record["source"]["restored_lux"]) == (False, 0)


@pytest.mark.parametrize("action", ["separate", "keep"])
def test_a_clipped_sun_gets_back_what_meters_say_it_lost(pipeline, action):
    true, clipped = sun_skies.clear_noon(256), sun_skies.clipped_noon(256)
    facing = 3000 * float(irradiance_facing(true, sun_skies.NOON) @ LUMINANCE_WEIGHTS)
    level = 3000 * horizontal_illuminance(true)
    pipeline.recipe["sun"] = {"action": action}
    record = baked(pipeline, clipped, horizontal_lux=level, sun_lux=facing)
    sun = record["sun"]
    beam = sun["illuminance"] * sun["direction"][1] if sun else 0
    assert record["energy"]["horizontal_illuminance"] + beam == pytest.approx(level, rel=2e-3)
    assert 0.5 * facing < record["source"]["restored_lux"] < facing
    assert (sun is not None) == (action == "separate")
    assert sun is None or sun["clipped"]


def test_two_meters_under_a_clipped_high_sun_are_told_to_be_worth_little(pipeline):
    true, clipped = sun_skies.clear_noon(256), sun_skies.clipped_noon(256)
    facing = 3000 * float(irradiance_facing(true, sun_skies.NOON) @ LUMINANCE_WEIGHTS)
    meters = {"horizontal_lux": 3000 * horizontal_illuminance(true), "sun_lux": facing}
    record = baked(pipeline, clipped, **meters)
    (told,) = record["source"]["warnings"]
    words = r"the sun is clipped: 1 % of horizontal_lux moves the scale by (\S+) %, of sun_lux by (\S+) %; "
    shares = [float(share) for share in re.fullmatch(words + "measure a patch", told).groups()]
    assert pipeline.night_record()["probes"][0]["light"]["warnings"] == [told]
    moved = baked(pipeline, **{**meters, "horizontal_lux": meters["horizontal_lux"] * 1.001})
    found = 1000 * (moved["source"]["scale"] / record["source"]["scale"] - 1)
    assert shares == pytest.approx([found, found - 1], abs=0.1)
    patch = {"direction": [0, 0, -1], "size_deg": 12, "cd_m2": 0.9 * 3000}
    assert baked(pipeline, patch=patch)["source"]["warnings"] == []


@pytest.mark.parametrize("meter", ["horizontal_lux", "sun_lux"])
def test_one_meter_alone_under_a_clipped_sun_is_told_to_make_the_sky_too_bright(pipeline, meter):
    record = baked(separating(pipeline), sun_skies.clipped_noon(256), **{meter: 5e4})
    told = f"the sun is clipped: {meter} alone gives its lost light to the whole sky; measure a patch"
    assert record["source"]["warnings"] == [told]
    patch = {"direction": [0, 0, -1], "size_deg": 12, "cd_m2": 2000}
    assert baked(pipeline, patch=patch)["source"]["warnings"] == []


def test_a_sky_without_a_sun_keeps_all_its_light(pipeline):
    source = sun_skies.overcast()[::4, ::4]
    record = baked(separating(pipeline), np.ascontiguousarray(source))
    assert record["sun"] is None
    np.testing.assert_array_equal(work(pipeline, "sky.npy"), work(pipeline, "panorama.npy"))


def test_going_from_keep_to_separate_decodes_nothing_anew(pipeline):
    baked(pipeline, sun_skies.clear_noon(64))
    ran = separating(pipeline).bake()
    assert ran[0] == "sky without its sun of sky"
    assert "panorama of sky" not in ran


def test_the_largest_picture_is_a_limit_of_the_pipeline_file(pipeline):
    pipeline.settings["limits"] = {"max_pixels": 100}
    assert "16 x 8 is more than the limit of 100 pixels" in refused(pipeline)
    pipeline.settings["limits"] = {"max_pixels": 128}
    assert baked(pipeline)["source"]["width"] == 16


def test_settings_of_the_intake_rerun_decoding_and_say_so(pipeline):
    baked(pipeline)
    for change, told in (
        ({"flip": True}, "flip was false, is true"),
        ({"pitch_deg": 3.0}, "pitch_deg was 0, is 3"),
        ({"ground": "mirror"}, "ground"),
    ):
        pipeline.settings["sources"]["sky"] |= change
        assert told in pipeline.plan()["panorama of sky"][1]
        pipeline.bake()
    record = json.loads((pipeline.build / "work/sky/source.json").read_bytes())
    assert record["warnings"] == ["ground: the picture covers the whole sphere"]
