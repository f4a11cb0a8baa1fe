"""Packed files as a renderer loads them: every coding, container and `cube_axes` in software OpenGL.

The files are taken apart here by the specifications alone, or by the listing in docs/for_renderers.md. A
renderer's vector is the world direction times the signs of `cube_axes`; what comes back must be the world
faces at that direction.
"""

import itertools
import json
import re
import struct
from pathlib import Path

import imagecodecs
import numpy as np
import pytest
from opengl_context import (
    make_context,
    read_level,
    run_for_each,
    sample_texture,
    upload_cube,
    words_that_the_driver_packs,
)

from skykiln.formats.dds import DdsTexture, write_dds
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2, write_ktx2
from skykiln.formats.pixels import PIXELS
from skykiln.formats.texture_files import read_texture
from skykiln.light.cube_axes import CUBE_AXES, SAMPLING_SIGNS, from_cube_space, to_cube_space
from skykiln.light.harmonics import irradiance_from_coefficients
from skykiln.light.sample_cube import sample_cube
from tiny_pipeline import TinyPipeline, write_sky

CODINGS = ["rgba16f", "rgb9e5", "r11g11b10f", "bc6h"]
SIZE = 16


@pytest.fixture(scope="module")
def renderer():
    return make_context()


def world_levels(size=SIZE):
    """Random levels, smooth enough for BC6H, down to 1 x 1."""
    rng = np.random.default_rng(8)
    sizes = [size >> p for p in range(size.bit_length())]
    return [np.float32(np.exp(rng.normal(0, 0.3, (6, n, n, 3))) * [1, 2, 4]) for n in sizes]


def images_of_ktx2(data):
    """images[level][face] by KTX 2.0, "File Structure"."""
    faces, count, scheme = struct.unpack_from("<3I", data, 36)
    images = []
    for p in range(count):
        offset, length, _ = struct.unpack_from("<3Q", data, 80 + 24 * p)
        level = data[offset : offset + length]
        level = imagecodecs.zstd_decode(level) if scheme == 2 else level
        share = len(level) // faces
        images.append([level[share * f : share * (f + 1)] for f in range(faces)])
    return images


