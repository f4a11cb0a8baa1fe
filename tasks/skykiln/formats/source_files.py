"""Which reader a source file goes to: decided by its first bytes, never by its suffix."""

import stat
from pathlib import Path

from skykiln.errors import FileError
from skykiln.formats.cube_textures import read_cube_texture
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions
from skykiln.formats.openexr import read_openexr
from skykiln.formats.pfm import read_pfm
from skykiln.formats.radiance_hdr import read_radiance_hdr
from skykiln.formats.screen_pictures import read_jpeg, read_png
from skykiln.formats.tiff import read_tiff
from skykiln.limits import largest_file


def _read_radiance(path: Path, options: ReadOptions) -> Image:
    # Run lengths can at most double a pixel's four bytes.
    if path.stat().st_size > 8 * options.max_pixels + (1 << 20):
        raise FileError(
            f"{path}: larger than any picture of {options.max_pixels} pixels; scale the picture down"
        )
    return read_radiance_hdr(path.read_bytes(), str(path), options.max_pixels)


READERS = {
    b"\x76\x2f\x31\x01": read_openexr,  # OpenEXR, "OpenEXR File Layout": magic number
    b"#?": _read_radiance,  # Radiance, "Picture File Format": first line of the header
    b"PF": read_pfm,
    b"Pf": read_pfm,
    b"II*\0": read_tiff,  # TIFF 6.0, section 2: byte order and 42
    b"MM\0*": read_tiff,
    b"II+\0": read_tiff,  # BigTIFF: 43
    b"MM\0+": read_tiff,
    b"\xabKTX 20": read_cube_texture,
    b"\x89PNG": read_png,
    b"\xff\xd8\xff": read_jpeg,
}

# What options say which picture of a file is meant, for the readers that can have several.
_CHOICES = {read_openexr: {"part", "layer"}, read_tiff: {"part"}}

# Pictures that people do try, so that the message can say more than 'unknown'.
_REFUSED = {
    b"\xabKTX": "a KTX texture of version 1",
    b"DDS ": "a DDS texture",
    b"ENVI": "an ENVI remote-sensing header",
    b"RIFF": "a WebP picture",
    b"BM": "a BMP picture",
}
_READ = "OpenEXR, Radiance .hdr, TIFF, PFM or KTX2"


def read_source(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Read a source picture of any known format.

    Raises: FileError naming the file, what is wrong with it and what to do.
    """
    _check_kind(path, options.max_pixels)
    try:
        with path.open("rb") as file:
            start = file.read(16)
        reader = _reader(path, start)
        _check_choices(path, reader, options)
        return reader(path, options)
    except OSError as error:
        raise FileError(f"{path}: can't be read ({error.strerror}); check the file and its rights") from error
    except MemoryError as error:
        raise FileError(f"{path}: not enough memory to read it; scale the picture down") from error


def _check_choices(path: Path, reader, options: ReadOptions) -> None:
    given = {choice for choice in ("part", "layer") if getattr(options, choice) is not None}
    for choice in sorted(given - _CHOICES.get(reader, set())):
        raise FileError(f"{path}: a file of its format has no {choice}s; remove {choice}:")


def _check_kind(path: Path, max_pixels: int) -> None:
    """Stat before opening: opening a FIFO would wait for ever."""
    try:
        status = path.stat()
    except OSError as error:
        if path.is_symlink():
            raise FileError(f"{path}: a link that leads nowhere; mend or remove it") from error
        raise FileError(f"{path}: {error.strerror}; check the path in the pipeline file") from error
    if stat.S_ISDIR(status.st_mode):
        raise FileError(f"{path}: a directory; name one picture file")
    if not stat.S_ISREG(status.st_mode):
        raise FileError(f"{path}: a pipe, socket or device, not a file; copy the picture into a file")
    if status.st_size == 0:
        raise FileError(f"{path}: the file is empty; export it again")
    most = largest_file(max_pixels)
    if status.st_size > most:
        raise FileError(
            f"{path}: {status.st_size} bytes, more than the {most} that {max_pixels} pixels may take; "
            "export the sky alone, raise limits.max_pixels, or check whether the file is damaged"
        )


def _reader(path: Path, start: bytes):
    for magic, reader in READERS.items():
        if start.startswith(magic):
            return reader
    found = next((what for magic, what in _REFUSED.items() if start.startswith(magic)), None)
    what = f"is {found}, not {_READ}" if found else f"is none of {_READ}, by its first bytes"
    raise FileError(f"{path}: {what}; convert it to OpenEXR")
