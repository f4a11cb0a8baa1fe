"""A KTX2 file written again without supercompression, its blocks untouched: for readers without Zstandard."""

from collections.abc import Mapping

from skykiln.errors import FileError
from skykiln.formats.key_values import write_key_values
from skykiln.formats.ktx2 import assembled
from skykiln.formats.ktx2_layout import PLAIN, coding_name, read_header, read_index
from skykiln.formats.ktx2_rules import broken_ktx2_rules
from skykiln.formats.mip_levels import level_size
from skykiln.formats.pixels import PIXELS
from skykiln.formats.zstandard_levels import decompress_level


def plain_copy(data: bytes, name: str, first: int, metadata: Mapping[str, str | bytes]) -> bytes:
    """The levels from `first` on, as they are once inflated.

    `metadata` takes the place of the file's own; KTXorientation need not be given.

    Raises: FileError with the file's name and the first rule that is broken.
    """
    for rule in broken_ktx2_rules(data):
        raise FileError(f"{name}: not a sound KTX2 texture: {rule}; bake it again")
    header = read_header(data)
    levels = []
    for level, place in enumerate(read_index(data, header.levelCount)):
        blocks = data[place.byteOffset : place.byteOffset + place.byteLength]
        if header.supercompressionScheme != PLAIN and level >= first:
            try:
                blocks = decompress_level(blocks, place.uncompressedByteLength)
            except ValueError as error:
                raise FileError(f"{name}: level {level}: {error}; bake it again") from error
        levels.append(blocks)
    dfd = data[header.dfdByteOffset : header.dfdByteOffset + header.dfdByteLength]
    width, height = level_size(header.pixelWidth, header.pixelHeight, first)
    shape = (header.faceCount, height, width)
    pairs = write_key_values({**metadata, "KTXorientation": "rd"})
    kept = levels[first:]
    return assembled(PIXELS[coding_name(header.vkFormat)], shape, kept, kept, PLAIN, dfd, pairs)