def images_of_dds(data):
    """images[level][face] by Microsoft's guide: behind 148 bytes, face by face, the largest level first."""
    size, count, dxgi = (struct.unpack_from("<I", data, at)[0] for at in (12, 28, 128))
    texel_bytes = {10: 8, 67: 4, 26: 4}
    images, start = [[] for _ in range(count)], 148
    for _ in range(6):
        for p in range(count):
            n = max(1, size >> p)
            length = 16 * ((n + 3) // 4) ** 2 if dxgi == 95 else texel_bytes[dxgi] * n * n
            images[p].append(data[start : start + length])
            start += length
    assert start == len(data)
    return images


CONTAINERS = {
    "ktx2": lambda pixels, levels: images_of_ktx2(write_ktx2(Ktx2Texture(pixels, levels))),
    "ktx2 with Zstandard": lambda pixels, levels: images_of_ktx2(write_ktx2(Ktx2Texture(pixels, levels), 3)),
    "dds": lambda pixels, levels: images_of_dds(write_dds(DdsTexture(pixels, levels))),
}


@pytest.mark.parametrize("cube_axes", CUBE_AXES)
@pytest.mark.parametrize("container", CONTAINERS)
@pytest.mark.parametrize("pixels", CODINGS)
def test_renderer_sees_the_world_faces(renderer, pixels, container, cube_axes):
    levels = tuple(to_cube_space(level, cube_axes) for level in world_levels())
    texture = upload_cube(pixels, SIZE, CONTAINERS[container](pixels, levels))
    rng = np.random.default_rng(3)
    directions, lods = rng.normal(size=(3000, 3)), rng.uniform(-0.5, 5, 3000)
    seen = sample_texture(texture, directions * SAMPLING_SIGNS[cube_axes], lods)
    stored = read_ktx2(write_ktx2(Ktx2Texture(pixels, levels)), "sky").levels
    ours = sample_cube([from_cube_space(level, cube_axes) for level in stored], directions, lods)
    # OpenGL lets a driver weight in eight bits; llvmpipe does it in float32.
    np.testing.assert_allclose(seen[:, :3], ours, rtol=1e-4, atol=1e-4)
    np.testing.assert_allclose(seen[:, 3], 1, rtol=1e-6)


@pytest.mark.parametrize("pixels", CODINGS)
def test_driver_decodes_every_level_to_our_bits(renderer, pixels):
    levels = tuple(world_levels())
    data = write_ktx2(Ktx2Texture(pixels, levels))
    texture = upload_cube(pixels, SIZE, images_of_ktx2(data))
    for number, level in enumerate(read_ktx2(data, "sky").levels):
        np.testing.assert_array_equal(read_level(texture, number, SIZE >> number), level)


def test_driver_decodes_random_bc6h_blocks_of_all_modes_to_our_bits(renderer):
    rng = np.random.default_rng(5)
    blocks = rng.integers(0, 256, (6, 32 * 32, 16), np.uint8)
    images = [[face.tobytes() for face in blocks]]
    theirs = read_level(upload_cube("bc6h", 128, images), 0, 128)
    np.testing.assert_array_equal(theirs, PIXELS["bc6h"].decode(blocks.tobytes(), (6, 128, 128)))


def test_corners_and_edges_of_small_levels_are_seamless(renderer):
    levels = tuple(world_levels(4))
    texture = upload_cube("rgba16f", 4, images_of_ktx2(write_ktx2(Ktx2Texture("rgba16f", levels))))
    stored = read_ktx2(write_ktx2(Ktx2Texture("rgba16f", levels)), "sky").levels
    rng = np.random.default_rng(6)
    directions = np.sign(rng.normal(size=(600, 3))) + rng.uniform(-0.05, 0.05, (600, 3))
    lods = rng.integers(0, 3, 600).astype(float)
    seen = sample_texture(texture, directions, lods)[:, :3]
    np.testing.assert_allclose(seen, sample_cube(stored, directions, lods), rtol=1e-4, atol=1e-4)


def test_our_rgb9e5_words_are_the_drivers(renderer):
    rng = np.random.default_rng(7)
    colours = np.float32(10.0 ** rng.uniform(-9, 6, (256, 256, 3)))
    colours[:64] = rng.choice(np.float32([0, 1, 511.5 / 512, 65408, 1e9, 2.0**-24, 2.0**-25]), (64, 256, 3))
    ours = PIXELS["rgb9e5"].encode(colours)
    np.testing.assert_array_equal(ours, words_that_the_driver_packs(colours))


# What a coding may take from a texel of the smooth sky below.
CODING_ERRORS = {"rgba16f": 1e-3, "rgb9e5": 0.01, "r11g11b10f": 0.03, "bc6h": 0.15}
KINDS = {"plain": ("ktx2", None), "packed": ("ktx2", 3), "dds": ("dds", None)}


def every_pack():
    """Entries of a recipe's pack list, by name: all codings, containers and cube_axes."""
    packs = {}
    for pixels, (kind, (container, compress)), axes in itertools.product(CODINGS, KINDS.items(), CUBE_AXES):
        entry = {"container": container, "pixels": pixels, "cube_axes": axes, "compress": compress}
        packs[f"{pixels}_{kind}_{axes}"] = {**entry, "name": f"{pixels}_{kind}_{axes}"}
    return packs


@pytest.fixture(scope="module")
def probe(tmp_path_factory):
    """A small sky baked by the product, packed in every way."""
    pipeline = TinyPipeline(tmp_path_factory.mktemp("probe"), probes=["ferry_noon"])
    y, x = np.mgrid[0:32, 0:64] / 32.0
    sky = np.exp(np.sin(np.pi * x)[..., None] * [0.5, 0.3, -0.4] + np.cos(3 * y)[..., None] * [0.2, 0.6, 0.9])
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=np.float32(1e5 * sky))  # needs a storage_ev
    pipeline.recipe["face_size"] = 16
    pipeline.recipe["specular"] = {"levels": 5, "roughness": [0, 0.2, 0.5, 0.6, 1], "tolerance": 0.01}
    pipeline.recipe["pack"] = list(every_pack().values())
    pipeline.bake()
    return pipeline


def world_of(probe):
    """What was baked, in true units: world faces of every level."""
    work = probe.build / "work/ferry_noon"
    return [np.load(work / name) for name in ("faces.npy", *(f"level_{k}.npy" for k in range(1, 5)))]


