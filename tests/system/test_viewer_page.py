"""The viewer in a browser: what it draws from packed bytes is what the CPU computes from the same file.

Needs Debian's chromium; the page's values are read back from the target that the pointer reads too.
"""

import base64
import io
import json
import math
import re

import numpy as np
import pytest
from chromium import Chromium
from PIL import Image

from skykiln.cli import main
from skykiln.formats.texture_files import read_texture
from skykiln.light.cube_axes import CUBE_AXES, from_cube_space
from skykiln.light.photometry import luminance
from skykiln.light.quay_scene import FIELD_OF_VIEW, first_hits, scene_eye, view_rays
from skykiln.light.sample_cube import sample_cube
from skykiln.light.split_sum import ProbeLight, lit_by_probe
from skykiln.report.false_colour import false_colours
from skykiln.report.pictures import tone_mapped
from tiny_pipeline import TinyPipeline, write_sky

CODINGS = ("rgba16f", "rgb9e5", "r11g11b10f", "bc6h")
# One file per coding, and each cube_axes for one of them.
PACKS = {**{pixels: (pixels, "negate_x") for pixels in CODINGS},
         **{f"rgba16f_{axes}": ("rgba16f", axes) for axes in CUBE_AXES}}  # fmt: skip
ROUGHNESS = [0, 0.2, 0.5, 0.6, 1]
WIDTH, HEIGHT = 320, 200  # of the picture, in a page of 352 pixels
SKY_FIELD_OF_VIEW = math.radians(75)
# Where a cube's corner has no fourth texel, drivers store the mean of three in the texture's own coding.
CORNER_ERRORS = {"rgba16f": 5e-4, "bc6h": 5e-4, "rgb9e5": 2e-3, "r11g11b10f": 1e-2}


@pytest.fixture(scope="module")
def probe(tmp_path_factory):
    """A small sky baked by the product, with a storage_ev."""
    pipeline = TinyPipeline(tmp_path_factory.mktemp("probe"), probes=["ferry_noon"])
    y, x = np.mgrid[0:32, 0:64] / 32.0
    sky = np.exp(np.sin(np.pi * x)[..., None] * [0.5, 0.3, -0.4] + np.cos(3 * y)[..., None] * [0.2, 0.6, 0.9])
    sky *= 1 + 0.5 * np.random.default_rng(1).random((32, 64, 1))
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=np.float32(1e5 * sky))
    pipeline.settings["brdf"] = {"size": 32}
    pipeline.recipe["face_size"] = 16
    pipeline.recipe["specular"] = {"levels": 5, "roughness": ROUGHNESS, "tolerance": 0.01}
    pipeline.recipe["pack"] = [
        {"container": "ktx2", "pixels": pixels, "cube_axes": axes, "name": name, "compress": 3}
        for name, (pixels, axes) in PACKS.items()
    ]
    pipeline.bake()
    return pipeline


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    with Chromium(tmp_path_factory.mktemp("profile")) as browser:
        yield browser


@pytest.fixture(scope="module")
def page_of(probe, tmp_path_factory):
    """The file that `skykiln report --view` writes for a pack."""
    folder = tmp_path_factory.mktemp("pages")

    def written(name):
        path = folder / f"{name}.html"
        pack = f"specular.{name}.ktx2"
        command = ["report", "-f", str(probe.file), "--view", "ferry_noon", "--pack", pack, "-o", str(path)]
        assert main(command) == 0
        return path

    return written


def world_faces(probe, file):
    """Levels of a packed file in the world and in true units."""
    texture = read_texture((probe.build / "probes/ferry_noon" / file).read_bytes(), file)
    about = json.loads(texture.metadata["skykiln"])
    scale = 2.0 ** about["storage_ev"]
    return tuple(scale * from_cube_space(level.astype(float), about["cube_axes"]) for level in texture.levels)


def open_page(browser, path):
    """Show the page so wide that its picture has WIDTH pixels, and wait until it is drawn."""
    browser.open(path, 352)
    wait_until_drawn(browser)


def wait_until_drawn(browser):
    browser.value("new Promise((drawn) => requestAnimationFrame(() => requestAnimationFrame(drawn)))")


def set_controls(browser, view="sky", **values):
    """Move sliders as a hand does, and wait until it is drawn."""
    browser.value(f"document.querySelector('input[value={view}]').click()")
    for key, value in values.items():
        browser.value(f"byId('{key}').value = {value}")
        browser.value(f"byId('{key}').dispatchEvent(new Event('input', {{bubbles: true}}))")
    wait_until_drawn(browser)


def radiance_read(browser):
    """(HEIGHT, WIDTH, 3) of the whole picture, top row first, and the scene's shapes + 1 (HEIGHT, WIDTH)."""
    words = browser.value(
        f"Array.from(new Uint32Array(page.picture.read(0, 0, {WIDTH}, {HEIGHT}).values.buffer))"
    )
    bits = np.array(words, np.uint32).reshape(HEIGHT, WIDTH, 4)[::-1]
    return np.ascontiguousarray(bits[..., :3]).view(np.float32), bits[..., 3]


