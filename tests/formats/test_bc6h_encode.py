"""The BC6H encoder: what reaches it, what it keeps of a small sun, and how it stands to the bare encoder."""

import itertools
import sys

import ispc_texcomp
import numpy as np
import pytest
from test_bc6h import random_blocks

from skykiln.errors import SkykilnError
from skykiln.formats.bc6h import decode_bc6h, decode_blocks, unpack_block
from skykiln.formats.bc6h_encode import encode_bc6h
from skykiln.formats.bc6h_layout import MODES, PARTITIONS
from skykiln.formats.bc6h_least_squares import least_squares
from skykiln.formats.bc6h_pack import pack_block
from skykiln.formats.bc6h_refit import refit_blocks

NO_PEAK = np.zeros(3, np.int64)
ALL = np.ones(16, bool)


def coded(colours):
    """What stays of (faces, h, w, 3) after coding."""
    return decode_bc6h(encode_bc6h(colours).tobytes(), colours.shape[:3])


def sky(size, seed=0):
    """(6, n, n, 3): a gradient with waves and grain; values 0.2 to 3."""
    rng = np.random.default_rng(seed)
    y, x = np.mgrid[0:size, 0:size] / size
    waves = sum(np.sin(x * rng.normal() * k + y * rng.normal() * k + k) / k for k in range(1, 30))
    grain = 0.05 * rng.normal(size=(size, size))
    base = np.exp(0.4 * waves + 0.5 * y + grain)[..., None] * np.array([0.4, 0.7, 1.1])
    return np.float32(np.stack([base * (1 + 0.1 * f) for f in range(6)]))


def sunlit_sky(size, radius=1.5):
    """The same with a sun on face 4: a disc 1e4 times brighter, edges averaged; its radius in texels."""
    faces = sky(size)
    fine = np.mgrid[0 : 8 * size, 0 : 8 * size] / 8 - size * 0.37
    disc = (np.hypot(*fine) < radius).reshape(size, 8, size, 8).mean((1, 3))
    faces[4] += np.float32(disc[..., None] * np.array([3e4, 2.7e4, 2.2e4]))
    return faces


@pytest.mark.parametrize("mode", MODES)
def test_parts_of_a_block_make_the_same_block(mode):
    for block in random_blocks(mode, 50):
        values, indices, packed = np.zeros(13, int), np.zeros(16, int), np.zeros(2, np.uint64)
        pack_block(unpack_block(block, values, indices), values, indices, packed)
        np.testing.assert_array_equal(packed, block)


@pytest.mark.parametrize("value", [0.0, 1.0, 0.1, 64512.0, 65504.0, 2.0**-20])
def test_constant_colour_is_kept_to_a_thousandth(value):
    colours = np.full((6, 4, 4, 3), value, np.float32)
    np.testing.assert_allclose(coded(colours), colours, rtol=1e-3, atol=1e-7)


def test_not_a_number_negative_and_infinite_values_never_reach_the_file():
    colours = np.ones((6, 4, 4, 3), np.float32)
    for face, value in enumerate([np.nan, -5, np.inf, 1e9, -np.inf]):
        colours[face] = value
    np.testing.assert_allclose(coded(colours)[:, 0, 0, 0], [0, 0, 65504, 65504, 0, 1], rtol=1e-3)


@pytest.mark.parametrize("size", [1, 2, 3, 5, 6])
def test_partial_blocks_keep_their_texels(size):
    colours = sky(8)[:, :size, :size]
    assert coded(colours).shape == colours.shape
    np.testing.assert_allclose(coded(colours), colours, rtol=0.08)


def test_two_by_two_texels_weigh_the_same():
    colours = np.ones((6, 2, 2, 3), np.float32)
    colours[:, 1, 1] = 1.5
    np.testing.assert_allclose(coded(colours), colours, rtol=0.01)


def bare_encoder(colours):
    """The encoder's basic profile with nothing of ours around it."""
    kept = []
    for face in colours:
        size = len(face)
        rgba = np.ones((size, size, 4), np.float16)
        rgba[..., :3] = face
        surface = ispc_texcomp.RGBASurface(rgba.tobytes(), size, size, size * 8)
        profile = ispc_texcomp.BC6HEncSettings.from_profile("basic")
        blocks = ispc_texcomp.compress_blocks_bc6h(surface, profile)
        kept.append(decode_bc6h(blocks, (1, size, size))[0])
    return np.stack(kept)


def log_error(kept, colours):
    return np.sqrt(np.mean((np.log2(np.maximum(kept, 1e-6)) - np.log2(colours)) ** 2))


@pytest.mark.parametrize("radius", [0.4, 1.5, 3])
def test_small_sun_keeps_its_energy(radius):
    colours = sunlit_sky(128, radius)
    kept = coded(colours)
    energy = kept.sum((0, 1, 2), np.float64) / colours.sum((0, 1, 2), np.float64)
    np.testing.assert_allclose(energy, 1, atol=3e-3)
    # Only the sun's own blocks pay for it.
    bare = bare_encoder(colours)
    elsewhere = [f for f in range(6) if f != 4]
    assert log_error(kept[elsewhere], colours[elsewhere]) <= 1.05 * log_error(
        bare[elsewhere], colours[elsewhere]
    )
    assert log_error(kept, colours) <= 1.5 * log_error(bare, colours)


