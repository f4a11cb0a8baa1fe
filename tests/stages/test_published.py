"""What a bake leaves: files as the schemas say, numbers as the sky says."""

import json
from importlib.resources import files

import jsonschema
import numpy as np
import pytest

from skykiln.engine.digests import digest_chunks
from skykiln.formats.ktx2 import read_ktx2
from skykiln.light.cube_axes import from_cube_space
from skykiln.light.directions import cube_directions
from skykiln.light.harmonics import irradiance_from_coefficients
from skykiln.light.sheen import sheen_albedo
from skykiln.stages.extract_faces import auto_face_size
from tiny_pipeline import TinyPipeline, published, sky_pixels, write_sky


@pytest.fixture
def pipeline(tmp_path):
    return TinyPipeline(tmp_path, probes=["ferry_noon"])


def _check_schema(name, record):
    schema = json.loads(files("skykiln.schemas").joinpath(f"{name}.schema.json").read_text())
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.validate(record, schema)


def _texture(pipeline, name):
    path = pipeline.build / "probes/ferry_noon" / name
    return read_ktx2(path.read_bytes(), str(path))


def test_manifests_follow_their_schemas(pipeline):
    pipeline.bake()
    _check_schema("probe", pipeline.probe_record("ferry_noon"))
    _check_schema("night", pipeline.night_record())
    _check_schema("brdf", json.loads((pipeline.build / "brdf/brdf.json").read_bytes()))


def test_night_with_a_failure_follows_its_schema(pipeline):
    (pipeline.folder / "ferry_noon.exr").unlink()
    pipeline.bake()
    _check_schema("night", pipeline.night_record())


def test_probe_json_s_digests_and_sizes_are_those_of_the_files(pipeline):
    pipeline.bake()
    record = pipeline.probe_record("ferry_noon")
    entries = record["specular"]["files"] + record["irradiance"]["files"]
    assert [entry["file"] for entry in entries] == ["specular.rgba16f.ktx2", "irradiance.rgba16f.ktx2"]
    for entry in entries:
        data = (pipeline.build / "probes/ferry_noon" / entry["file"]).read_bytes()
        assert (entry["bytes"], entry["digest"]) == (len(data), digest_chunks([data]))
    source = (pipeline.folder / "ferry_noon.exr").read_bytes()
    assert record["source"]["digest"] == digest_chunks([source])


def test_packed_texels_times_two_to_the_storage_ev_are_the_baked_radiance(pipeline):
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 20
    pipeline.bake()
    record = pipeline.probe_record("ferry_noon")
    assert record["storage_ev"] > 0
    faces = np.load(pipeline.build / "work/ferry_noon/faces.npy")
    texture = _texture(pipeline, "specular.rgba16f.ktx2")
    stored = from_cube_space(texture.levels[0], "negate_x")
    assert stored.max() <= 64512
    np.testing.assert_allclose(stored * 2.0 ** record["storage_ev"], faces, rtol=5e-4)
    assert json.loads(texture.metadata["skykiln"])["storage_ev"] == record["storage_ev"]
    assert record["energy"]["lost_to_clamping"] == 0


def test_constant_sky_stays_constant_at_every_level_and_gives_pi_times_itself(pipeline):
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=np.full((8, 16, 3), [1, 2, 4], np.float32))
    pipeline.bake()
    for level in _texture(pipeline, "specular.rgba16f.ktx2").levels:
        np.testing.assert_allclose(level, np.broadcast_to([1, 2, 4], level.shape), rtol=6e-3)
    (cube,) = _texture(pipeline, "irradiance.rgba16f.ktx2").levels
    np.testing.assert_allclose(cube, np.broadcast_to(np.pi * np.array([1, 2, 4]), cube.shape), rtol=6e-3)
    energy = pipeline.probe_record("ferry_noon")["energy"]
    np.testing.assert_allclose(energy["mean_radiance"], [1, 2, 4], rtol=1e-6)
    np.testing.assert_allclose(energy["level_irradiance"], np.pi * np.array([1, 2, 4]), rtol=1e-6)


def test_measured_illuminance_is_met_and_makes_the_units_absolute(pipeline):
    pipeline.settings["sources"]["ferry_noon"]["horizontal_lux"] = 12_000
    pipeline.bake()
    record = pipeline.probe_record("ferry_noon")
    assert record["units"] == "cd/m2"
    assert record["energy"]["horizontal_illuminance"] == pytest.approx(12_000, rel=1e-5)