def sky_rays(yaw_deg, pitch_deg):
    return view_rays(WIDTH, HEIGHT, math.radians(yaw_deg), math.radians(pitch_deg), SKY_FIELD_OF_VIEW)


def seen_sky(levels, yaw_deg, pitch_deg, level):
    rays = sky_rays(yaw_deg, pitch_deg).reshape(-1, 3)
    return sample_cube(levels, rays, level).reshape(HEIGHT, WIDTH, 3)


def beside_corner(rays, size):
    """Which directions lie within half a texel of two edges of a face of `size`."""
    off = np.sort(np.abs(rays), axis=-1)
    return off[..., 0] / off[..., 2] > 1 - 1 / size


def is_close(seen, expected, beside, corner_error):
    np.testing.assert_allclose(seen[~beside], expected[~beside], rtol=1e-5)
    np.testing.assert_allclose(seen[beside], expected[beside], rtol=corner_error)


@pytest.mark.parametrize("name", PACKS)
def test_sky_is_what_the_file_holds_in_every_direction_and_between_levels(browser, probe, page_of, name):
    open_page(browser, page_of(name))
    assert browser.value("byId('trouble').hidden"), browser.value("byId('trouble').textContent")
    assert browser.value("[byId('picture').width, byId('picture').height]") == [WIDTH, HEIGHT]
    levels = world_faces(probe, f"specular.{name}.ktx2")
    for yaw, pitch, level in ((0, 5, 0), (-130, 30, 0.35), (77, -60, 2.5), (180, 85, 4)):
        set_controls(browser, level=level, yaw=yaw, pitch=pitch)
        seen, shapes = radiance_read(browser)
        assert not shapes.any()
        beside = beside_corner(sky_rays(yaw, pitch), 16 >> math.ceil(level))
        is_close(seen, seen_sky(levels, yaw, pitch, level), beside, CORNER_ERRORS[PACKS[name][0]])


def scene_hits(yaw_deg, pitch_deg, shift=(0.0, 0.0)):
    """What the picture's rays meet first, moved by parts of a pixel; and the rays."""
    yaw, pitch = math.radians(yaw_deg), math.radians(pitch_deg)
    rays = view_rays(WIDTH, HEIGHT, yaw, pitch, FIELD_OF_VIEW)
    across, down = rays[:, 1:2] - rays[:, :1], rays[1:2] - rays[:1]
    rays = (rays + shift[0] * across + shift[1] * down).reshape(-1, 3)
    rays /= np.linalg.norm(rays, axis=1)[:, None]
    return first_hits(scene_eye(yaw, pitch), rays), rays


def on_an_edge(yaw_deg, pitch_deg):
    """Pixels where a hundredth of a pixel shows another side: there float32 may decide otherwise."""
    here, _ = scene_hits(yaw_deg, pitch_deg)
    edge = np.zeros(len(here.hit), bool)
    for shift in ((0.01, 0), (-0.01, 0), (0, 0.01), (0, -0.01)):
        there, _ = scene_hits(yaw_deg, pitch_deg, shift)
        turned = np.where(here.hit & there.hit, np.abs(there.n - here.n).max(1) > 0.1, False)
        edge |= (here.hit != there.hit) | turned | (here.f0 != there.f0).any(1)
    return edge


@pytest.mark.parametrize("name", ["rgb9e5", "bc6h", "rgba16f_direct", "rgba16f_negate_z"])
def test_scene_is_lit_by_the_packed_files_alone(browser, probe, page_of, name):
    open_page(browser, page_of(name))
    levels = world_faces(probe, f"specular.{name}.ktx2")
    beside = {
        entry["cube_axes"]: entry["file"] for entry in probe.probe_record("ferry_noon")["irradiance"]["files"]
    }
    (irradiance,) = world_faces(probe, beside[PACKS[name][1]])
    table = read_texture((probe.build / "brdf/brdf.rg16f.ktx2").read_bytes(), "table").levels[0][0]
    light = ProbeLight(levels, ROUGHNESS, irradiance, table)
    for yaw, pitch in ((0, -14), (130, -40)):
        set_controls(browser, "scene", level=1.5, yaw=yaw, pitch=pitch)
        seen, shapes = radiance_read(browser)
        found, rays = scene_hits(yaw, pitch)
        expected = sample_cube(levels, rays, 1.5)
        lit = lit_by_probe(light, found.n, -rays, found.albedo, found.f0, found.roughness)
        expected[found.hit] = lit[found.hit]
        inside = ~on_an_edge(yaw, pitch)
        assert inside.mean() > 0.995
        np.testing.assert_array_equal(shapes.ravel()[inside] > 0, found.hit[inside])
        np.testing.assert_allclose(seen.reshape(-1, 3)[inside], expected[inside], rtol=2e-3)


