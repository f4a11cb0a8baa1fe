"""KTX2 files: typed bytes, a second parser written from the specification, round trips, broken files."""

import struct

import imagecodecs
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.errors import FileError
from skykiln.formats.dfd import write_dfd
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2, write_ktx2
from skykiln.formats.ktx2_rules import broken_ktx2_rules
from skykiln.formats.pixels import PIXELS

METADATA = {"KTXwriter": "skykiln 0.1.0", "skykiln:probe": '{"name":"ferry_noon"}'}


def chain(pixels="rgba16f", size=8, levels=None, seed=0, faces=6):
    """A texture of random levels."""
    rng = np.random.default_rng(seed)
    sizes = [size >> p for p in range(levels or size.bit_length())]
    channels = PIXELS[pixels].channels
    return Ktx2Texture(
        pixels, tuple(rng.random((faces, n, n, channels), np.float32) for n in sizes), METADATA
    )


def test_smallest_cube_map_has_these_bytes():
    levels = (np.float32([[[[f, 1, 2]]] for f in range(6)]),)
    words = [97, 2, 1, 1, 0, 0, 6, 1, 0]  # vkFormat, typeSize, w, h, depth, layers, faces, levels, scheme
    # Header 80, index 24, DFD 92, key/value 24: the level starts at 220, padded to 224.
    expected = b"\xabKTX 20\xbb\r\n\x1a\n" + struct.pack("<9I", *words)
    expected += struct.pack("<4I2Q", 104, 92, 196, 24, 0, 0) + struct.pack("<3Q", 224, 48, 48)
    expected += write_dfd(PIXELS["rgba16f"], "rec709")
    expected += b"\x12\0\0\0KTXorientation\0rd\0\0\0" + bytes(4)
    for red in ("0000", "003c", "0040", "0042", "0044", "0045"):
        expected += bytes.fromhex(red + "003c 0040 003c")
    assert write_ktx2(Ktx2Texture("rgba16f", levels)) == expected


@pytest.mark.parametrize(("pixels", "vk_format"), [("rg16f", 83), ("r16f", 76)])
def test_table_is_one_face_of_one_or_two_channels(pixels, vk_format):
    table = chain(pixels, 4, levels=1, faces=1)
    data = write_ktx2(table)
    assert struct.unpack_from("<9I", data, 12) == (vk_format, 2, 4, 4, 0, 0, 1, 1, 0)
    np.testing.assert_array_equal(read_ktx2(data, "t").levels[0], np.float16(table.levels[0]))


def parse_from_the_specification(data):
    """(header words, levels as float16, keys): KTX 2.0 chapter "File Structure", read without our code."""
    assert data[:12] == bytes.fromhex("AB4B5458203230BB0D0A1A0A")
    words = struct.unpack_from("<13I2Q", data, 12)
    _, _, width, height, _, _, faces, count, _, dfd, dfd_size, kvd, kvd_size, _, _ = words
    assert struct.unpack_from("<I", data, dfd)[0] == dfd_size
    levels = []
    for p in range(count):
        offset, length, _ = struct.unpack_from("<3Q", data, 80 + 24 * p)
        shape = (faces, max(1, height >> p), max(1, width >> p), -1)
        levels.append(np.frombuffer(data[offset : offset + length], np.float16).reshape(shape))
    keys, end = {}, kvd + kvd_size
    while kvd < end:
        (size,) = struct.unpack_from("<I", data, kvd)
        key, _, value = data[kvd + 4 : kvd + 4 + size].partition(b"\0")
        keys[key.decode()] = value
        kvd += 4 + (size + 3) // 4 * 4
    return words, levels, keys


@pytest.mark.parametrize("pixels", ["rgba16f", "rg16f"])
def test_second_parser_finds_levels_faces_and_keys(pixels):
    texture = chain(pixels, 16)
    _, levels, keys = parse_from_the_specification(write_ktx2(texture))
    for ours, theirs in zip(texture.levels, levels, strict=True):
        np.testing.assert_array_equal(theirs[..., : ours.shape[-1]], np.float16(ours))
    assert pixels == "rg16f" or (levels[0][..., 3] == 1).all()
    assert list(keys) == ["KTXorientation", "KTXwriter", "skykiln:probe"]
    assert keys["KTXorientation"] == b"rd\0"
    assert keys["skykiln:probe"] == METADATA["skykiln:probe"].encode() + b"\0"


