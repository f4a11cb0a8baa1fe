"""Packing in one run: size, speed and error of every coding, BC6H beside the bare encoder and a floor.

    python tests/benchmarks/bench_packing.py [face size]

First the sample skies of pipeline.yaml, then a 4096 x 2048 half-float EXR of a clear sky with a true-size
sun, made here; each to a chain of 8 levels at roughness k/7. Prints per coding the bytes of a KTX2 file,
the speed, the log2 RMSE and the largest error of a level's energy; for BC6H per level the same beside
`ispc_texcomp`'s basic profile alone and a floor (principal axis and one least squares, mode 3); and what
packing takes of all that comes before it. Times are CPU time, the least of some runs, so that other work
on the machine counts little; where threads share the work, what the clock shows is less.
"""

import sys
import tempfile
import time
from pathlib import Path

import ispc_texcomp
import numpy as np
import OpenEXR

from skykiln.config import load_pipeline
from skykiln.formats.bc6h import decode_bc6h, decode_blocks
from skykiln.formats.bc6h_encode import encode_bc6h
from skykiln.formats.bc6h_layout import WEIGHTS_4
from skykiln.formats.ktx2 import Ktx2Texture, write_ktx2
from skykiln.formats.pixels import PIXELS
from skykiln.formats.source_files import read_source
from skykiln.light.directions import cube_texel_solid_angles, panorama_directions
from skykiln.light.faces import extract_faces
from skykiln.light.photometry import horizontal_illuminance
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level
from skykiln.light.storage import storage_ev

LEVELS = 8
SUN_RADIUS = np.radians(0.2665)
SAMPLES = {"ferry_noon": 1, "low_sun_evening": 1, "night_quay": 2, "overcast_quay": 2}  # of the face size: 1/


