"""The header of a Radiance picture ("Picture File Format", doc/filefmts, and Radiance's own reader): text
lines up to an empty one, then the resolution line.

A line counts only where its name stands at the very start: an indented one belongs to an earlier picture.
EXPOSURE and COLORCORR multiply with those before them and are in the pixels already; of PRIMARIES the last
one counts. Without PRIMARIES nothing is said of the colours here, though Radiance's own are those of Rec.
709 with green at x = 0.29 and the white of equal energy: most pictures come from other writers, who mean
Rec. 709.
"""

import re
from typing import NamedTuple

from skykiln.errors import FileError
from skykiln.formats.chromaticities import XYZ, Chromaticities, chromaticities

_AXIS = rb"([-+][XY]) +(\d{1,9})"
_RESOLUTION = re.compile(_AXIS + rb" +" + _AXIS)
_NUMBER = re.compile(rb"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")
_FORMATS = {b"32-bit_rle_rgbe": "rgbe", b"32-bit_rle_xyze": "xyze"}


class Header(NamedTuple):
    """pixels : 'rgbe' or 'xyze'
    factors : per channel, what the radiance was multiplied by: EXPOSURE and COLORCORR
    exposure : the part of EXPOSURE alone
    primaries : of a PRIMARIES line; of XYZE those of CIE XYZ
    axes : of scan lines, and inside them: '-Y', '+X' is from the top, from the left
    lines, length : how many scan lines there are, and pixels in each
    """

    pixels: str
    factors: tuple[float, float, float]
    exposure: float
    primaries: Chromaticities | None
    axes: tuple[str, str]
    lines: int
    length: int

    @property
    def size(self) -> tuple[int, int]:
        """Width and height of the upright picture."""
        return (self.length, self.lines) if self.axes[0][1] == "Y" else (self.lines, self.length)


def read_header(data: bytes, name: str) -> tuple[Header, int]:
    """Returns the header, and where the first scan line starts.

    Raises: FileError for a header that is cut, or says what can't be.
    """
    pixels, exposure, correction, primaries = "rgbe", 1.0, (1.0, 1.0, 1.0), None
    lines, start = _lines(data, name)
    for line in lines:
        key, _, value = line.partition(b"=")
        if key == b"EXPOSURE":
            (exposure,) = _product(name, line, (exposure,), value)
        elif key == b"COLORCORR":
            correction = _product(name, line, correction, value)
        elif key == b"PRIMARIES":
            primaries = chromaticities(name, _numbers(name, line, value, 8))
        elif key == b"FORMAT":
            pixels = _pixels(name, line, value)
    factors = tuple(exposure * c for c in correction)
    axes, counts, start = _resolution(data, start, name)
    primaries = XYZ if pixels == "xyze" else primaries
    return Header(pixels, factors, exposure, primaries, axes, *counts), start


def _lines(data: bytes, name: str) -> tuple[list[bytes], int]:
    """The lines up to the empty one, and where the next one starts."""
    lines, position = [], 0
    while (end := data.find(b"\n", position)) >= 0:
        line, position = data[position:end].removesuffix(b"\r"), end + 1
        if not line:
            return lines, position
        lines.append(line)
    raise FileError(f"{name}: the file ends inside its header; export it again")


def _product(name: str, line: bytes, factors: tuple, value: bytes) -> tuple:
    """The factors so far, each times its number of the line's."""
    factors = tuple(a * b for a, b in zip(factors, _numbers(name, line, value, len(factors)), strict=True))
    if not all(1e-30 < factor < 1e30 for factor in factors):
        raise FileError(f"{name}: {_shown(line)} is no usable exposure; mend that line of its header")
    return factors


def _numbers(name: str, line: bytes, value: bytes, count: int) -> list[float]:
    words = value.split()
    if len(words) != count or not all(_NUMBER.fullmatch(word) for word in words):
        raise FileError(
            f"{name}: {_shown(line)} doesn't hold {count} number{'s' * (count > 1)}; "
            "mend that line of its header"
        )
    return [float(word) for word in words]


def _pixels(name: str, line: bytes, value: bytes) -> str:
    pixels = _FORMATS.get(value.strip())
    if pixels is None:
        raise FileError(f"{name}: {_shown(line)} is not read; export it as 32-bit_rle_rgbe")
    return pixels


def _resolution(data: bytes, start: int, name: str) -> tuple[tuple[str, str], tuple[int, int], int]:
    """Returns the two axes, their counts, and where the first scan line starts."""
    end = data.find(b"\n", start, start + 200)
    line = data[start : max(end, start)].removesuffix(b"\r")
    found = _RESOLUTION.fullmatch(line.strip())
    if not found or {found[1][1:], found[3][1:]} != {b"X", b"Y"}:
        raise FileError(
            f"{name}: no resolution line such as '-Y 512 +X 1024' after the header; export it again"
        )
    return (found[1].decode(), found[3].decode()), (int(found[2]), int(found[4])), end + 1


def _shown(line: bytes) -> str:
    return line[:60].decode("ascii", "replace")