def test_smallest_level_comes_first_in_the_file_and_nothing_follows_the_base():
    data = write_ktx2(chain(size=8))
    places = [struct.unpack_from("<3Q", data, 80 + 24 * p) for p in range(4)]
    assert [length for _, length, _ in places] == [6 * 8 * n * n for n in (8, 4, 2, 1)]
    assert [offset for offset, _, _ in places] == sorted((o for o, _, _ in places), reverse=True)
    assert all(offset % 8 == 0 for offset, _, _ in places)
    assert places[0][0] + places[0][1] == len(data)


def test_same_texture_gives_the_same_bytes_whatever_the_order_of_its_keys():
    turned = dict(reversed(METADATA.items()))
    texture = chain()
    assert write_ktx2(texture) == write_ktx2(Ktx2Texture(texture.pixels, texture.levels, turned))


@settings(max_examples=30, deadline=None)
@given(
    pixels=st.sampled_from(sorted(PIXELS)),
    width=st.integers(1, 40),
    height=st.integers(1, 40),
    cube=st.booleans(),
    compress=st.sampled_from([0, 1, 3]),
    data=st.data(),
)
def test_texture_survives(pixels, width, height, cube, compress, data):
    if pixels == "bc6h":
        width, height = width % 9 + 1, height % 9 + 1
    height = width if cube else height
    count = data.draw(st.integers(1, max(width, height).bit_length()))
    rng = np.random.default_rng(count)
    shape = 6 if cube else 1, PIXELS[pixels].channels
    levels = tuple(
        rng.random((shape[0], max(1, height >> p), max(1, width >> p), shape[1]), np.float32)
        for p in range(count)
    )
    written = write_ktx2(Ktx2Texture(pixels, levels, METADATA, "rec2020"), compress)
    assert list(broken_ktx2_rules(written)) == []
    texture = read_ktx2(written, "sky")
    assert texture.pixels == pixels
    assert texture.primaries == "rec2020"
    assert texture.metadata == {**METADATA, "KTXorientation": "rd"}
    for level, original in zip(texture.levels, levels, strict=True):
        decoded = PIXELS[pixels].decode(PIXELS[pixels].encode(original).tobytes(), original.shape[:3])
        np.testing.assert_array_equal(level, decoded)
    # What was decoded is coded again without loss, except by BC6H's encoder.
    assert pixels == "bc6h" or write_ktx2(texture, compress) == written


def test_levels_that_are_no_chain_are_refused():
    levels = (np.zeros((6, 8, 8, 3), np.float32), np.zeros((6, 3, 3, 3), np.float32))
    with pytest.raises(ValueError, match="level 1"):
        write_ktx2(Ktx2Texture("rgba16f", levels))


@pytest.mark.parametrize("compress", [0, 3])
def test_every_truncation_is_an_error(compress):
    data = write_ktx2(chain(size=4), compress)
    for end in range(len(data)):
        with pytest.raises(FileError, match=r"^sky\.ktx2: .*(ends|identifier|inside|Zstandard)"):
            read_ktx2(data[:end], "sky.ktx2")


# Offsets of an 8 x 8 chain of 4 levels: index at 80, DFD at 176, key/value data at 268.
def word(offset, value):
    return lambda data: data[:offset] + struct.pack("<I", value) + data[offset + 4 :]


def long_word(offset, value):
    return lambda data: data[:offset] + struct.pack("<Q", value) + data[offset + 8 :]


def byte(offset, value):
    return lambda data: data[:offset] + bytes([value]) + data[offset + 1 :]


