"""The rules a KTX2 file must keep to be read, each named as the KTX 2.0 specification names it.

The files that are read are what we write: cube maps and 2-D textures of the codings in
`pixels.PIXELS`, without array layers and depth. For those the specification fixes the place of every
byte, so each is checked.
"""

from collections.abc import Iterator

from skykiln.formats.dfd import broken_dfd_rules
from skykiln.formats.key_values import broken_key_value_rules
from skykiln.formats.ktx2_layout import (
    HEADER_BYTES,
    IDENTIFIER,
    PLAIN,
    ZSTANDARD,
    Header,
    coding_name,
    index_end,
    level_alignment,
    level_lengths,
    place_levels,
    read_header,
    read_index,
)
from skykiln.formats.mip_levels import longest_chain
from skykiln.formats.pixels import PIXELS, Coding
from skykiln.formats.zstandard_levels import broken_frame_rules

MAX_BYTES = 1 << 32  # a chain of 8192 x 8192 half-float faces fits


def broken_ktx2_rules(data: bytes) -> Iterator[str]:
    """Every broken rule in words, in the file's order; none for a sound file. Where a broken rule makes
    what follows meaningless, the list ends."""
    if data[: len(IDENTIFIER)] != IDENTIFIER:
        yield "identifier: the first 12 bytes are not those of KTX 2.0"
        return
    if len(data) < HEADER_BYTES:
        yield f"header: the file ends after {len(data)} bytes, inside the header"
        return
    header = read_header(data)
    for rules in (_header_rules(header), _place_rules(header, data)):
        broken = list(rules)
        yield from broken
        if broken:
            return
    coding = PIXELS[coding_name(header.vkFormat)]
    kvd_end = header.kvdByteOffset + header.kvdByteLength
    yield from broken_dfd_rules(data[header.dfdByteOffset :][: header.dfdByteLength], coding)
    yield from broken_key_value_rules(data[header.kvdByteOffset : kvd_end] if kvd_end else b"")
    yield from _level_rules(header, coding, data)


def _header_rules(h: Header) -> Iterator[str]:
    name = coding_name(h.vkFormat)
    if name is None:
        yield f"vkFormat {h.vkFormat} is none of {', '.join(str(c.vk_format) for c in PIXELS.values())}"
    elif h.typeSize != PIXELS[name].type_size:
        yield f"typeSize is {h.typeSize}, not the {PIXELS[name].type_size} of vkFormat {h.vkFormat}"
    if h.pixelWidth < 1 or h.pixelHeight < 1:
        yield f"pixelWidth and pixelHeight must not be 0, but are {h.pixelWidth} x {h.pixelHeight}"
    if h.faceCount not in (1, 6):
        yield f"faceCount must be 6 or 1, but is {h.faceCount}"
    if h.faceCount == 6 and h.pixelWidth != h.pixelHeight:
        yield f"a cube map's faces must be square, but are {h.pixelWidth} x {h.pixelHeight}"
    if h.pixelDepth != 0:
        yield f"pixelDepth must be 0, but is {h.pixelDepth}"
    if h.layerCount != 0:
        yield f"layerCount must be 0, but is {h.layerCount}"
    most = longest_chain(h.pixelWidth, h.pixelHeight)
    if not 1 <= h.levelCount <= most:
        yield f"levelCount must be 1 to {most} for {h.pixelWidth} x {h.pixelHeight}, but is {h.levelCount}"
    if h.supercompressionScheme not in (PLAIN, ZSTANDARD):
        yield f"supercompressionScheme must be 0 or 2 (Zstandard), but is {h.supercompressionScheme}"


def _place_rules(h: Header, data: bytes) -> Iterator[str]:
    """The three sections before the levels: each begins where the one before it ends."""
    start = index_end(h.levelCount)
    if start > len(data):
        yield f"levels: the file ends after {len(data)} bytes, inside the level index"
    if h.dfdByteOffset != start:
        yield f"dfdByteOffset is {h.dfdByteOffset}, not {start} where the level index ends"
    dfd_end = start + h.dfdByteLength
    if h.kvdByteLength == 0 and h.kvdByteOffset != 0:
        yield f"kvdByteOffset must be 0 without key/value data, but is {h.kvdByteOffset}"
    if h.kvdByteLength and h.kvdByteOffset != dfd_end:
        yield f"kvdByteOffset is {h.kvdByteOffset}, not {dfd_end} where the DFD ends"
    if dfd_end + h.kvdByteLength > len(data):
        yield f"the file ends after {len(data)} bytes, inside its DFD or key/value data"
    if h.sgdByteOffset or h.sgdByteLength:
        yield "sgdByteOffset and sgdByteLength must be 0 for this supercompressionScheme"


def _level_rules(h: Header, coding: Coding, data: bytes) -> Iterator[str]:
    places, sizes = read_index(data, h.levelCount), level_lengths(h, coding)
    plain = h.supercompressionScheme == PLAIN
    lengths = sizes if plain else [place.byteLength for place in places]
    end = h.dfdByteOffset + h.dfdByteLength + h.kvdByteLength
    offsets = place_levels(end, lengths, level_alignment(coding, h.supercompressionScheme))
    if sum(sizes) > MAX_BYTES:
        yield f"its levels hold {sum(sizes)} bytes, more than the {MAX_BYTES} that are read"
    for p in reversed(range(h.levelCount)):
        place = places[p]
        if place.byteLength != lengths[p]:
            yield f"level {p}: byteLength is {place.byteLength}, not {lengths[p]}"
        if place.uncompressedByteLength != sizes[p]:
            yield f"level {p}: uncompressedByteLength is {place.uncompressedByteLength}, not {sizes[p]}"
        if place.byteOffset != offsets[p]:
            yield f"level {p}: byteOffset is {place.byteOffset}, not {offsets[p]} (smallest level first)"
        if any(data[end : offsets[p]]):
            yield f"level {p}: the mipPadding before it is not zero"
        end = offsets[p] + lengths[p]
        if not plain:
            yield from broken_frame_rules(data[offsets[p] : end], sizes[p], p)
    if len(data) < end:
        yield f"the file ends after {len(data)} bytes, inside its levels, which end at {end}"
    if len(data) > end:
        yield f"{len(data) - end} bytes stand behind the base level"
