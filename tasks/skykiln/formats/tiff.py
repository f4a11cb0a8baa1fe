"""TIFF pictures, through `tifffile` and the codecs of `imagecodecs`.

The library fills missing strips and tiles with zeros, so their places in the file are checked against its
length before any is read. What it can't make sense of it tells through `logging` and goes on, with what a
missing tag would mean; so it is listened to, and kept from the screen.
"""

import contextlib
import logging
import struct
import zlib
from pathlib import Path

import imagecodecs
import numpy as np
import tifffile

from skykiln.errors import FileError
from skykiln.formats.chromaticities import Chromaticities, chromaticities
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions, check_size
from skykiln.formats.low_range import SRGB, check_allowed, linear, warning
from skykiln.formats.orientation import upright

# TIFF 6.0 and its supplements: what packs bytes without loss. Not the pictures inside pictures (JPEG, ...).
_COMPRESSIONS = {
    1: "none", 5: "lzw", 8: "deflate", 32773: "packbits", 32946: "deflate", 34925: "lzma", 50000: "zstd",
}  # fmt: skip
_PREDICTORS = {1, 2, 3}
_FLOATS = {"float16": "half", "float32": "float", "float64": "double"}
_WHOLE = {"uint8": 8, "uint16": 16}
_GREY, _RGB = 1, 2  # PhotometricInterpretation
_REDUCED = 1  # NewSubfileType: a smaller copy of another page
_MOST_PAGES = 64
# A tile takes memory as a whole.
_TILE_PIXELS = 1 << 20
# Of damaged files tifffile, its codecs and numpy raise all of these.
_DAMAGE = (
    tifffile.TiffFileError, imagecodecs.DelayedImportError, ValueError, RuntimeError, TypeError, KeyError,
    IndexError, AttributeError, OverflowError, ZeroDivisionError, AssertionError, NotImplementedError,
    EOFError, struct.error, zlib.error,
)  # fmt: skip


