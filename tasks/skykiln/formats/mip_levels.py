"""Sizes of mip levels: level p of a texture is max(1, size >> p) texels wide."""


def level_size(width: int, height: int, level: int) -> tuple[int, int]:
    """(width, height) of a mip level."""
    return max(1, width >> level), max(1, height >> level)


def longest_chain(width: int, height: int) -> int:
    """Levels of a full chain, down to 1 x 1."""
    return max(width, height).bit_length()


def check_chain(levels, channels: int) -> tuple[int, int, int]:
    """(faces, height, width) of the base of a chain of (faces, height, width, channels) arrays.

    Raises: ValueError where they are no chain.
    """
    faces, height, width, _ = levels[0].shape
    if len(levels) > longest_chain(width, height):
        raise ValueError(f"{len(levels)} levels of {width} x {height}")
    for p, level in enumerate(levels):
        expected = (faces, *level_size(width, height, p)[::-1], channels)
        if level.shape != expected:
            raise ValueError(f"level {p} has the shape {level.shape}, not {expected}")
    return faces, height, width
