"""Radiance pictures (.hdr), by our own reader.

No library at hand reads both kinds of run lengths and takes EXPOSURE out of the pixels, so the form
is read here, from Radiance's "Picture File Format" (doc/filefmts) and the behaviour of its own
reader: text lines up to an empty one, a resolution line, then scan lines of four-byte pixels
r, g, b, e that are packed in one of three ways, told apart line by line.

A pixel is (mantissa + 0.5) * 2^(e - 136), and 0 where e is 0. The half step is Radiance's own: its
writer cuts mantissas off, so the middle of the step is the unbiased value. Readers that leave the
half out give values that are up to 0.4 % of the largest channel smaller.
"""

import re

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.image import Image, check_size
from skykiln.jit import exact

_RESOLUTION = re.compile(rb"([-+][XY]) +(\d{1,9}) +([-+][XY]) +(\d{1,9})")
_NUMBER = re.compile(rb"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")
_REFUSED = (b"PRIMARIES=", b"COLORCORR=")

# What `_decode` found wrong; 0 is nothing.
_CUT, _WIDTH, _OVERRUN, _EMPTY_RUN, _NO_PREVIOUS = 1, 2, 3, 4, 5
_FAULTS = {
    _CUT: "the file ends inside scan line {row}",
    _WIDTH: "scan line {row} gives another width than the header",
    _OVERRUN: "a run goes over the end of scan line {row}",
    _EMPTY_RUN: "a run of no pixels in scan line {row}",
    _NO_PREVIOUS: "scan line {row} begins with a run that has no pixel to repeat",
}


def read_radiance_hdr(data: bytes, name: str, max_pixels: int) -> Image:
    """Read a picture whose rows run from top to bottom and left to right.

    The product of all EXPOSURE lines is taken out: pixels are radiance, not what was displayed.

    Raises: FileError for damaged or cut files, and for what is not read yet.
    """
    exposure, start = _read_header(data, name)
    width, height, start = _read_resolution(data, start, name)
    check_size(name, width, height, max_pixels)
    pixels = np.empty((height, width, 3), np.float32)
    fault, row = _decode(np.frombuffer(data, np.uint8), start, _scales(exposure), pixels)
    if fault:
        raise FileError(f"{name}: {_FAULTS[fault].format(row=row)}; export it again")
    facts = {"format": "radiance", "width": width, "height": height, "pixel_type": "rgbe"}
    return Image(pixels, facts | {"exposure": exposure})


def _read_header(data: bytes, name: str) -> tuple[float, int]:
    """Returns the product of the EXPOSURE lines, and where the resolution line starts."""
    exposure, position = 1.0, 0
    while (end := data.find(b"\n", position)) >= 0:
        line, position = data[position:end].removesuffix(b"\r"), end + 1
        if not line:
            return exposure, position
        # A line counts only where the name is at its very start: an indented one is history.
        if line.startswith(b"EXPOSURE="):
            exposure = _exposure(exposure, line, name)
        elif line.startswith(b"FORMAT="):
            _check_format(line, name)
        elif line.startswith(_REFUSED):
            raise FileError(
                f"{name}: its header holds {_shown(line)}, which is not read; convert it to linear Rec. 709"
            )
    raise FileError(f"{name}: the file ends inside its header; export it again")


def _exposure(product: float, line: bytes, name: str) -> float:
    """The product of the exposures so far and of this line's."""
    text = line.partition(b"=")[2].strip()
    product *= float(text) if _NUMBER.fullmatch(text) else 0.0
    if not 1e-30 < product < 1e30:
        raise FileError(f"{name}: {_shown(line)} is no usable exposure; mend that line of its header")
    return product


def _check_format(line: bytes, name: str) -> None:
    found = line.partition(b"=")[2].strip()
    if found == b"32-bit_rle_xyze":
        raise FileError(f"{name}: its pixels are CIE XYZ; convert it to linear Rec. 709 RGB")
    if found != b"32-bit_rle_rgbe":
        raise FileError(f"{name}: {_shown(line)} is not read; export it as 32-bit_rle_rgbe")


def _read_resolution(data: bytes, start: int, name: str) -> tuple[int, int, int]:
    """Returns width, height, and where the first scan line starts."""
    end = data.find(b"\n", start, start + 200)
    line = data[start : max(end, start)].removesuffix(b"\r")
    found = _RESOLUTION.fullmatch(line.strip())
    if not found or {found[1][1:], found[3][1:]} != {b"X", b"Y"}:
        raise FileError(
            f"{name}: no resolution line such as '-Y 512 +X 1024' after the header; export it again"
        )
    if (found[1], found[3]) != (b"-Y", b"+X"):
        raise FileError(f"{name}: its orientation '{_shown(line)}' is not read; turn it to '-Y H +X W'")
    return int(found[4]), int(found[2]), end + 1


def _shown(line: bytes) -> str:
    return line[:60].decode("ascii", "replace")


def _scales(exposure: float) -> np.ndarray:
    """(256,) float32: what a mantissa is multiplied by, for each exponent byte."""
    scales = np.ldexp(1.0, np.arange(256) - 136) / exposure
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
            scale = scales[rgbe[i, 3]]
            for c in range(3):
                pixels[row, i, c] = (np.float32(rgbe[i, c]) + np.float32(0.5)) * scale
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
