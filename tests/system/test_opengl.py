"""Packed files as a renderer loads them: every coding, container and `cube_axes` in software OpenGL.

The files are taken apart here by the specifications alone, or by the listing in docs/for_renderers.md. A
renderer's vector is the world direction times the signs of `cube_axes`; what comes back must be the world
faces at that direction.
"""

import struct

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
from packed_probe import (
    CODING_ERRORS,
    CODINGS,
    HARMONICS,
    SHADING,
    every_pack,
    expected_values,
    listing,
    plain_files,
    surfaces,
    uniforms_of,
    world_of,
)

from skykiln.formats.dds import DdsTexture, write_dds
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2, write_ktx2
from skykiln.formats.pixels import PIXELS
from skykiln.formats.texture_files import read_texture
from skykiln.light.cube_axes import CUBE_AXES, SAMPLING_SIGNS, from_cube_space, to_cube_space
from skykiln.light.sample_cube import sample_cube

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


def loaded_by_the_page(path):
    scope = {}
    exec(listing("python"), scope)
    scope["switch_on_seamless_cubes"]()
    return scope["load_texture"](path.read_bytes())


@pytest.mark.parametrize("axes", CUBE_AXES)
def test_listing_for_opengl_shades_as_computed_here(renderer, probe, axes):
    record = probe.probe_record("ferry_noon")
    textures = [loaded_by_the_page(file) for file in plain_files(probe, "rgba16f", axes)]
    n, sight = surfaces()
    seen = run_for_each(
        listing("glsl"), [SHADING, HARMONICS], n, sight, dict(enumerate(textures)), uniforms_of(record, axes)
    )
    shading, harmonics = expected_values(probe, n, sight)
    np.testing.assert_allclose(seen[0], shading, rtol=3e-3)
    np.testing.assert_allclose(seen[1], harmonics, rtol=1e-4)
    assert record["sun"] is None