def clear_sky(width):
    """(width/2, width, 3) float16: a gradient, waves of all sizes, an aureole and a sun, scaled to fit."""
    d = panorama_directions(width, width // 2)
    rng = np.random.default_rng(1)
    waves = sum(np.sin(d @ (rng.normal(size=3) * 2 ** (k / 3))) * 0.9**k for k in range(24))
    horizon = np.exp(-4 * np.abs(d[..., 1:2]))
    sky = horizon * [1.0, 0.85, 0.7] + (1 - horizon) * [0.25, 0.45, 1.0]
    sky *= np.exp(0.15 * waves)[..., None] * np.where(d[..., 1:2] > 0, 1, 0.3)
    away = np.arccos(np.clip(d @ (np.array([0.4, 0.7, 0.59]) / np.linalg.norm([0.4, 0.7, 0.59])), -1, 1))
    sky += (3 * np.exp(-away / 0.1) + 30 * np.exp(-away / 0.02))[..., None] * [1, 0.95, 0.85]
    covered = np.clip((SUN_RADIUS - away) / (2 * np.pi / width) + 0.5, 0, 1)
    sky += 3e5 * covered[..., None] * [1, 0.93, 0.8]
    return np.float16(np.ldexp(sky, -storage_ev(float(sky.max()))))


def timed(function, repeats=3):
    """(result, least CPU time, least time by the clock) in seconds; the first call compiles."""
    function()
    times = []
    for _ in range(repeats):
        start = time.process_time(), time.perf_counter()
        result = function()
        times.append((time.process_time() - start[0], time.perf_counter() - start[1]))
    return result, *np.min(times, 0)


def bake(panorama, size):
    """Levels from a panorama, as the stages make them."""
    faces = extract_faces(panorama, size)
    pyramid = build_pyramid(panorama)
    filtered = [filter_level(pyramid, size >> k, (k / (LEVELS - 1)) ** 2, 0.005) for k in range(1, LEVELS)]
    return [faces, *filtered]


def sample_levels(probe, size):
    """Stored values of a sample sky, scaled to its measurement as the pipeline says."""
    pixels = read_source(Path("pipeline.yaml").parent / probe.file).pixels
    scale = probe.horizontal_lux / horizontal_illuminance(pixels) if probe.horizontal_lux else 1.0
    levels = bake(np.float32(pixels * scale * 2.0**probe.exposure_ev), size)
    stops = storage_ev(float(max(level.max() for level in levels)))
    return [level * np.float32(2.0**-stops) for level in levels]


def errors(kept, level):
    """(log2 RMSE, largest error of a channel's energy, error of the peak)."""
    seen = np.maximum(level, 2.0**-14)
    rmse = np.sqrt(np.mean(np.log2(np.maximum(kept, 2.0**-14) / seen) ** 2))
    weights = cube_texel_solid_angles(level.shape[1])[None, :, :, None]
    energy = np.abs((kept * weights).sum((0, 1, 2)) / (level * weights).sum((0, 1, 2)) - 1).max()
    return rmse, energy, kept.max() / level.max() - 1


def bare_encoder(level):
    """`ispc_texcomp` with its basic profile, on one thread, faces of at least 4."""
    size = level.shape[1]
    rgba = np.ones((6 * size, size, 4), np.float16)
    rgba[..., :3] = level.reshape(6 * size, size, 3)
    surface = ispc_texcomp.RGBASurface(rgba.tobytes(), size, 6 * size, size * 8)
    profile = ispc_texcomp.BC6HEncSettings.from_profile("basic")
    return ispc_texcomp.compress_blocks_bc6h(surface, profile)


def floor(level):
    """Mode 3 by the principal axis and one least squares: decoded (6, n, n, 3)."""
    size = level.shape[1]
    blocks = level.reshape(6, size // 4, 4, size // 4, 4, 3).transpose(0, 1, 3, 2, 4, 5).reshape(-1, 16, 3)
    v = blocks.astype(np.float16).view(np.uint16) * (64 / 31) + 1
    offset = v - v.mean(1, keepdims=True)
    _, axes = np.linalg.eigh(np.einsum("bti,btj->bij", offset, offset))
    place = np.einsum("bti,bi->bt", offset, axes[..., -1])
    place = (place - place.min(1, keepdims=True)) / np.maximum(np.ptp(place, axis=1), 1e-9)[:, None]
    weights = WEIGHTS_4 / 64
    b = weights[np.abs(place[..., None] - weights).argmin(-1)]
    basis = np.stack([1 - b, b], -1)
    ends = np.linalg.pinv(np.einsum("bti,btj->bij", basis, basis)) @ np.einsum("bti,btc->bic", basis, v)
    ends = np.clip(np.floor(ends / 64), 0, 1023)
    ends = np.where(ends == 1023, 65535, np.where(ends > 0, ends * 64 + 32, 0))
    palette = (1 - weights)[:, None] * ends[:, None, 0] + weights[:, None] * ends[:, None, 1]
    nearest = ((palette[:, None] - v[:, :, None]) ** 2).sum(-1).argmin(-1)
    kept = np.take_along_axis(palette, nearest[..., None], 1)
    halves = (kept.astype(np.int64) * 31 >> 6).astype(np.uint16).view(np.float16).astype(np.float32)
    shape = (6, size // 4, size // 4, 4, 4, 3)
    return halves.reshape(shape).transpose(0, 1, 3, 2, 4, 5).reshape(level.shape)


def print_codings(levels):
    pixels = sum(level[..., 0].size for level in levels)
    print("coding       file bytes  +Zstd(3)  Mpixel/CPU s encode decode  log2 RMSE  energy")
    seconds = {}
    for name, coding in PIXELS.items():
        if coding.channels != 3:
            continue
        blocks, seconds[name], _ = timed(lambda c=coding: [c.encode(level) for level in levels])
        raw = [(b.tobytes(), level.shape[:3]) for b, level in zip(blocks, levels, strict=True)]
        kept, decoding, _ = timed(lambda c=coding, raw=raw: [c.decode(*level) for level in raw])
        found = [errors(k, level) for k, level in zip(kept, levels, strict=True)]
        texture = Ktx2Texture(name, tuple(levels))
        sizes = len(write_ktx2(texture)), len(write_ktx2(texture, 3))
        print(
            f"{name:11} {sizes[0]:11,} {sizes[1]:9,}  {pixels / seconds[name] / 1e6:19.1f} "
            f"{pixels / decoding / 1e6:6.1f}  {found[0][0]:9.5f}  {max(f[1] for f in found):.4%}"
        )
    _, alone, _ = timed(lambda: [bare_encoder(level) for level in levels if level.shape[1] >= 4])
    print(f"rgb9e5 is {seconds['bc6h'] / seconds['rgb9e5']:.0f} times faster than bc6h")
    print(f"bc6h takes {seconds['bc6h'] / alone:.2f} of the bare encoder's CPU time")


def print_bc6h(levels):
    print("BC6H, log2 RMSE / energy error / peak error:  ours | bare encoder | floor;  RMSE ours to bare")
    for number, level in enumerate(levels):
        if level.shape[1] < 4:
            break
        rows = [
            errors(decode_bc6h(encode_bc6h(level).tobytes(), level.shape[:3]), level),
            errors(decode_bc6h(bare_encoder(level), level.shape[:3]), level),
            errors(floor(level), level),
        ]
        shown = " | ".join(f"{r:.5f} {e:8.3%} {p:+8.3%}" for r, e, p in rows)
        print(f"level {number} ({level.shape[1]:3}): {shown}   {rows[0][0] / rows[1][0]:.3f}")


def print_decoding(level):
    blocks = np.frombuffer(bare_encoder(level), "<u8").reshape(-1, 2)
    megapixels = level[..., 0].size / 1e6
    print(f"decoding blocks: {megapixels / timed(lambda: decode_blocks(blocks))[1]:.0f} Mpixel/CPU s")


def print_packing(levels, baking):
    """BC6H with Zstandard beside decode, faces and filter, given as (CPU time, time by the clock)."""
    _, *packing = timed(lambda: write_ktx2(Ktx2Texture("bc6h", tuple(levels)), 3))
    print("\n                       CPU s  clock s")
    print(f"decode, faces, filter  {baking[0]:5.2f}  {baking[1]:7.2f}")
    print(f"BC6H + Zstd(3)         {packing[0]:5.2f}  {packing[1]:7.2f}")
    print(f"                       {packing[0] / baking[0]:5.2f}  {packing[1] / baking[1]:7.2f}  of that")


def main():
    size = int(sys.argv[1]) if len(sys.argv) > 1 else 512
    for probe in load_pipeline(Path("pipeline.yaml")).probes():
        if probe.name in SAMPLES:
            levels = sample_levels(probe, size // SAMPLES[probe.name])
            print(f"\n{probe.name}")
            print_codings(levels)
            print_bc6h(levels)
    print("\nclear sky, 4096 x 2048")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "clear.exr"
        header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
        OpenEXR.File(header, {"RGB": clear_sky(4096)}).write(str(path))
        levels, *baking = timed(lambda: bake(read_source(path).pixels, size))
    print_codings(levels)
    print_bc6h(levels)
    print_decoding(levels[0])
    print_packing(levels, baking)


if __name__ == "__main__":
    main()