MUTATIONS = [
    (byte(0, 0x2B), "identifier"),
    (byte(5, ord("1")), "identifier"),
    (byte(6, ord("1")), "identifier"),
    (byte(10, 0x0A), "identifier"),
    (word(12, 0), "vkFormat 0 "),
    (word(12, 131), "vkFormat 131"),
    (word(12, 37), "vkFormat 37"),
    (word(12, 0xFFFFFFFF), "vkFormat"),
    (word(12, 83), "DFD|dfdByteLength|byteLength"),
    (word(16, 1), "typeSize"),
    (word(16, 8), "typeSize"),
    (word(20, 0), "pixelWidth"),
    (word(20, 7), "square"),
    (word(20, 0xFFFFFFFF), "square"),
    (word(24, 0), "pixelHeight"),
    (word(24, 16), "square"),
    (lambda data: word(24, 1 << 31)(word(20, 1 << 31)(data)), "more than the 4294967296"),
    (lambda data: word(24, 16)(word(20, 16)(data)), "byteLength"),
    (word(28, 1), "pixelDepth"),
    (word(28, 6), "pixelDepth"),
    (word(32, 1), "layerCount"),
    (word(32, 6), "layerCount"),
    (word(36, 0), "faceCount"),
    (word(36, 1), "byteLength"),
    (word(36, 5), "faceCount"),
    (word(36, 12), "faceCount"),
    (word(40, 0), "levelCount"),
    (word(40, 3), "dfdByteOffset"),
    (word(40, 5), "levelCount"),
    (word(40, 0xFFFFFFFF), "levelCount"),
    (word(44, 1), "supercompressionScheme"),
    (word(44, 3), "supercompressionScheme"),
    (word(44, 7), "supercompressionScheme"),
    (word(48, 0), "dfdByteOffset"),
    (word(48, 180), "dfdByteOffset"),
    (word(52, 0), "kvdByteOffset"),
    (word(52, 88), "kvdByteOffset"),
    (word(52, 0x7FFFFFFF), "ends|kvdByteOffset"),
    (word(56, 0), "kvdByteOffset"),
    (word(56, 272), "kvdByteOffset"),
    (word(60, 0), "kvdByteOffset"),
    (word(60, 4), "key/value data|byteOffset"),
    (word(60, 0xFFFFFFFF), "ends after"),
    (long_word(64, 300), "sgdByteOffset"),
    (long_word(72, 8), "sgdByteOffset"),
    (long_word(80, 0), "level 0: byteOffset"),
    (long_word(80, 1 << 63), "level 0: byteOffset"),
    (long_word(88, 1), "level 0: byteLength"),
    (long_word(88, 0xFFFFFFFFFFFFFFFF), "level 0: byteLength"),
    (long_word(96, 0), "level 0: uncompressedByteLength"),
    (long_word(96, 1 << 62), "level 0: uncompressedByteLength"),
    (long_word(104, 8), "level 1: byteOffset"),
    (lambda data: data[:80] + data[104:128] + data[80:104] + data[128:], "level 1: byteLength"),
    (word(176, 91), "DFD dfdTotalSize"),
    (word(180, 1), "DFD vendorId"),
    (byte(184, 1), "DFD versionNumber"),
    (byte(186, 90), "DFD descriptorBlockSize"),
    (byte(188, 2), "DFD colorModel"),
    (byte(190, 2), "DFD transferFunction"),
    (byte(191, 1), "DFD flags"),
    (byte(192, 3), "DFD texelBlockDimension"),
    (byte(196, 0), "DFD bytesPlane"),
    (byte(204, 16), "DFD sample 0 bitOffset"),
    (byte(206, 16), "DFD sample 0 bitLength"),
    (byte(255, 0xC3), "DFD sample 3 channelType"),
    (word(268, 0), "key/value"),
    (word(268, 0xFFFFFFFF), "key/value"),
    (byte(272, ord("L")), "not sorted"),
    (byte(287, ord("l")), "KTXorientation"),
    (byte(288, ord("u")), "KTXorientation"),
    (byte(286, ord("x")), "no key|KTX"),
    (byte(290, 1), "padding"),
    (lambda data: data + b"\0", "behind the base"),
    (lambda data: data[:-1], "ends after"),
    (lambda data: data[:79], "header"),
    (lambda data: data[:100], "level index"),
    (lambda data: data[:200], "inside its DFD"),
    (lambda data: b"", "identifier"),
]


@pytest.mark.parametrize("number", range(len(MUTATIONS)))
def test_broken_rule_is_named(number):
    change, words = MUTATIONS[number]
    data = write_ktx2(chain(size=8))
    with pytest.raises(FileError, match=words) as error:
        read_ktx2(change(data), "probes/sky.ktx2")
    assert str(error.value).startswith("probes/sky.ktx2: ")


def test_packed_levels_are_frames_without_padding_that_another_reader_unpacks():
    texture = chain(size=8)
    packed, plain = write_ktx2(texture, 3), write_ktx2(texture)
    words = struct.unpack_from("<13I2Q", packed, 12)
    assert words[8] == 2
    assert words[:8] + words[9:13] == struct.unpack_from("<13I", plain, 12)[:8] + words[9:13]
    end = words[11] + words[12]
    for p in reversed(range(4)):
        offset, length, size = struct.unpack_from("<3Q", packed, 80 + 24 * p)
        assert offset == end
        end = offset + length
        plain_offset, _, plain_size = struct.unpack_from("<3Q", plain, 80 + 24 * p)
        assert size == plain_size
        level = imagecodecs.zstd_decode(packed[offset:end])
        assert level == plain[plain_offset : plain_offset + plain_size]
    assert end == len(packed)