def test_wide_sun_keeps_its_peak():
    colours = sunlit_sky(128, 3)
    assert coded(colours).max() == pytest.approx(colours.max(), rel=0.02)


def test_sky_without_sun_is_coded_as_the_bare_encoder_codes_it():
    colours = sky(32)
    assert log_error(coded(colours), colours) <= 1.05 * log_error(bare_encoder(colours), colours)


def refit(blocks, halves, free, peak=NO_PEAK):
    aims = halves.view(np.float16).astype(float).sum(1)
    return decode_blocks(refit_blocks(blocks, halves, aims, np.full(aims.shape, free), peak, ALL)), aims


def test_refitting_puts_flux_right():
    halves = np.full((1, 16, 3), np.float16(2).view(np.uint16))
    halves[0, 5] = np.float16(20000).view(np.uint16)
    spoiled = np.zeros((1, 2), np.uint64)  # black: mode 0, all zero
    refitted, aims = refit(spoiled, halves, 5e-4)
    np.testing.assert_allclose(refitted.view(np.float16).astype(float).sum(1), aims, rtol=2e-3)


def test_refitting_cares_for_the_texels_that_are_seen_alone():
    rng = np.random.default_rng(4)
    halves = rng.integers(0, 30_000, (1, 16, 3)).astype(np.uint16)
    seen = np.arange(16) < 2  # two colours: the ends
    aims = halves.view(np.float16)[:, seen].astype(float).sum(1)
    refitted = refit_blocks(np.zeros((1, 2), np.uint64), halves, aims, np.full((1, 3), 0.01), NO_PEAK, seen)
    kept = decode_blocks(refitted).view(np.float16)[:, seen].astype(float)
    np.testing.assert_allclose(kept, halves.view(np.float16)[:, seen].astype(float), rtol=0.03)


def test_refitting_keeps_an_exact_block():
    colours = np.full((1, 4, 4, 3), 3.5, np.float32)
    block = encode_bc6h(colours)
    halves = decode_blocks(block)
    np.testing.assert_array_equal(refit(block, halves, 1e-3)[0], halves)


def test_refitting_leaves_no_texel_above_the_peak():
    halves = np.full((1, 16, 3), np.float16(2).view(np.uint16))
    halves[0, :5] = np.float16(20000).view(np.uint16)
    refitted, _ = refit(np.zeros((1, 2), np.uint64), halves, 0.01, halves[0].max(0).astype(np.int64))
    assert refitted.view(np.float16).max() == pytest.approx(20000, rel=0.02)


@pytest.mark.parametrize("partition", range(-1, 32))
def test_block_of_colours_between_the_ends_of_its_subsets_is_found(partition):
    # Indices 0 to 7 of a palette in half bits, both subsets with colours of their own.
    rng = np.random.default_rng(partition + 1)
    ends = rng.integers(15_000, 15_800, (4, 3)) if partition < 0 else rng.integers(9_000, 16_000, (4, 3))
    target = np.empty((16, 3), np.int64)
    for texel in range(16):
        k = 2 * (PARTITIONS[partition] >> texel & 1) if partition >= 0 else 0
        target[texel] = ends[k] + (ends[k + 1] - ends[k]) * (texel % 8) // 7
    values, indices, block = np.zeros(13, int), np.zeros(16, int), np.zeros((1, 2), np.uint64)
    mode = least_squares(target, partition, False, 1.0, values, indices)
    assert (MODES[mode].subsets == 2) == (partition >= 0)
    pack_block(mode, values, indices, block[0])
    step = 32_000 >> MODES[mode].endpoint_bits
    assert np.abs(decode_blocks(block)[0].astype(int) - target).max() < 1.5 * step + 30


def test_small_levels_have_about_the_bare_encoders_error():
    for seed, size in itertools.product(range(3), (4, 8, 16)):
        colours = sky(size, seed) ** 2
        assert log_error(coded(colours), colours) <= 1.05 * log_error(bare_encoder(colours), colours)


@pytest.mark.parametrize("size", [1, 2, 4, 8, 16])
def test_small_levels_keep_their_energy_plain_and_by_solid_angle(size):
    a = (2 * np.arange(size) + 1) / size - 1
    solid_angles = ((1 + a[:, None] ** 2 + a**2) ** -1.5)[:, :, None]
    for seed in range(4):
        colours = sky(size, seed) ** 2
        kept = coded(colours).astype(float)
        for weights in (1, solid_angles):
            energy = (weights * kept).sum((0, 1, 2)) / (weights * colours).sum((0, 1, 2))
            np.testing.assert_allclose(energy, 1, atol=3e-3)


def test_same_bytes_for_every_number_of_threads(monkeypatch):
    colours = sunlit_sky(64)
    several = encode_bc6h(colours)
    monkeypatch.setattr("numba.get_num_threads", lambda: 1)
    monkeypatch.setattr("skykiln.formats.bc6h_encode._STRIP", 100)
    np.testing.assert_array_equal(encode_bc6h(colours), several)


def test_missing_encoder_is_an_error_that_names_the_extra(monkeypatch):
    monkeypatch.setitem(sys.modules, "ispc_texcomp", None)
    with pytest.raises(SkykilnError, match=r"skykiln\[bc6h\]"):
        encode_bc6h(np.ones((6, 4, 4, 3), np.float32))