def picture_shown(browser):
    """The canvas as it is on the screen, (HEIGHT, WIDTH, 3)."""
    address = browser.value("(page.drawNow(), byId('picture').toDataURL('image/png'))")
    return np.asarray(Image.open(io.BytesIO(base64.b64decode(address.partition(",")[2]))).convert("RGB"))


def test_screen_shows_tone_mapped_radiance_or_false_colours_at_the_exposure(browser, probe, page_of):
    open_page(browser, page_of("rgba16f"))
    set_controls(browser, exposure=1.5, yaw=40)
    automatic = browser.value("page.facts.exposure")
    expected = seen_sky(world_faces(probe, "specular.rgba16f.ktx2"), 40, 5, 0)
    near = tone_mapped(expected, automatic * 2**1.5).astype(int)
    assert np.abs(picture_shown(browser) - near).max() <= 1
    browser.value("byId('false-colour').click()")
    ramp = false_colours(luminance(expected), automatic * 2**1.5)
    encoded = np.where(ramp <= 0.0031308, 12.92 * ramp, 1.055 * ramp ** (1 / 2.4) - 0.055)
    assert np.abs(picture_shown(browser) - 255 * encoded).max() <= 1.5
    middle = 0.18 / (automatic * 2**1.5)
    ticks = browser.value("Array.from(byId('ticks').children, (tick) => Number(tick.textContent))")
    np.testing.assert_allclose(ticks, middle * 2.0 ** np.array([-8, -4, 0, 4, 8]), rtol=0.06)


def picture_corner(browser):
    """Its upper left corner in the page, CSS pixels."""
    box = browser.value("JSON.stringify(byId('picture').getBoundingClientRect())")
    return json.loads(box)["x"], json.loads(box)["y"]


def test_pointer_reads_linear_radiance_and_where_it_points(browser, probe, page_of):
    open_page(browser, page_of("rgba16f_negate_z"))
    set_controls(browser, yaw=100, pitch=-20)
    expected = seen_sky(world_faces(probe, "specular.rgba16f_negate_z.ktx2"), 100, -20, 0)
    left, top = picture_corner(browser)
    browser.move_pointer(left + 250.5, top + 40.5)
    assert browser.value("byId('reading-at').textContent") == "Under the pointer"
    told = browser.value("byId('value').textContent")
    numbers = [float(text) for text in re.findall(r"[\d.]+(?:e\d+)?", told)]
    np.testing.assert_allclose(numbers[:3], expected[40, 250], rtol=6e-4)
    assert numbers[3] == pytest.approx(luminance(expected[40, 250]), rel=6e-4)
    vector = re.search(r"\((.*)\)", browser.value("byId('towards').textContent"))[1]
    np.testing.assert_allclose([float(c) for c in vector.split(",")], sky_rays(100, -20)[40, 250], atol=6e-4)


def test_keys_and_drags_turn_the_picture(browser, page_of):
    open_page(browser, page_of("rgba16f"))
    browser.value("byId('picture').focus()")
    for key in ("ArrowLeft", "ArrowUp", "PageUp", "+", "f"):
        browser.press(key)
    read = "['yaw', 'pitch', 'level', 'exposure'].map((id) => Number(byId(id).value))"
    assert browser.value(read) == [5, 10, 1, 0.5]
    assert browser.value("byId('false-colour').checked")
    left, top = picture_corner(browser)
    browser.move_pointer(left + 100, top + 100)
    browser.move_pointer(left + 100, top + 100, "left", "mousePressed")
    browser.move_pointer(left + 132, top + 100, "left")
    browser.move_pointer(left + 132, top + 100, "left", "mouseReleased")
    assert browser.value("Number(byId('yaw').value)") == 16  # the sky follows: the look turns to its left, +x
    set_controls(browser, "scene")
    assert browser.value("Number(byId('pitch').value)") == -14
    set_controls(browser, "sky")
    assert browser.value("Number(byId('pitch').value)") == 10


def test_page_says_what_the_browser_lacks(probe, page_of, tmp_path):
    without = "const get = WebGL2RenderingContext.prototype.getExtension;" \
        "WebGL2RenderingContext.prototype.getExtension = function (name) {" \
        "return name === 'EXT_texture_compression_bptc' ? null : get.call(this, name); };"
    with Chromium(tmp_path / "bptc") as browser:
        browser.run_first(without)
        open_page(browser, page_of("bc6h"))
        said = browser.value("byId('trouble').innerText")
        assert "EXT_texture_compression_bptc is missing" in said and "specular.rgb9e5.ktx2" in said
        assert browser.value("byId('stage').offsetHeight") == 0
    with Chromium(tmp_path / "webgl", "--disable-3d-apis") as browser:
        open_page(browser, page_of("rgb9e5"))
        said = browser.value("byId('trouble').innerText")
        assert "shows no WebGL2" in said and "specular" not in said


def test_page_asks_for_nothing(browser, page_of):
    open_page(browser, page_of("rgba16f"))
    set_controls(browser, "scene")
    assert {address.partition(":")[0] for address in browser.requests} == {"file"}
    assert all(address.endswith(".html") for address in browser.requests)
