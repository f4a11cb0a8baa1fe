"""BC6H blocks: encoded by `ispc_texcomp`, decoded again, encoded better where it shows, their flux put right.

The encoder is an extra, looked for when it is first needed. It wants whole blocks of finite half floats
that are not negative (NaN and negative values would come out as 65504), so that is what it gets: smaller
levels are repeated up to a block.

Its quick profile is some twenty times faster than its basic one, and as good on most of a sky: so every
block is encoded quickly, then those with the largest errors again, for as long as that is likely to gain
anything. On the samples that leaves the log2 error within 2 % of the basic profile's alone, at a quarter
of its time. Levels of a few blocks afford the slow profile.
"""

from concurrent.futures import ThreadPoolExecutor

import numba
import numpy as np

from skykiln.errors import SkykilnError
from skykiln.formats.bc6h_flux import put_flux_right
from skykiln.formats.bc6h_measure import CodedLevel, measure_blocks
from skykiln.formats.half import nearest_half

_GAIN = 0.02  # share of the squared error that the basic profile may still be expected to gain
_PARTS = 16  # of a level's blocks, between which that is judged,
_PART = 256  # of so many blocks at least
_FEW = 96  # blocks of a level (16 x 16 faces) that are encoded slowly too
_STRIP = 1024  # blocks that one call encodes, about
_ONE = 0x3C00  # half bits of the alpha that the encoder leaves unread


def encode_bc6h(colours) -> np.ndarray:
    """(..., h, w, 3) float32 -> (blocks, 2) uint64, low half first, picture by picture, row by row."""
    encoder = _encoder()
    weights = _texel_weights(colours.shape)
    seen = weights[0] > 0
    with ThreadPoolExecutor(numba.get_num_threads()) as threads:
        bands = threads.map(lambda band: _encode_band(encoder, band, seen), _bands(colours))
        level = CodedLevel(*(np.concatenate(parts) for parts in zip(*bands, strict=True)))
        _encode_worst_again(encoder, level, seen, threads)
        if len(level.blocks) <= _FEW:
            _encode_again(encoder, "slow", level, np.arange(len(level.blocks)), seen, threads)
        put_flux_right(level, weights, threads)
    return level.blocks


def _bands(colours):
    """Rows of pictures, in the blocks' order: each some `_STRIP` blocks."""
    *_, height, width, _ = colours.shape
    rows = 4 * max(1, _STRIP * 4 // width)
    for picture in colours.reshape(-1, height, width, 3):
        for row in range(0, height, rows):
            yield picture[row : row + rows]


def _encode_band(encoder, colours, seen) -> CodedLevel:
    halves = _cut_into_blocks(nearest_half(colours).view(np.uint16))
    return measure_blocks(halves, _call_encoder(encoder, "veryfast", halves), seen)


def _encode_worst_again(encoder, level, seen, threads):
    """Encode blocks by the basic profile, the worst first, until the others would gain little: they are
    taken to gain at most the share of their error that those before them gained."""
    order = np.argsort(-level.squared, kind="stable")
    parts = np.array_split(order, np.clip(len(order) // _PART, 1, _PARTS))
    done = 0
    for part in parts:
        before = level.squared[part].sum()
        _encode_again(encoder, "basic", level, part, seen, threads)
        done += len(part)
        gained = before - level.squared[part].sum()
        if gained * level.squared[order[done:]].sum() <= _GAIN * before * level.squared.sum():
            break


def _encode_again(encoder, profile, level, numbers, seen, threads):
    """Encode some blocks of a level by another profile; each stays as the better of both."""

    def encode_some(some):
        again = measure_blocks(level.halves[some], _call_encoder(encoder, profile, level.halves[some]), seen)
        better = again.squared < level.squared[some]
        level.replace(some[better], again, better)

    list(threads.map(encode_some, (numbers[k : k + _STRIP] for k in range(0, len(numbers), _STRIP))))


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


def _texel_weights(shape) -> np.ndarray:
    """(2, 16) what the texels of the first block of a face weigh in a level's energy: in a plain sum, and
    by solid angle (its density on a cube's face is (1 + a^2 + b^2)^-3/2). Filling texels weigh nothing."""
    *_, height, width, _ = shape
    rows, columns = ((2 * np.arange(4) + 1) / size - 1 for size in (height, width))
    seen = (np.abs(rows) < 1)[:, None] & (np.abs(columns) < 1)
    return np.stack([seen.ravel(), (seen * (1 + rows[:, None] ** 2 + columns**2) ** -1.5).ravel()])


def _call_encoder(encoder, profile, halves) -> np.ndarray:
    """(count, 16, 3) uint16 -> (count, 2) uint64: the blocks laid side by side as a picture of four rows."""
    count = len(halves)
    picture = np.full((4, count, 4, 4), _ONE, "<u2")
    picture[..., :3] = halves.reshape(count, 4, 4, 3).transpose(1, 0, 2, 3)
    surface = encoder.RGBASurface(picture.tobytes(), 4 * count, 4, 32 * count)
    blocks = encoder.compress_blocks_bc6h(surface, encoder.BC6HEncSettings.from_profile(profile))
    return np.frombuffer(blocks, "<u8").reshape(-1, 2)


def _encoder():
    try:
        import ispc_texcomp
    except ImportError as error:
        raise SkykilnError(
            "pixels: bc6h needs the package ispc_texcomp; install the extra: pip install 'skykiln[bc6h]'"
        ) from error
    return ispc_texcomp
