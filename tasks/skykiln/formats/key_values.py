"""The key/value data of a KTX2 file (KTX 2.0, "Key/Value Data").

In memory: a dict of str to str (stored as UTF-8 and a NUL) or to bytes (stored as they are).
"""

import struct
from collections.abc import Iterator, Mapping

# The keys that KTX 2.0 defines; no other key may begin with KTX.
_DEFINED = {
    "KTXcubemapIncomplete", "KTXorientation", "KTXglFormat", "KTXdxgiFormat__", "KTXmetalPixelFormat",
    "KTXswizzle", "KTXwriter", "KTXwriterScParams", "KTXastcDecodeMode", "KTXanimData",
}  # fmt: skip
# What a loader takes from vkFormat when there is one; or what our files can't be.
_FORBIDDEN = {
    "KTXglFormat", "KTXdxgiFormat__", "KTXmetalPixelFormat", "KTXcubemapIncomplete", "KTXanimData",
    "KTXastcDecodeMode",
}  # fmt: skip


def write_key_values(pairs: Mapping[str, str | bytes]) -> bytes:
    """Entries in the order of their keys' code points, each padded to four bytes."""
    out = bytearray()
    for key in sorted(pairs, key=str.encode):
        value = pairs[key]
        entry = key.encode() + b"\0" + (value if isinstance(value, bytes) else value.encode() + b"\0")
        out += struct.pack("<I", len(entry)) + entry + bytes(-len(entry) % 4)
    return bytes(out)


def read_key_values(data: bytes) -> dict[str, str | bytes]:
    """The inverse, of data without broken rules. A value that is UTF-8 and ends in its only NUL is text."""
    return {key: _value(value) for key, value in _entries(data)}


def broken_key_value_rules(data: bytes) -> Iterator[str]:
    """Every broken rule of the section, in words."""
    try:
        entries = list(_entries(data))
    except ValueError as error:
        yield f"key/value data: {error}"
        return
    keys = [key.encode() for key, _ in entries]
    if len(set(keys)) < len(keys):
        yield "key/value data: a key stands there twice"
    if keys != sorted(keys):
        yield "key/value data: the keys are not sorted by code point"
    for key, value in entries:
        yield from _broken_entry_rules(key, value)


def _broken_entry_rules(key: str, value: bytes) -> Iterator[str]:
    if key in _FORBIDDEN:
        yield f"key {key}: must not appear in such a texture"
    elif key.lower().startswith("ktx") and key not in _DEFINED:
        yield f"key {key}: only keys that KTX 2.0 defines may begin with KTX"
    if key == "KTXorientation" and value != b"rd\0":
        yield f"key KTXorientation: must be 'rd' and a NUL, not {value[:16]!r}"
    if key in ("KTXwriter", "KTXwriterScParams", "KTXswizzle") and not isinstance(_value(value), str):
        yield f"key {key}: must be UTF-8 text that ends in a NUL"


def _entries(data: bytes) -> Iterator[tuple[str, bytes]]:
    """Keys and raw values. Raises ValueError with the broken rule."""
    position = 0
    while position < len(data):
        if position + 4 > len(data):
            raise ValueError("it ends inside an entry's length")
        (length,) = struct.unpack_from("<I", data, position)
        position += 4
        entry, padding = data[position : position + length], -length % 4
        if length < 2 or len(entry) < length:
            raise ValueError(f"an entry of {length} bytes doesn't fit")
        if data[position + length : position + length + padding] != bytes(padding):
            raise ValueError("an entry's padding is missing or not zero")
        key, found, value = entry.partition(b"\0")
        if not found or not key:
            raise ValueError("an entry has no key that ends in a NUL")
        yield key.decode(), value  # UnicodeDecodeError is a ValueError
        position += length + padding


def _value(value: bytes) -> str | bytes:
    if value.find(b"\0") != len(value) - 1:
        return value
    try:
        return value[:-1].decode()
    except UnicodeDecodeError:
        return value
