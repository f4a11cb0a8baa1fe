"""The samples hold what they promise: light levels, the sun's flux, the script's own pixels."""

import sys
from pathlib import Path

import numpy as np
import OpenEXR
import pytest

from skykiln.config import load_pipeline
from skykiln.formats.source_files import read_source
from skykiln.light.directions import panorama_directions, panorama_row_solid_angles
from skykiln.light.photometry import LUMINANCE_WEIGHTS

ROOT = Path(__file__).parents[1]
ASSETS = ROOT / "sample_assets"
SUN_RADIUS = np.radians(0.2665)


@pytest.fixture(scope="module")
def script():
    """The generating script as a module."""
    sys.path.insert(0, str(ASSETS))
    try:
        import make_samples
    finally:
        sys.path.remove(str(ASSETS))
    return make_samples


def pixels_of(name):
    return read_source(ASSETS / name).pixels


def illuminance(picture, towards):
    """Illuminance of (H, W, 3) on a surface that faces `towards`, by pixel centres."""
    height, width = picture.shape[:2]
    cosine = np.maximum(panorama_directions(width, height) @ towards, 0)
    weights = cosine * panorama_row_solid_angles(width, height)[:, None]
    return float((weights * (picture @ LUMINANCE_WEIGHTS)).sum())


def files():
    return sorted(path for path in ASSETS.rglob("*") if path.suffix in (".exr", ".hdr"))


def test_all_samples_together_stay_small():
    assert sum(path.stat().st_size for path in files()) < 12_000_000


def test_half_float_and_radiance_files_all_occur():
    kinds = set()
    for path in files():
        if path.suffix == ".hdr":
            kinds.add("radiance")
            assert path.read_bytes().startswith(b"#?RADIANCE\n")
        else:
            channels = OpenEXR.File(str(path), separate_channels=True).channels()
            kinds.add(channels["R"].pixels.dtype.name)
    assert kinds == {"radiance", "float16", "float32"}


def test_the_pipeline_bakes_every_sample_with_two_recipes():
    probes = load_pipeline(ROOT / "pipeline.yaml").probes()
    assert {ROOT / probe.file for probe in probes} == set(files())
    assert {probe.recipe for probe in probes} == {"landmark", "interior"}
    assert sum(probe.name.startswith("concourse/") for probe in probes) >= 12


def test_skies_and_interiors_have_their_sizes_and_are_light():
    for path in files():
        picture = read_source(path).pixels
        assert picture.shape == ((128, 256, 3) if path.parent.name == "concourse" else (512, 1024, 3))
        assert np.isfinite(picture).all()
        assert picture.min() >= 0


def sun_part(picture, towards):
    """The disc's own part of the pixels about the sun: what they hold beyond their surroundings."""
    near = panorama_directions(1024, 512) @ towards > np.cos(np.radians(1.5))
    sky = np.median(picture[near], axis=0)
    return np.where(near[..., None], np.maximum(picture - 1.5 * sky, 0), 0)


@pytest.mark.parametrize(
    ("name", "day", "unit"), [("ferry_noon", "NOON", 4000), ("low_sun_evening", "EVENING", 8000)]
)
def test_sun_lights_a_facing_surface_as_a_disc_of_its_luminance(script, name, day, unit):
    # Disc of radiance L: pi L sin^2 r (Lambert; Nusselt's analogue).
    day = getattr(script, day)
    sun = sun_part(pixels_of(f"{name}.exr"), day["sun"])
    expected = np.pi * day["sun_luminance"] / unit * np.sin(SUN_RADIUS) ** 2
    assert illuminance(sun, day["sun"]) == pytest.approx(expected, rel=1e-3)


def test_sun_stands_where_it_was_put_and_no_pixel_exceeds_it(script):
    sun = sun_part(pixels_of("ferry_noon.exr"), script.NOON["sun"]) @ LUMINANCE_WEIGHTS
    weights = sun * panorama_row_solid_angles(1024, 512)[:, None]
    mean = (panorama_directions(1024, 512) * weights[..., None]).sum(axis=(0, 1))
    off = np.linalg.norm(mean / np.linalg.norm(mean) - script.NOON["sun"])
    assert off < 0.05 * 2 * np.pi / 1024
    assert sun.max() <= script.NOON["sun_luminance"] / 4000 * 1.001


