"""Small copies of a chain, to tell how it looks and what changed: level by level, by block means."""

import numpy as np

LARGEST_FACE = 32  # texels of a face
_STEPS, _STOPS_BELOW = np.float32(1024), np.float32(24)
_DARKEST = np.float32(2.0**-24)


def thumbnail_size(size):
    """Edge of the copy of a face of `size` texels: the largest part of it by whole steps, 32 at most."""
    return size // -(-size // LARGEST_FACE)


def thumbnails(levels):
    """Copies of levels (6, n, n, 3), in their order: (6, m, m, 3) float32, m at most `LARGEST_FACE`."""
    return [block_means(level, -(-level.shape[1] // LARGEST_FACE)) for level in levels]


def block_means(images, step):
    """Means over blocks of step x step, whole ones alone. (k, h, w, c) -> (k, h // step, w // step, c)."""
    count, height, width, channels = images.shape
    rows, columns = height // step, width // step
    if step == 1:
        return images
    cut = np.ascontiguousarray(images[:, : rows * step, : columns * step])
    # Down first, whole rows at a time: many times quicker than both axes at once.
    down = cut.reshape(count, rows, step, columns * step * channels).sum(2)
    return down.reshape(count, rows, columns, step, channels).sum(3) / images.dtype.type(step * step)


def stored(copies):
    """All copies in one array (texels, 3) uint16: logarithms in steps of 1/1024 stop, 0.07 %, from 2^-24 to
    2^40; 0 is what is darker."""
    values = np.concatenate([copy.reshape(-1, copy.shape[-1]) for copy in copies])
    codes = (np.log2(np.maximum(values, _DARKEST / 2)) + _STOPS_BELOW) * _STEPS
    return np.rint(np.clip(codes, 0, 65535)).astype(np.uint16)


def restored(codes, face_sizes):
    """The copies that `stored` put together, of a chain with such faces.

    Raises: ValueError where the number of texels is another
    """
    edges = [thumbnail_size(size) for size in face_sizes]
    ends = np.cumsum([6 * edge * edge for edge in edges])
    if codes.shape != (ends[-1], 3):
        raise ValueError(f"{codes.shape} are not the copies of faces of {face_sizes}")
    values = np.exp2(codes.astype(np.float32) / _STEPS - _STOPS_BELOW)
    parts = np.split(np.where(codes == 0, np.float32(0), values), ends[:-1])
    return [part.reshape(6, edge, edge, 3) for part, edge in zip(parts, edges, strict=True)]