def test_exposure_of_one_stop_doubles_the_light(pipeline):
    pipeline.bake()
    before = pipeline.probe_record("ferry_noon")["energy"]["mean_radiance"]
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 1
    pipeline.bake()
    after = pipeline.probe_record("ferry_noon")
    np.testing.assert_allclose(after["energy"]["mean_radiance"], 2 * np.array(before), rtol=1e-6)
    assert after["source"]["scale"] == 2


def test_yaw_turns_faces_irradiance_and_harmonics_alike(pipeline):
    """A lamp at +z, turned by 90 degrees, stands at +x."""
    pixels = np.full((8, 16, 3), 0.1, np.float32)
    pixels[3:5, 7:9] = 50
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=pixels)
    pipeline.settings["sources"]["ferry_noon"]["yaw_deg"] = 90
    pipeline.bake()
    faces = np.load(pipeline.build / "work/ferry_noon/faces.npy")
    cube = np.load(pipeline.build / "work/ferry_noon/irradiance.npy")
    harmonics = np.array(pipeline.probe_record("ferry_noon")["irradiance"]["sh"])
    axes = np.array([[1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0], [0, 0, 1], [0, 0, -1]])
    for brightness in (faces, cube, irradiance_from_coefficients(harmonics, axes)[:, None]):
        assert brightness.reshape(6, -1).max(axis=1).argmax() == 0


def test_pack_with_other_axes_holds_the_same_light_for_the_same_world_direction(pipeline):
    pack = {"container": "ktx2", "pixels": "rgba16f"}
    others = [{**pack, "name": axes, "cube_axes": axes} for axes in ("direct", "negate_z")]
    pipeline.recipe["pack"] = [pack, *others]
    pipeline.bake()
    worlds = [
        from_cube_space(_texture(pipeline, f"specular.{name}.ktx2").levels[0], axes)
        for name, axes in (("rgba16f", "negate_x"), ("direct", "direct"), ("negate_z", "negate_z"))
    ]
    assert all(np.array_equal(world, worlds[0]) for world in worlds)
    files = pipeline.probe_record("ferry_noon")["irradiance"]["files"]
    assert {entry["file"]: entry["cube_axes"] for entry in files} == {
        "irradiance.rgba16f.ktx2": "negate_x",
        "irradiance.direct.ktx2": "direct",
        "irradiance.negate_z.ktx2": "negate_z",
    }


def test_auto_face_size_is_the_largest_power_of_two_up_to_a_quarter_of_the_width():
    sizes = {1024: 256, 1023: 128, 4096: 1024, 2000: 256, 16: 4, 8: 2, 4: 1, 2: 1}
    assert {width: auto_face_size(width) for width in sizes} == sizes


def test_auto_face_size_is_that_of_the_panorama(pipeline):
    pipeline.recipe["face_size"] = "auto"
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=sky_pixels(3, height=32))
    pipeline.bake()
    sizes = [level["face_size"] for level in pipeline.probe_record("ferry_noon")["specular"]["levels"]]
    assert sizes == [16, 8, 4]


def test_probes_of_a_glob_lie_in_folders_of_their_names(pipeline):
    folder = pipeline.folder / "captures" / "upper deck"
    folder.mkdir(parents=True)
    write_sky(folder / "stair 02.exr", seed=4)
    write_sky(pipeline.folder / "captures" / "hall.exr", seed=5)
    pipeline.settings["sources"]["concourse"] = {"files": "captures/**/*.exr", "recipe": "tiny"}
    pipeline.bake()
    assert pipeline.night.failures == []
    assert "probes/concourse/upper deck/stair 02/probe.json" in published(pipeline.build)
    assert "probes/concourse/hall/probe.json" in published(pipeline.build)


def test_level_directions_of_a_linear_sky_keep_their_sign(pipeline):
    """1 + 0.8 x, y, z in the three channels: no flip, no exchange of axes on the way to the file."""
    from skykiln.light.directions import panorama_directions

    sky = (1 + 0.8 * panorama_directions(32, 16)).astype(np.float32)
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=sky)
    pipeline.bake()
    world = from_cube_space(_texture(pipeline, "specular.rgba16f.ktx2").levels[0], "negate_x")
    np.testing.assert_allclose(world, 1 + 0.8 * cube_directions(8), atol=0.05)


def test_sheen_table_is_the_albedo_at_texel_centres(pipeline):
    pipeline.bake()
    record = json.loads((pipeline.build / "brdf/brdf.json").read_bytes())["sheen"]
    data = (pipeline.build / "brdf" / record["file"]).read_bytes()
    assert (record["bytes"], record["digest"]) == (len(data), digest_chunks([data]))
    (table,) = read_ktx2(data, record["file"]).levels
    np.testing.assert_allclose(table[0, :, :, 0], sheen_albedo(4), rtol=2.0**-11, atol=2.0**-25)
