"""Data format descriptors, byte for byte as the Khronos Data Format specification 1.4 has them."""

import pytest

from skykiln.formats.dfd import PRIMARIES, broken_dfd_rules, read_primaries, write_dfd
from skykiln.formats.pixels import PIXELS

# Total size; vendor and type 0; version 2, block size; model, BT.709, linear, flags; block dimensions
# minus one; bytes of plane 0 and of the seven others. KDF 1.4, chapters 4 and 5.
# Samples: bit offset, bit length minus one, channel and qualifiers, position, lower, upper.
KNOWN = {
    "rgba16f": """
        5c000000 00000000 0200 5800 01 01 01 00 00000000 08 00000000000000
        0000 0f c0 00000000 000080bf 0000803f
        1000 0f c1 00000000 000080bf 0000803f
        2000 0f c2 00000000 000080bf 0000803f
        3000 0f cf 00000000 000080bf 0000803f""",
    "rg16f": """
        3c000000 00000000 0200 3800 01 01 01 00 00000000 04 00000000000000
        0000 0f c0 00000000 000080bf 0000803f
        1000 0f c1 00000000 000080bf 0000803f""",
    "r16f": """
        2c000000 00000000 0200 2800 01 01 01 00 00000000 02 00000000000000
        0000 0f c0 00000000 000080bf 0000803f""",
    "rgb9e5": """
        7c000000 00000000 0200 7800 01 01 01 00 00000000 04 00000000000000
        0000 08 00 00000000 00000000 00210000
        1b00 04 20 00000000 0f000000 1f000000
        0900 08 01 00000000 00000000 00210000
        1b00 04 21 00000000 0f000000 1f000000
        1200 08 02 00000000 00000000 00210000
        1b00 04 22 00000000 0f000000 1f000000""",
    "r11g11b10f": """
        4c000000 00000000 0200 4800 01 01 01 00 00000000 04 00000000000000
        0000 0a 80 00000000 00000000 0000803f
        0b00 0a 81 00000000 00000000 0000803f
        1600 09 82 00000000 00000000 0000803f""",
    "bc6h": """
        2c000000 00000000 0200 2800 85 01 01 00 03030000 10 00000000000000
        0000 7f 80 00000000 00000000 0000803f""",
}


@pytest.mark.parametrize("name", PIXELS)
def test_descriptor_has_these_bytes(name):
    assert write_dfd(PIXELS[name], "rec709").hex() == "".join(KNOWN[name].split())


@pytest.mark.parametrize("name", PIXELS)
def test_every_change_of_a_byte_is_named(name):
    data = write_dfd(PIXELS[name], "rec709")
    assert list(broken_dfd_rules(data, PIXELS[name])) == []
    for i in range(len(data)):
        changed = data[:i] + bytes([data[i] ^ 64]) + data[i + 1 :]
        assert len(list(broken_dfd_rules(changed, PIXELS[name]))) == 1


def test_field_is_named_with_its_bytes():
    data = bytearray(write_dfd(PIXELS["rg16f"], "rec709"))
    data[14] = 2  # transfer function: sRGB
    assert list(broken_dfd_rules(bytes(data), PIXELS["rg16f"])) == ["DFD transferFunction is 02, not 01"]


@pytest.mark.parametrize(("name", "number"), [("rec709", 1), ("rec2020", 4), ("acescg", 7)])
def test_primaries_have_these_numbers(name, number):
    data = write_dfd(PIXELS["rgba16f"], name)
    assert data[13] == number
    assert list(broken_dfd_rules(data, PIXELS["rgba16f"])) == []
    assert read_primaries(data) == name


def test_unknown_primaries_are_named():
    data = bytearray(write_dfd(PIXELS["rg16f"], "rec709"))
    data[13] = 99
    (rule,) = broken_dfd_rules(bytes(data), PIXELS["rg16f"])
    assert "colorPrimaries is 99" in rule
    assert str(sorted(PRIMARIES.values())) in rule
