"""DDS textures with the DX10 header: cube maps with mip levels, and 2-D tables.

Source: Microsoft, "Programming Guide for DDS", DDS_HEADER and DDS_HEADER_DXT10. The data lies face by
face, each face with all of its levels, the largest first; rows are tight and nothing follows. The form
knows neither metadata nor colour spaces nor compression on top.
"""

import struct
from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.mip_levels import check_chain, level_size, longest_chain
from skykiln.formats.pixels import PIXELS, Coding

_MAGIC = b"DDS "
# dwSize to dwReserved1[11]; the pixel format; dwCaps to dwReserved2; the DX10 header.
_LAYOUT = struct.Struct("<7I44x 2I4s20x 5I 5I")
HEADER_BYTES = len(_MAGIC) + _LAYOUT.size
_CAPS_HEIGHT_WIDTH_FORMAT, _PITCH, _MIPS, _LINEAR_SIZE = 0x1007, 0x8, 0x20000, 0x80000
_FOURCC = 0x4
_TEXTURE, _COMPLEX, _MIPMAP = 0x1000, 0x8, 0x400000
_ALL_FACES = 0xFE00  # DDSCAPS2_CUBEMAP and its six faces
_TEXTURE_2D, _TEXTURE_CUBE = 3, 4  # resourceDimension, miscFlag


class DdsTexture(NamedTuple):
    """A coding of `pixels.PIXELS`, and per level (faces, height, width, channels) float32, as in KTX2."""

    pixels: str
    levels: tuple[np.ndarray, ...]


class Header(NamedTuple):
    """By Microsoft's names, in the file's order."""

    dwSize: int
    dwFlags: int
    dwHeight: int
    dwWidth: int
    dwPitchOrLinearSize: int
    dwDepth: int
    dwMipMapCount: int
    ddspf_dwSize: int
    ddspf_dwFlags: int
    ddspf_dwFourCC: bytes
    dwCaps: int
    dwCaps2: int
    dwCaps3: int
    dwCaps4: int
    dwReserved2: int
    dxgiFormat: int
    resourceDimension: int
    miscFlag: int
    arraySize: int
    miscFlags2: int


def read_header(data: bytes) -> Header:
    """The headers of data that holds them."""
    return Header(*_LAYOUT.unpack_from(data, len(_MAGIC)))


def write_dds(texture: DdsTexture) -> bytes:
    """The file's bytes: six faces make a cube map, one a 2-D texture."""
    coding = PIXELS[texture.pixels]
    faces, height, width = check_chain(texture.levels, coding.channels)
    header = _header(coding, faces, width, height, len(texture.levels))
    levels = [coding.encode(level).tobytes() for level in texture.levels]
    parts = [_share(level, face, faces) for face in range(faces) for level in levels]
    return _MAGIC + _LAYOUT.pack(*header) + b"".join(parts)


def read_dds(data: bytes, name: str) -> DdsTexture:
    """Read a texture of one of our codings.

    Raises: FileError with the file's name and the first rule that is broken.
    """
    for rule in broken_dds_rules(data):
        raise FileError(f"{name}: not a sound DDS texture: {rule}; bake it again")
    header = read_header(data)
    pixels, faces = _coding_name(header.dxgiFormat), _faces(header)
    coding, start = PIXELS[pixels], HEADER_BYTES
    images = [[] for _ in range(header.dwMipMapCount)]
    for _ in range(faces):
        for level, parts in enumerate(images):
            width, height = level_size(header.dwWidth, header.dwHeight, level)
            end = start + coding.level_bytes(1, height, width)
            parts.append(coding.decode(data[start:end], (1, height, width)))
            start = end
    return DdsTexture(pixels, tuple(np.concatenate(parts) for parts in images))


def broken_dds_rules(data: bytes) -> Iterator[str]:
    """Every broken rule in words; none for a sound file."""
    if data[:4] != _MAGIC:
        yield "the file does not begin with 'DDS '"
        return
    if len(data) < HEADER_BYTES:
        yield f"the file ends after {len(data)} bytes, inside its headers"
        return
    header = read_header(data)
    broken = list(_size_rules(header))
    yield from broken
    if broken:
        return
    coding = PIXELS[_coding_name(header.dxgiFormat)]
    expected = _header(coding, _faces(header), header.dwWidth, header.dwHeight, header.dwMipMapCount)
    for field, found, wanted in zip(Header._fields, header, expected, strict=True):
        if found != wanted and not (field == "miscFlags2" and found == 3):  # 3: opaque
            yield f"{field} is {_shown(found)}, not {_shown(wanted)}"
    size = HEADER_BYTES + _faces(header) * sum(_level_lengths(coding, header))
    if len(data) != size:
        yield f"the file has {len(data)} bytes, not the {size} that its headers ask for"


def _size_rules(h: Header) -> Iterator[str]:
    """What the expected header and the length of the data are worked out from."""
    if _coding_name(h.dxgiFormat) is None:
        yield f"dxgiFormat {h.dxgiFormat} is none of {', '.join(str(c.dxgi_format) for c in PIXELS.values())}"
    if h.dwWidth < 1 or h.dwHeight < 1:
        yield f"dwWidth and dwHeight must not be 0, but are {h.dwWidth} x {h.dwHeight}"
    if h.miscFlag not in (0, _TEXTURE_CUBE):
        yield f"miscFlag must be 0 or 4 (cube map), but is {h.miscFlag}"
    if h.miscFlag == _TEXTURE_CUBE and h.dwWidth != h.dwHeight:
        yield f"a cube map's faces must be square, but are {h.dwWidth} x {h.dwHeight}"
    most = longest_chain(h.dwWidth, h.dwHeight)
    if not 1 <= h.dwMipMapCount <= most:
        yield f"dwMipMapCount must be 1 to {most} for {h.dwWidth} x {h.dwHeight}, but is {h.dwMipMapCount}"


def _header(coding: Coding, faces: int, width: int, height: int, levels: int) -> Header:
    plain = coding.block_side == 1
    flags = _CAPS_HEIGHT_WIDTH_FORMAT | (_PITCH if plain else _LINEAR_SIZE) | (_MIPS if levels > 1 else 0)
    caps = _TEXTURE | (_COMPLEX if faces == 6 or levels > 1 else 0) | (_MIPMAP if levels > 1 else 0)
    pitch = coding.level_bytes(1, 1 if plain else height, width)
    return Header(
        124, flags, height, width, pitch, 0, levels,
        32, _FOURCC, b"DX10",
        caps, _ALL_FACES if faces == 6 else 0, 0, 0, 0,
        coding.dxgi_format, _TEXTURE_2D, _TEXTURE_CUBE if faces == 6 else 0, 1, 0,
    )  # fmt: skip


def _level_lengths(coding: Coding, header: Header) -> list[int]:
    sizes = (level_size(header.dwWidth, header.dwHeight, p) for p in range(header.dwMipMapCount))
    return [coding.level_bytes(1, height, width) for width, height in sizes]


def _share(level: bytes, face: int, faces: int) -> bytes:
    """One face's bytes of a level of all faces."""
    size = len(level) // faces
    return level[face * size : (face + 1) * size]


def _coding_name(dxgi_format: int) -> str | None:
    return next((name for name, coding in PIXELS.items() if coding.dxgi_format == dxgi_format), None)


def _faces(header: Header) -> int:
    return 6 if header.miscFlag == _TEXTURE_CUBE else 1


def _shown(value: int | bytes) -> str:
    return repr(value) if isinstance(value, bytes) else f"{value:#x}"
