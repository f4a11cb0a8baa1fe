"""Radiance pictures (.hdr), by our own reader.

No library at hand reads both kinds of run lengths, takes EXPOSURE out of the pixels and turns pictures
upright, so the form is read here, from Radiance's "Picture File Format" (doc/filefmts) and the behaviour
of its own reader: the header, then scan lines of four-byte pixels r, g, b, e that are packed in one of
three ways, told apart line by line.

A pixel is (mantissa + 0.5) * 2^(e - 136), and 0 where e is 0. The half step is Radiance's own: its
writer cuts mantissas off, so the middle of the step is the unbiased value. Readers that leave the
half out give values that are up to 0.4 % of the largest channel smaller.
"""

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.image import Image, check_size
from skykiln.formats.radiance_header import Header, read_header
from skykiln.jit import exact
from skykiln.limits import MAX_PIXELS

# What `_decode` found wrong; 0 is nothing.
_CUT, _WIDTH, _OVERRUN, _EMPTY_RUN, _NO_PREVIOUS = 1, 2, 3, 4, 5
_FAULTS = {
    _CUT: "the file ends inside scan line {row}",
    _WIDTH: "scan line {row} gives another width than the header",
    _OVERRUN: "a run goes over the end of scan line {row}",
    _EMPTY_RUN: "a run of no pixels in scan line {row}",
    _NO_PREVIOUS: "scan line {row} begins with a run that has no pixel to repeat",
}


def read_radiance_hdr(data: bytes, name: str, max_pixels: int = MAX_PIXELS) -> Image:
    """Read a picture of any orientation; it comes out upright.

    All EXPOSURE and COLORCORR lines are taken out: pixels are radiance, not what was displayed.

    Raises: FileError for damaged or cut files, and for other kinds of pixels.
    """
    header, start = read_header(data, name)
    check_size(name, *header.size, max_pixels)
    pixels = np.empty((header.lines, header.length, 3), np.float32)
    fault, row = _decode(np.frombuffer(data, np.uint8), start, _scales(header.factors), pixels)
    if fault:
        raise FileError(f"{name}: {_FAULTS[fault].format(row=row)}; export it again")
    return Image(_upright(pixels, header.axes), _facts(header), chromaticities=header.primaries)


def _upright(pixels: np.ndarray, axes: tuple[str, str]) -> np.ndarray:
    """Rows from the top, columns from the left. Y counts from the bottom, X from the left."""
    if axes[0][1] == "X":
        pixels = pixels.transpose(1, 0, 2)
    rows, columns = (-1 if axis in axes else 1 for axis in ("+Y", "-X"))
    return np.ascontiguousarray(pixels[::rows, ::columns])


def _facts(header: Header) -> dict:
    width, height = header.size
    return {
        "format": "radiance",
        "width": width,
        "height": height,
        "pixel_type": header.pixels,
        "orientation": " ".join(header.axes),
        "exposure": header.exposure,
        "colour_correction": [factor / header.exposure for factor in header.factors],
        "chromaticities": header.primaries and [number for pair in header.primaries for number in pair],
    }


def _scales(factors: tuple[float, float, float]) -> np.ndarray:
    """(256, 3) float32: what a channel's mantissa is multiplied by, for each exponent byte."""
    scales = np.ldexp(1.0, np.arange(256) - 136)[:, None] / np.array(factors)
    scales[0] = 0.0
    with np.errstate(over="ignore"):
        return scales.astype(np.float32)


@exact
def _decode(data, position, scales, pixels):
    """Decode every scan line into `pixels` (H, W, 3). Returns (fault, row)."""
    height, width = pixels.shape[:2]
    rgbe = np.empty((width, 4), np.uint8)
    for row in range(height):
        head = data[position : position + 4]
        if len(head) < 4:
            return _CUT, row
        packed = 8 <= width <= 32767 and head[0] == 2 and head[1] == 2 and head[2] < 128
        if packed and (np.int64(head[2]) << 8 | np.int64(head[3])) != width:
            return _WIDTH, row
        if packed:
            fault, position = _read_planes(data, position + 4, rgbe)
        else:
            fault, position = _read_pixels(data, position, rgbe)
        if fault:
            return fault, row
        for i in range(width):
            for c in range(3):
                pixels[row, i, c] = (np.float32(rgbe[i, c]) + np.float32(0.5)) * scales[rgbe[i, 3], c]
    return 0, 0


@exact
def _read_planes(data, position, rgbe):
    """One scan line of new run lengths: the planes r, g, b, e. Returns (fault, next position)."""
    width, size = len(rgbe), len(data)
    for c in range(4):
        i = 0
        while i < width:
            if position + 2 > size:
                return _CUT, position
            count, repeat = np.int64(data[position]), data[position] > 128
            position += 1
            if repeat:
                count -= 128
            if count == 0:
                return _EMPTY_RUN, position
            if i + count > width:
                return _OVERRUN, position
            if not repeat and position + count > size:
                return _CUT, position
            for k in range(count):
                rgbe[i + k, c] = data[position] if repeat else data[position + k]
            position += 1 if repeat else count
            i += count
    return 0, position


@exact
def _read_pixels(data, position, rgbe):
    """One flat scan line, or one of old run lengths: (1, 1, 1, n) repeats the pixel before it n
    times, and each that follows at once counts for 256 times more. Returns (fault, position)."""
    width, size = len(rgbe), len(data)
    i, shift = 0, 0
    while i < width:
        if position + 4 > size:
            return _CUT, position
        r, g, b, e = data[position], data[position + 1], data[position + 2], data[position + 3]
        position += 4
        if r != 1 or g != 1 or b != 1:
            rgbe[i, 0], rgbe[i, 1], rgbe[i, 2], rgbe[i, 3] = r, g, b, e
            i, shift = i + 1, 0
            continue
        if i == 0:
            return _NO_PREVIOUS, position
        count = np.int64(e) << min(shift, 40)
        if i + count > width:
            return _OVERRUN, position
        for k in range(i, i + count):
            rgbe[k] = rgbe[i - 1]
        i, shift = i + count, shift + 8
    return 0, position
