"""PNG and JPEG, made for screens: read on request only (`low_range`).

A damaged JPEG can go unnoticed: its decoder fills what it can't read with grey, and the form has no check
sums. A cut one is noticed, and one that is far too short for its size.
"""

import io
import struct
from pathlib import Path

import imagecodecs
import numpy as np
from PIL.JpegImagePlugin import JpegImageFile

from skykiln.errors import FileError
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions, check_size
from skykiln.formats.low_range import SRGB, check_allowed, linear, warning
from skykiln.formats.orientation import upright

# Chunks that pixels are made of. Comments and profiles, which may unpack to any size, are left out.
_PIXELS = {b"IHDR", b"PLTE", b"tRNS", b"IDAT", b"IEND"}
_EXIF_ORIENTATION = 274
_MODES = ("L", "RGB")  # of JPEG; not CMYK, which is ink
_MOST_SCANS = 64  # of a progressive JPEG, each of which takes the whole picture's time; a dozen is usual


def read_png(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Raises: FileError unless allowed, and for damaged or cut files."""
    name, data = str(path), _bytes(path, options.max_pixels)
    # PNG 11.2.2: the first chunk's data begins at byte 16: width, height, bits.
    width, height = (int.from_bytes(data[at : at + 4], "big") for at in (16, 20))
    if data[:8] != b"\x89PNG\r\n\x1a\n" or data[12:16] != b"IHDR" or len(data) < 33:
        raise FileError(f"{name}: its header is not that of a PNG picture; export it again")
    bits = 16 if data[24] == 16 else 8
    what = "a 16-bit PNG picture" if bits == 16 else "an 8-bit PNG picture"
    check_allowed(name, what, options.allow_ldr)
    check_size(name, width, height, options.max_pixels)
    chunks = _chunks(data)
    needed = b"".join(chunk for kind, chunk in chunks if kind in _PIXELS)
    try:
        stored = imagecodecs.png_decode(data[:8] + needed)
    except (imagecodecs.PngError, ValueError) as error:
        raise FileError(f"{name}: damaged or cut ({error}); export it again") from error
    notes = ("its colour profile is not read",) if b"iCCP" in dict(chunks) else ()
    return _image(stored.reshape(height, width, -1), "png", what, bits, notes)


def _chunks(data: bytes) -> list[tuple[bytes, bytes]]:
    """Kind and bytes of each chunk (PNG 5.3): length, kind, data, check sum. The last one may be cut."""
    chunks, at = [], 8
    while at < len(data):
        end = at + 12 + int.from_bytes(data[at : at + 4], "big")
        chunks.append((data[at + 4 : at + 8], data[at:end]))
        at = end
    return chunks


def read_jpeg(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Raises: FileError unless allowed, and for damaged or cut files."""
    name, what = str(path), "an 8-bit JPEG picture"
    check_allowed(name, what, options.allow_ldr)
    data = _bytes(path, options.max_pixels)
    try:
        picture = JpegImageFile(io.BytesIO(data))
        check_size(name, *picture.size, options.max_pixels)
        # Blocks of 8 x 8 pixels take a bit each at least (ITU-T T.81, F.1.2).
        if picture.width * picture.height > 8 * 64 * len(data):
            raise FileError(f"{name}: far too short for a picture of its size; export it again")
        if data.count(b"\xff\xda") > _MOST_SCANS:
            raise FileError(f"{name}: a JPEG picture of more than {_MOST_SCANS} scans; export it again")
        if picture.mode not in _MODES:
            raise FileError(f"{name}: a JPEG picture of {picture.mode}; export it as RGB")
        stored = np.asarray(picture)
        turned = picture.getexif().get(_EXIF_ORIENTATION, 1)
    except (OSError, SyntaxError, ValueError, KeyError, IndexError, TypeError, struct.error) as error:
        raise FileError(f"{name}: damaged or cut ({error}); export it again") from error
    notes = ("its colour profile is not read",) if "icc_profile" in picture.info else ()
    return _image(upright(stored.reshape(*stored.shape[:2], -1), turned), "jpeg", what, 8, notes)


def _bytes(path: Path, max_pixels: int) -> bytes:
    # Eight bytes a pixel at most, if nothing was gained by packing.
    if path.stat().st_size > 9 * max_pixels + (1 << 20):
        raise FileError(f"{path}: larger than any picture of {max_pixels} pixels; scale the picture down")
    return path.read_bytes()


def _image(stored: np.ndarray, kind: str, what: str, bits: int, notes: tuple[str, ...]) -> Image:
    """Of (H, W, 1 to 4) whole numbers: grey or RGB, with or without alpha."""
    height, width, channels = stored.shape
    if channels in (2, 4) and (stored[..., -1] != np.iinfo(stored.dtype).max).any():
        notes += ("its transparency is not read",)
    pixels = np.empty((height, width, 3), np.float32)
    pixels[:] = linear(stored[..., : 1 if channels < 3 else 3])
    facts = {"format": kind, "width": width, "height": height, "pixel_type": f"{bits}-bit sRGB"}
    return Image(pixels, facts, chromaticities=SRGB, warnings=(warning(what, bits, pixels), *notes))
