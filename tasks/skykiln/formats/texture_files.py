"""Packed files of any container: read as one kind of texture, judged by one list of rules."""

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import NamedTuple

import numpy as np

from skykiln.errors import FileError
from skykiln.formats import dds, ktx2_layout
from skykiln.formats.bc6h_layout import MODES
from skykiln.formats.dds import broken_dds_rules, read_dds
from skykiln.formats.exr_levels import read_exr_levels
from skykiln.formats.ktx2 import read_ktx2
from skykiln.formats.ktx2_rules import broken_ktx2_rules
from skykiln.formats.pixels import PIXELS
from skykiln.formats.zstandard_levels import decompress_level

_MAGIC = {b"\xabKTX": "ktx2", b"DDS ": "dds", b"\x76\x2f\x31\x01": "exr"}
_READERS = {"ktx2": read_ktx2, "dds": read_dds, "exr": read_exr_levels}
# What OpenEXR's own reader finds wrong, `read_exr_levels` tells.
_RULES = {"ktx2": broken_ktx2_rules, "dds": broken_dds_rules, "exr": lambda data: ()}


class Texture(NamedTuple):
    """A cube map or a table.

    pixels : a coding of `pixels.PIXELS`, or of `exr_levels.EXR_PIXELS`
    levels : per mip level (faces, height, width, channels) float32, the largest first
    metadata : what the container keeps of keys and values
    """

    container: str
    pixels: str
    levels: tuple[np.ndarray, ...]
    metadata: Mapping[str, str | bytes]

    @property
    def gpu_bytes(self) -> int:
        """Bytes that a renderer's texture takes; none for OpenEXR, which no renderer loads."""
        if self.pixels not in PIXELS:
            return 0
        return sum(PIXELS[self.pixels].level_bytes(*level.shape[:3]) for level in self.levels)


def file_bytes(path: Path) -> bytes:
    """The bytes of a file.

    Raises: FileError with the cause
    """
    try:
        if path.exists() and not path.is_file():  # a pipe would never end
            raise FileError(f"{path}: is not a file; name a KTX2, DDS or OpenEXR file")
        return path.read_bytes()
    except OSError as error:
        raise FileError(f"{path}: can't be read: {error.strerror}; name a file that can") from error


def read_texture(data: bytes, name: str) -> Texture:
    """Read a packed file.

    Raises: FileError with the file's name and the first rule that is broken.
    """
    container = _container(data, name)
    texture = _READERS[container](data, name)
    return Texture(container, texture.pixels, texture.levels, getattr(texture, "metadata", {}))


def broken_rules(data: bytes, name: str) -> Iterator[str]:
    """Every rule that a packed file breaks: of its container, then of its pixels.

    Raises: FileError where it is no packed file at all.
    """
    container = _container(data, name)
    broken = list(_RULES[container](data))
    yield from broken
    if broken:
        return
    try:
        texture = read_texture(data, name)
    except FileError as error:
        yield str(error).removeprefix(f"{name}: ")
        return
    if texture.pixels == "bc6h":
        yield from _broken_block_rules(container, data)
    for number, level in enumerate(texture.levels):
        yield from _broken_pixel_rules(level, number)


def header_fields(data: bytes, name: str) -> dict:
    """The header's fields by the names of the container's own specification; of a sound file."""
    container = _container(data, name)
    if container == "exr":
        return {}
    header = dds.read_header(data) if container == "dds" else ktx2_layout.read_header(data)
    return header._asdict()


def _broken_block_rules(container, data) -> Iterator[str]:
    """Blocks of BC6H that bear a reserved mode: decoders make them black (KDF 20.2)."""
    blocks = np.frombuffer(b"".join(_stored_levels(container, data)), np.uint8).reshape(-1, 16)
    first = blocks[:, 0]
    mode = np.where(first & 3 < 2, first & 3, first & 31)
    count = int((~np.isin(mode, list(MODES))).sum())
    if count:
        yield f"{count} BC6H blocks have a reserved mode"


def _stored_levels(container, data):
    """Bytes of blocks, level by level or face by face."""
    if container == "dds":
        return [data[dds.HEADER_BYTES :]]
    header = ktx2_layout.read_header(data)
    stored = [
        (data[place.byteOffset : place.byteOffset + place.byteLength], place.uncompressedByteLength)
        for place in ktx2_layout.read_index(data, header.levelCount)
    ]
    if header.supercompressionScheme == ktx2_layout.PLAIN:
        return [level for level, _ in stored]
    return [decompress_level(level, size) for level, size in stored]


def _broken_pixel_rules(level, number) -> Iterator[str]:
    for what, wrong in (
        ("NaN", np.isnan(level)),
        ("infinite", np.isinf(level)),
        ("negative", level < 0),
    ):
        count = int(wrong.any(-1).sum())
        if count:
            yield f"level {number}: {count} texels are {what}"


def _container(data, name):
    container = _MAGIC.get(data[:4])
    if container is None:
        raise FileError(f"{name}: neither KTX2, nor DDS, nor OpenEXR, by its first bytes; name a packed file")
    return container
