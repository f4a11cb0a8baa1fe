"""KTX2 textures: cube maps with mip levels, and 2-D tables (Khronos KTX 2.0 specification)."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.dfd import read_primaries, write_dfd
from skykiln.formats.key_values import read_key_values, write_key_values
from skykiln.formats.ktx2_layout import (
    PLAIN,
    ZSTANDARD,
    Header,
    LevelPlace,
    coding_name,
    index_end,
    level_alignment,
    place_levels,
    read_header,
    read_index,
    write_header,
    write_index,
)
from skykiln.formats.ktx2_rules import broken_ktx2_rules
from skykiln.formats.mip_levels import check_chain, level_size
from skykiln.formats.pixels import PIXELS
from skykiln.formats.zstandard_levels import compress_level, decompress_level


@dataclass(frozen=True, eq=False)
class Ktx2Texture:
    """A cube map (six faces) or a 2-D table (one face).

    pixels : a coding of `pixels.PIXELS`
    levels : one (faces, height, width, channels) float32 per mip level, the largest first; level p is
        max(1, size >> p) wide. Faces in the order +X -X +Y -Y +Z -Z of cube space, row 0 is t = 0.
    metadata : keys and values, text or bytes. KTXorientation is the writer's own and need not be given.
    primaries : of the colours, a name of `dfd.PRIMARIES`.
    """

    pixels: str
    levels: tuple[np.ndarray, ...]
    metadata: Mapping[str, str | bytes] = field(default_factory=dict)
    primaries: str = "rec709"


def write_ktx2(texture: Ktx2Texture, compress: int = 0) -> bytes:
    """The file's bytes: the same for the same texture, always.

    `compress` is 0 for none, or a level of Zstandard, 1 to 22: every mip level is then a frame of its own.
    """
    coding = PIXELS[texture.pixels]
    faces, height, width = check_chain(texture.levels, coding.channels)
    plain = [coding.encode(level).tobytes() for level in texture.levels]
    stored = [compress_level(level, compress) for level in plain] if compress else plain
    scheme = ZSTANDARD if compress else PLAIN
    dfd = write_dfd(coding, texture.primaries)
    pairs = write_key_values({**texture.metadata, "KTXorientation": "rd"})
    return assembled(coding, (faces, height, width), stored, plain, scheme, dfd, pairs)


def assembled(coding, shape, stored, plain, scheme, dfd, pairs) -> bytes:
    """A file from its parts.

    Parameters: shape : (faces, height, width) of the base level
                stored, plain : bytes of every level as they stand in the file, and inflated; the base first
                scheme : of supercompression; dfd, pairs : the descriptor's and the metadata's bytes
    """
    faces, height, width = shape
    start = index_end(len(stored))
    header = Header(
        coding.vk_format, coding.type_size, width, height, 0, 0, faces, len(stored), scheme,
        start, len(dfd), start + len(dfd), len(pairs), 0, 0,
    )  # fmt: skip
    lengths = [len(level) for level in stored]
    offsets = place_levels(start + len(dfd) + len(pairs), lengths, level_alignment(coding, scheme))
    index = [LevelPlace(o, n, len(p)) for o, n, p in zip(offsets, lengths, plain, strict=True)]
    out = bytearray(write_header(header) + write_index(index) + dfd + pairs)
    for offset, level in zip(offsets[::-1], stored[::-1], strict=True):
        out += bytes(offset - len(out)) + level
    return bytes(out)


def read_ktx2(data: bytes, name: str) -> Ktx2Texture:
    """Read a texture of one of our codings; nothing is allocated beyond what the file's size bears out.

    Raises: FileError with the file's name and the first rule that is broken.
    """
    for rule in broken_ktx2_rules(data):
        raise _broken(name, rule)
    header = read_header(data)
    pixels = coding_name(header.vkFormat)
    levels = []
    for level, place in enumerate(read_index(data, header.levelCount)):
        width, height = level_size(header.pixelWidth, header.pixelHeight, level)
        blocks = data[place.byteOffset : place.byteOffset + place.byteLength]
        if header.supercompressionScheme == ZSTANDARD:
            try:
                blocks = decompress_level(blocks, place.uncompressedByteLength)
            except ValueError as error:
                raise _broken(name, f"level {level}: {error}") from error
        levels.append(PIXELS[pixels].decode(blocks, (header.faceCount, height, width)))
    pairs = data[header.kvdByteOffset : header.kvdByteOffset + header.kvdByteLength]
    primaries = read_primaries(data[header.dfdByteOffset : header.dfdByteOffset + header.dfdByteLength])
    return Ktx2Texture(pixels, tuple(levels), read_key_values(pairs), primaries)


def _broken(name: str, rule: str) -> FileError:
    return FileError(f"{name}: not a sound KTX2 texture: {rule}; bake it again")