def read_tiff(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Read one page of half, float or double, or, if allowed, of 8- or 16-bit whole numbers.

    Raises: FileError where more than one page is meant, for other pixels, and for damaged or cut files.
    """
    name = str(path)
    try:
        with _remarks() as remarks, tifffile.TiffFile(name) as file:
            number, page = _page(name, file, options.part)
            if remarks:
                raise FileError(f"{name}: damaged or cut ({remarks[0]}); export it again")
            _check_page(name, page, options)
            _check_places(name, page, path.stat().st_size)
            stored = page.asarray(maxworkers=1)
            return _image(name, number, page, stored)
    except _DAMAGE as error:
        raise FileError(f"{name}: a damaged or cut TIFF file ({error}); export it again") from error


class _Listener(logging.Handler):
    def __init__(self, errors: list[str]):
        super().__init__()
        self._errors = errors

    def emit(self, record):
        if record.levelno >= logging.ERROR:
            self._errors.append(record.getMessage()[:200])


@contextlib.contextmanager
def _remarks():
    """A list that the library's errors are put into, of whatever file is being read in this process."""
    logger, errors = logging.getLogger("tifffile"), []
    listener = _Listener(errors)
    logger.addHandler(listener)
    try:
        yield errors
    finally:
        logger.removeHandler(listener)


def _page(name: str, file: tifffile.TiffFile, wanted: str | int | None) -> tuple[int, tifffile.TiffPage]:
    pages = []
    for number in range(_MOST_PAGES):
        try:
            pages.append(file.pages[number])
        except IndexError:
            break
    if not pages:
        raise FileError(f"{name}: no picture in it, so it is damaged or cut; export it again")
    full = [number for number, page in enumerate(pages) if not page.subfiletype & _REDUCED]
    chosen = [number for number in full if wanted in (None, number, str(number))]
    if len(chosen) != 1:
        listed = ", ".join(f"{n}: {pages[n].imagewidth} x {pages[n].imagelength}" for n in full[:12])
        why = f"{len(full)} pages; say which with part:" if wanted is None else f"no page {wanted!r}"
        raise FileError(f"{name}: {why}. It holds the pages {listed or 'none'}")
    return chosen[0], pages[chosen[0]]


def _check_page(name: str, page: tifffile.TiffPage, options: ReadOptions) -> None:
    """Judge size and kind by the tags alone."""
    width, height, samples = page.imagewidth, page.imagelength, page.samplesperpixel
    check_size(name, width, height, options.max_pixels)
    if page.is_tiled and page.tilewidth * page.tilelength > max(_TILE_PIXELS, width * height):
        raise FileError(f"{name}: its tiles are far larger than the picture; export it again")
    if page.compression not in _COMPRESSIONS or page.predictor not in _PREDICTORS:
        raise FileError(
            f"{name}: its compression {int(page.compression)} with predictor {int(page.predictor)} is not "
            "read; export it with LZW, Deflate, Zstandard or none"
        )
    if page.photometric not in (_GREY, _RGB) or samples not in _samples(page) or page.imagedepth != 1:
        raise FileError(
            f"{name}: {samples} samples a pixel with photometric {int(page.photometric)}; "
            "export it as RGB or grey"
        )
    kind = str(page.dtype)
    if kind in _WHOLE:
        check_allowed(name, _what(page), options.allow_ldr)
    elif kind not in _FLOATS:
        raise FileError(f"{name}: its pixels are {kind}; export them as 16- or 32-bit floats")


def _samples(page: tifffile.TiffPage) -> tuple[int, int]:
    """Samples of a pixel, without and with alpha."""
    return (3, 4) if page.photometric == _RGB else (1, 2)


def _what(page: tifffile.TiffPage) -> str:
    return "an 8-bit TIFF picture" if page.dtype == np.uint8 else "a 16-bit TIFF picture"


def _check_places(name: str, page: tifffile.TiffPage, size: int) -> None:
    """Every strip or tile must be there, inside the file, and as many as the size takes."""
    offsets, counts = page.dataoffsets, page.databytecounts
    needed = int(np.prod(page.chunked))
    if len(offsets) != len(counts) or len(offsets) < (1 if page.is_contiguous else needed):
        raise FileError(f"{name}: {len(offsets)} of its {needed} strips or tiles are there; export it again")
    if page.compression == 1 and sum(counts) < page.nbytes:
        raise FileError(f"{name}: {sum(counts)} of {page.nbytes} bytes of pixels are there; export it again")
    for number, (offset, count) in enumerate(zip(offsets, counts, strict=True)):
        if offset <= 0 or count <= 0 or offset + count > size:
            raise FileError(f"{name}: the file ends before strip or tile {number} does; export it again")


def _image(name: str, number: int, page: tifffile.TiffPage, stored: np.ndarray) -> Image:
    colours = 3 if page.photometric == _RGB else 1
    planes = np.moveaxis(stored, 0, -1) if page.planarconfig == 2 and stored.ndim == 3 else stored
    planes = planes.reshape(page.imagelength, page.imagewidth, page.samplesperpixel)[..., :colours]
    turned = page.tags.get(274)
    planes = upright(planes, turned.value if turned else 1)
    pixels = np.empty((*planes.shape[:2], 3), np.float32)
    whole = _WHOLE.get(str(page.dtype))
    with np.errstate(over="ignore", invalid="ignore"):
        pixels[:] = linear(planes) if whole else planes
    notes = ("its colour profile is not read",) if 34675 in page.tags else ()
    if whole:
        notes = (warning(_what(page), whole, pixels), *notes)
    space = SRGB if whole else _chromaticities(name, page)
    return Image(pixels, _facts(number, page, pixels, space), chromaticities=space, warnings=notes)


def _chromaticities(name: str, page: tifffile.TiffPage) -> Chromaticities | None:
    """Of the tags PrimaryChromaticities and WhitePoint (TIFF 6.0, section 20): rationals, numerator first."""
    primaries, white = page.tags.get(319), page.tags.get(318)
    if primaries is None or white is None:
        return None
    numbers = np.array([*primaries.value, *white.value], np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        return chromaticities(name, numbers[::2] / numbers[1::2])


def _facts(number: int, page: tifffile.TiffPage, pixels: np.ndarray, space: Chromaticities | None) -> dict:
    whole = _WHOLE.get(str(page.dtype))
    return {
        "format": "tiff",
        "width": pixels.shape[1],
        "height": pixels.shape[0],
        "part": number,
        "channels": "RGB" if page.photometric == _RGB else "luminance",
        "pixel_type": f"{whole}-bit sRGB" if whole else _FLOATS[str(page.dtype)],
        "compression": _COMPRESSIONS[page.compression],
        "tiled": page.is_tiled,
        "chromaticities": space and [number for pair in space for number in pair],
    }
