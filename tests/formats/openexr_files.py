"""OpenEXR pictures made byte by byte, for what the package can't write: subsampled channels and mip levels.

Written from "OpenEXR File Layout": magic and version, attributes, table of offsets, chunks.
"""

import struct

import numpy as np

TYPES = {np.dtype("uint32"): 0, np.dtype("float16"): 1, np.dtype("float32"): 2}


def scan_lines(window, channels, **attributes):
    """An uncompressed file of scan lines.

    Parameters: window : x and y of the lowest pixel, x and y of the highest
                channels : name -> (pixels, x sampling, y sampling)
                attributes : name -> (type, bytes), over the ones that every file has
    """
    start = _header(2, window, channels, attributes)
    chunks = []
    for y in range(window[1], window[3] + 1):
        lines = [
            pixels[y // step - -(-window[1] // step)].tobytes()
            for _, (pixels, _, step) in sorted(channels.items())
            if y % step == 0
        ]
        body = b"".join(lines)
        chunks.append(struct.pack("<ii", y, len(body)) + body)
    return _with_offsets(start, chunks)


def mip_tiles(levels, **attributes):
    """An uncompressed tiled file, one tile for each mip level; levels : (H, W, 3) arrays, each half the
    one before it, rounded down."""
    height, width = levels[0].shape[:2]
    channels = {name: (levels[0][..., c], 1, 1) for c, name in enumerate("RGB")}
    tiles = ("tiledesc", struct.pack("<IIB", width, height, 1))
    start = _header(0x202, (0, 0, width - 1, height - 1), channels, {"tiles": tiles} | attributes)
    chunks = []
    for number, level in enumerate(levels):
        body = b"".join(row[:, c].tobytes() for row in level for c in (2, 1, 0))
        chunks.append(struct.pack("<iiiii", 0, 0, number, number, len(body)) + body)
    return _with_offsets(start, chunks)


def _header(version, window, channels, attributes):
    listed = b"".join(
        name.encode() + b"\0" + struct.pack("<iIii", TYPES[pixels.dtype], 0, *steps)
        for name, (pixels, *steps) in sorted(channels.items())
    )
    box = ("box2i", struct.pack("<4i", *window))
    every = {
        "channels": ("chlist", listed + b"\0"), "compression": ("compression", b"\0"),
        "dataWindow": box, "displayWindow": box, "lineOrder": ("lineOrder", b"\0"),
        "pixelAspectRatio": ("float", struct.pack("<f", 1)),
        "screenWindowCenter": ("v2f", struct.pack("<2f", 0, 0)),
        "screenWindowWidth": ("float", struct.pack("<f", 1)),
    } | attributes  # fmt: skip
    out = struct.pack("<II", 20000630, version)
    for name, (kind, value) in every.items():
        out += b"%s\0%s\0" % (name.encode(), kind.encode()) + struct.pack("<i", len(value)) + value
    return out + b"\0"


def _with_offsets(start, chunks):
    sizes = [0, *(len(chunk) for chunk in chunks[:-1])]
    offsets = len(start) + 8 * len(chunks) + np.cumsum(sizes)
    return start + offsets.astype("<u8").tobytes() + b"".join(chunks)
