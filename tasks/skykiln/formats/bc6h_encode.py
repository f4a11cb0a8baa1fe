"""BC6H blocks: encoded by `ispc_texcomp`, decoded again, and refitted where their flux is off.

The encoder is an extra, looked for when it is first needed. It wants whole blocks of finite half floats
that are not negative (NaN and negative values would come out as 65504), so that is what it gets: smaller
levels are repeated up to a block.
"""

from concurrent.futures import ThreadPoolExecutor
from typing import NamedTuple

import numba
import numpy as np

from skykiln.errors import SkykilnError
from skykiln.formats.bc6h import decode_blocks
from skykiln.formats.bc6h_refit import refit_blocks
from skykiln.formats.half import half_value, nearest_half
from skykiln.jit import exact

_PROFILE = "basic"
_ONE = 0x3C00  # half bits of the alpha that the encoder leaves unread
_STRIP = 2048  # blocks that one call encodes, about
_OFF = 0.01  # a channel's flux in a block that is wrong by this share is put right,
_OFF_LEVEL = 5e-4  # or by this share of the whole level's,
_OFF_TEXEL = 0.02  # or a texel by this share of its block's flux
_MANY = 384  # blocks of a level (32 x 32 faces) whose peak is kept; few blocks have no bits to spare for it
_DIM = 0.05  # a channel's flux counts as at least this share of the brightest channel's


class _Band(NamedTuple):
    """Some rows of blocks of one picture: what was wanted, what was made, and how far that is off."""

    halves: np.ndarray  # (count, 16, 3) uint16
    blocks: np.ndarray  # (count, 2) uint64
    flux: np.ndarray  # (count, 3) float64, the sum of the values wanted
    error: np.ndarray  # the error of that sum
    worst: np.ndarray  # the largest error of one texel


def encode_bc6h(colours) -> np.ndarray:
    """(..., h, w, 3) float32 -> (blocks, 2) uint64, low half first, picture by picture, row by row."""
    encoder = _encoder()
    with ThreadPoolExecutor(numba.get_num_threads()) as threads:
        bands = list(threads.map(lambda band: _encode_band(encoder, band), _bands(colours)))
    level = _Band(*(np.concatenate(parts) for parts in zip(*bands, strict=True)))
    off, free = _judge(level)
    if len(off):
        many = len(level.halves) >= _MANY
        peak = level.halves.max((0, 1)).astype(np.int64) if many else np.zeros(3, np.int64)
        level.blocks[off] = refit_blocks(level.blocks[off], level.halves[off], free, peak)
    return level.blocks


def _bands(colours):
    """Rows of pictures, in the blocks' order: each some `_STRIP` blocks."""
    *_, height, width, _ = colours.shape
    rows = 4 * max(1, _STRIP * 4 // width)
    for picture in colours.reshape(-1, height, width, 3):
        for row in range(0, height, rows):
            yield picture[row : row + rows]


def _encode_band(encoder, colours) -> _Band:
    halves = _cut_into_blocks(nearest_half(colours).view(np.uint16))
    encoded = _call_encoder(encoder, halves)
    blocks = np.frombuffer(encoded, "<u8").reshape(-1, 2)
    flux, error, worst = (np.empty((len(halves), 3)) for _ in range(3))
    _compare(halves, decode_blocks(blocks), flux, error, worst)
    return _Band(halves, blocks, flux, error, worst)


def _cut_into_blocks(picture) -> np.ndarray:
    """(h, w, 3) -> (blocks, 16, 3); partial blocks are filled by repeating texels."""
    height, width, _ = picture.shape
    if height % 4 or width % 4:
        picture = picture[_texel_numbers(height)][:, _texel_numbers(width)]
    rows, columns = picture.shape[0] // 4, picture.shape[1] // 4
    cut = picture.reshape(rows, 4, columns, 4, 3).transpose(0, 2, 1, 3, 4)
    return np.ascontiguousarray(cut).reshape(-1, 16, 3)


def _texel_numbers(size: int) -> np.ndarray:
    """Which texel stands at each place of whole blocks: 0 1 0 1 for a size of 2, so that every texel
    weighs the same; beyond one block the last is repeated."""
    whole = np.arange(size + -size % 4)
    return whole % size if size < 4 else np.minimum(whole, size - 1)


def _call_encoder(encoder, halves) -> bytes:
    """Lay the blocks side by side as a picture of four rows, RGBA."""
    count = len(halves)
    picture = np.full((4, count, 4, 4), _ONE, "<u2")
    picture[..., :3] = halves.reshape(count, 4, 4, 3).transpose(1, 0, 2, 3)
    surface = encoder.RGBASurface(picture.tobytes(), 4 * count, 4, 32 * count)
    return encoder.compress_blocks_bc6h(surface, encoder.BC6HEncSettings.from_profile(_PROFILE))


def _encoder():
    try:
        import ispc_texcomp
    except ImportError as error:
        raise SkykilnError(
            "pixels: bc6h needs the package ispc_texcomp; install the extra: pip install 'skykiln[bc6h]'"
        ) from error
    return ispc_texcomp


def _judge(level: _Band) -> tuple[np.ndarray, np.ndarray]:
    """Numbers of the blocks that are off, and of each the share of flux that may stay so: less, the
    more of the level's flux the block holds. (count,) int and (count, 3) float64."""
    floor = np.maximum(level.flux, _DIM * level.flux.max(1, keepdims=True)) + 1e-9
    whole = level.flux.sum(0) + 1e-9
    off = (level.error > np.minimum(_OFF * floor, _OFF_LEVEL * whole)) | (level.worst > _OFF_TEXEL * floor)
    numbers = np.flatnonzero(off.any(1))
    free = np.clip(_OFF_LEVEL * whole / np.maximum(level.flux[numbers], 1e-9), _OFF_LEVEL, _OFF)
    return numbers, free


@exact
def _compare(halves, decoded, flux, error, worst):
    """Per block and channel: the sum of the values, the error of the sum, the largest error of one."""
    for i in range(len(halves)):
        for c in range(3):
            wanted, got, largest = 0.0, 0.0, 0.0
            for texel in range(16):
                a = half_value(np.int64(halves[i, texel, c]))
                b = half_value(np.int64(decoded[i, texel, c]))
                wanted, got, largest = wanted + a, got + b, max(largest, abs(a - b))
            flux[i, c], error[i, c], worst[i, c] = wanted, abs(got - wanted), largest