@pytest.mark.parametrize("name", every_pack())
def test_renderer_sees_what_was_baked_in_every_pack(renderer, probe, name):
    entry = every_pack()[name]
    file = f"specular.{name}.{entry['container']}"
    data = (probe.build / "probes/ferry_noon" / file).read_bytes()
    images = images_of_ktx2(data) if entry["container"] == "ktx2" else images_of_dds(data)
    texture = upload_cube(entry["pixels"], 16, images)
    rng = np.random.default_rng(9)
    directions, lods = rng.normal(size=(2000, 3)), rng.uniform(0, 4, 2000)
    axes = entry["cube_axes"]
    scale = 2.0 ** probe.probe_record("ferry_noon")["storage_ev"]
    seen = scale * sample_texture(texture, directions * SAMPLING_SIGNS[axes], lods)[:, :3]
    stored = [from_cube_space(level, axes) for level in read_texture(data, file).levels]
    np.testing.assert_allclose(seen, scale * sample_cube(stored, directions, lods), rtol=1e-4)
    baked = sample_cube(world_of(probe), directions, lods)
    np.testing.assert_allclose(seen, baked, rtol=CODING_ERRORS[entry["pixels"]])


PAGE = Path(__file__).parents[2] / "docs/for_renderers.md"


def listing(language):
    (block,) = re.findall(rf"^```{language}\n(.*?)^```", PAGE.read_text(), re.MULTILINE | re.DOTALL)
    return block


def loaded_by_the_page(path):
    scope = {}
    exec(listing("python"), scope)
    scope["switch_on_seamless_cubes"]()
    return scope["load_texture"](path.read_bytes())


def uniforms_of(record, axes):
    """Values of the listing's uniforms, from probe.json."""
    roughness = [level["roughness"] for level in record["specular"]["levels"]]
    return {
        "signs": SAMPLING_SIGNS[axes],
        "true_scale": 2.0 ** record["storage_ev"],
        "level_count": len(roughness),
        "roughness_of": roughness,
        "sh": record["irradiance"]["sh"],
    }


def table_at(table, mu, roughness):
    """Bilinear values of a 2-D table (n, n, 2), clamped to its edge."""
    x, y = (np.clip(c * len(table) - 0.5, 0, len(table) - 1) for c in (mu, roughness))
    i, j = np.minimum(x.astype(int), len(table) - 2), np.minimum(y.astype(int), len(table) - 2)
    u, v = (x - i)[:, None], (y - j)[:, None]
    above = (1 - u) * table[j, i] + u * table[j, i + 1]
    below = (1 - u) * table[j + 1, i] + u * table[j + 1, i + 1]
    return (1 - v) * above + v * below


@pytest.mark.parametrize("axes", CUBE_AXES)
def test_listing_for_opengl_shades_as_computed_here(renderer, probe, axes):
    record, folder = probe.probe_record("ferry_noon"), probe.build / "probes/ferry_noon"
    cubes = [
        f["file"]
        for f in record["irradiance"]["files"]
        if (f["container"], f["pixels"], f["cube_axes"]) == ("ktx2", "rgba16f", axes)
    ]
    brdf = probe.build / "brdf/brdf.rg16f.ktx2"
    files = [folder / f"specular.rgba16f_plain_{axes}.ktx2", folder / cubes[0], brdf]
    textures = [loaded_by_the_page(file) for file in files]
    rng = np.random.default_rng(11)
    n, v = (d / np.linalg.norm(d, axis=1)[:, None] for d in rng.normal(size=(2, 1000, 3)))
    v *= np.sign((n * v).sum(1))[:, None]
    rough, albedo, f0 = rng.random(1000), np.array([0.2, 0.5, 0.8]), np.array([0.04, 0.3, 0.9])
    shading = "lit_by_probe(a.xyz, b.xyz, vec3(0.2, 0.5, 0.8), vec3(0.04, 0.3, 0.9), b.w)"
    seen = run_for_each(
        listing("glsl"), [shading, "irradiance_from_sh(a.xyz)"], n, np.c_[v, rough],
        dict(enumerate(textures)), uniforms_of(record, axes),
    )  # fmt: skip
    mu = (n * v).sum(1)
    level = np.interp(rough, [0, 0.2, 0.5, 0.6, 1], range(5))
    mirror = sample_cube(world_of(probe), 2 * mu[:, None] * n - v, level)
    scale, bias = table_at(read_ktx2(brdf.read_bytes(), "table").levels[0][0], mu, rough).T
    e = sample_cube([np.load(probe.build / "work/ferry_noon/irradiance.npy")], n, 0)
    expected = albedo / np.pi * e + mirror * (f0 * scale[:, None] + bias[:, None])
    np.testing.assert_allclose(seen[0], expected, rtol=3e-3)
    sh = np.array(record["irradiance"]["sh"])
    np.testing.assert_allclose(seen[1], irradiance_from_coefficients(sh, n), rtol=1e-4)
    assert json.dumps(record["sun"]) == "null"