def test_noon_is_beyond_half_floats_once_it_is_scaled_to_its_measurement():
    (probe,) = (p for p in load_pipeline(ROOT / "pipeline.yaml").probes() if p.name == "ferry_noon")
    picture = pixels_of("ferry_noon.exr")
    computed = illuminance(picture, np.array([0, 1.0, 0]))
    assert picture.max() * probe.horizontal_lux / computed > 65504
    # The script's own light is plausible too: within a tenth of the measurement it is scaled to.
    assert 4000 * computed == pytest.approx(probe.horizontal_lux, rel=0.1)


def test_overcast_sky_has_the_moon_spencer_illuminance(script):
    # 7 pi / 9 times the zenith's luminance (Moon and Spencer 1942).
    d = panorama_directions(512, 256)
    sky = script.skies.overcast_sky(d.reshape(-1, 3), 1.0).reshape(d.shape)
    assert illuminance(sky, np.array([0, 1.0, 0])) == pytest.approx(7 * np.pi / 9, rel=1e-4)


def test_overcast_file_follows_the_law_above_the_roofs():
    # Shared-exponent mantissas of 8 bits: half a step is at most 1/256 of a value.
    picture = pixels_of("overcast_quay.hdr") @ LUMINANCE_WEIGHTS
    sines = panorama_directions(1024, 512)[..., 1]
    high = sines > np.sin(np.radians(40))
    np.testing.assert_allclose(picture[high], (1 + 2 * sines[high]) / 3, rtol=1 / 256)


@pytest.mark.parametrize(
    ("zenith_angle", "azimuth", "ratio"),
    # CIE S 011/E:2003, type 12, sun 60 degrees from the zenith; computed from coefficients that agree with
    # two public listings of the standard.
    [(30, 0, 2.5793698790161783), (60, 180, 1.2355670243426933)],
)
def test_clear_sky_has_the_cie_luminance(script, zenith_angle, azimuth, ratio):
    d = script.direction(azimuth, 90 - zenith_angle)[None]
    got = script.skies.cie_general_sky(d, script.direction(0, 30), script.skies.CLEAR)
    assert got[0] == pytest.approx(ratio, rel=1e-9)


def test_night_holds_many_small_lamps_of_different_colours():
    picture = pixels_of("night_quay.exr")
    bright = picture.max(axis=-1) > 200 * np.median(picture)
    assert 20 < bright.sum() < 2000
    red, green, blue = (picture[bright] / picture[bright].max(axis=-1, keepdims=True)).T
    assert ((red == 1) & (blue < 0.3)).any()
    assert ((green == 1) & (red < 0.3)).any()
    assert (blue == 1).any()


def test_the_script_makes_the_pixels_that_are_kept(script):
    make, pixel_type = script.SAMPLES["concourse/cafe_02.exr"]
    assert pixel_type == "half"
    made, kept = make().astype(np.float16), pixels_of("concourse/cafe_02.exr")
    # Another CPU's sines may round a value, or one of the 9 points at an edge, to the other side.
    same = np.isclose(made.astype(np.float32), kept, rtol=2e-3, atol=1e-6).all(axis=-1)
    assert same.mean() > 0.999


def test_shared_exponents_and_runs_read_back_within_their_step(script, tmp_path):
    row = [[0.0, 0.0, 0.0]] * 9 + [[1.0, 0.5, 1e-3]] * 300
    script.write_radiance_hdr(tmp_path / "a.hdr", np.array([row]))
    picture = read_source(tmp_path / "a.hdr").pixels
    np.testing.assert_allclose(picture[0, -1], [1, 0.5, 1e-3], atol=0.5 / 128)
    assert picture[0, 0].max() == 0