# Offsets in a packed 8 x 8 chain: the first frame, of the smallest level, stands at the end of the keys.
PACKED_MUTATIONS = [
    (word(44, 0), "byteLength"),
    (word(44, 1), "supercompressionScheme"),
    (long_word(96, 0), "level 0: uncompressedByteLength"),
    (long_word(96, 1 << 40), "level 0: uncompressedByteLength"),
    (long_word(88, 5), "Zstandard|byteOffset|behind"),
    (long_word(88, 1 << 60), "Zstandard|ends after"),
    (lambda data: word(24, 1 << 20)(word(20, 1 << 20)(data)), "more than the 4294967296"),
    (lambda data: word(24, 1 << 12)(word(20, 1 << 12)(data)), "uncompressedByteLength|levelCount"),
    (lambda data: data[: frame(data, 3)] + b"\0" + data[frame(data, 3) + 1 :], "level 3: .* magic"),
    (lambda data: byte(frame(data, 0) + 5, 0xFF)(data), "level 0: its Zstandard frame"),
    (lambda data: byte(len(data) - 3, data[-3] ^ 0xFF)(data), "level 0"),
    (lambda data: data[:-5], "ends after"),
    (lambda data: data + b"\0", "behind the base"),
]


def frame(data, level):
    return struct.unpack_from("<Q", data, 80 + 24 * level)[0]


@pytest.mark.parametrize("number", range(len(PACKED_MUTATIONS)))
def test_broken_rule_of_packed_levels_is_named(number):
    change, words = PACKED_MUTATIONS[number]
    data = write_ktx2(Ktx2Texture("rgba16f", tuple(np.ones((6, n, n, 3), "f4") for n in (8, 4, 2, 1))), 3)
    with pytest.raises(FileError, match=words) as error:
        read_ktx2(change(data), "probes/sky.ktx2")
    assert str(error.value).startswith("probes/sky.ktx2: ")


def test_frame_that_claims_more_than_it_can_hold_takes_no_memory():
    # A frame header with a content size of 6 * 16384^2 * 2 bytes and nothing behind it.
    level = np.zeros((1, 1, 1, 2), np.float32)
    data = bytearray(write_ktx2(Ktx2Texture("rg16f", (level,)), 3))
    start, size = frame(data, 0), 4 * 16384 * 16384
    struct.pack_into("<II", data, 20, 16384, 16384)
    data[start:] = b"\x28\xb5\x2f\xfd\xe0" + struct.pack("<Q", size)
    struct.pack_into("<QQ", data, 88, len(data) - start, size)
    with pytest.raises(FileError, match="can't hold"):
        read_ktx2(bytes(data), "sky")


def test_mip_padding_must_be_zero():
    data = write_ktx2(Ktx2Texture("rgba16f", chain(size=1).levels))
    assert data[220:224] == bytes(4)
    with pytest.raises(FileError, match="mipPadding"):
        read_ktx2(byte(221, 9)(data), "sky.ktx2")


def test_all_broken_rules_of_a_header_are_listed():
    data = word(28, 1)(word(32, 1)(word(16, 4)(write_ktx2(chain()))))
    assert [rule.split()[0] for rule in broken_ktx2_rules(data)] == ["typeSize", "pixelDepth", "layerCount"]


@settings(max_examples=150, deadline=None)
@given(offset=st.integers(0, 1023), value=st.integers(0, 255))
def test_any_changed_byte_before_the_levels_is_refused_or_only_metadata_or_primaries(offset, value):
    texture = chain(size=2)
    data = write_ktx2(texture)
    start = struct.unpack_from("<Q", data, 80 + 24)[0]
    offset %= start
    try:
        changed = read_ktx2(byte(offset, value)(data), "sky")
    except FileError:
        return
    assert [level.shape for level in changed.levels] == [level.shape for level in texture.levels]
    sound = read_ktx2(data, "sky")
    told = (changed.metadata, changed.primaries) != (sound.metadata, sound.primaries)
    assert told == (data[offset] != value)


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=300))
def test_any_bytes_behind_the_identifier_are_refused(tail):
    with pytest.raises(FileError):
        read_ktx2(write_ktx2(chain(size=1))[:12] + tail, "sky")
