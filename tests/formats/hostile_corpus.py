"""A folder of malformed source files, the same on every run: `python hostile_corpus.py FOLDER` writes it.

Sound files of every format are cut, changed and given sizes that can't be; then come the things that are no
pictures, or no files. Each of them must be refused with its name, in little time and memory.
"""

import functools
import io
import os
import socket
import struct
import sys
import zlib
from pathlib import Path

import imagecodecs
import numpy as np
import OpenEXR
import tifffile
import zstandard
from openexr_files import mip_tiles, scan_lines
from PIL import Image as Pillow
from radiance_files import hdr, old_line, packed_line, random_rgbe

from skykiln.formats.ktx2 import Ktx2Texture, write_ktx2

WIDTH, HEIGHT = 64, 32
# Just inside the limit of pixels: 16384 x 8192, of which a file of some kB holds next to nothing.
WIDE, HIGH = 16384, 8192
_PIXELS = np.random.default_rng(12).random((HEIGHT, WIDTH, 3), np.float32) * 40
_EXR_COMPRESSIONS = ("NO", "RLE", "ZIP", "PIZ", "PXR24", "B44", "DWAB")


@functools.cache
def sound_files() -> dict[str, bytes]:
    """Name -> bytes of a picture that is read."""
    files = {f"{kind.lower()}.exr": _exr(f"{kind}_COMPRESSION") for kind in _EXR_COMPRESSIONS}
    half = _PIXELS.astype(np.float16)
    files["tiles.exr"] = mip_tiles([half[:: 1 << k, :: 1 << k] for k in range(6)] + [half[:1, :1]])
    files["chroma.exr"] = _chroma((0, 0, WIDTH - 1, HEIGHT - 1))
    rgbe = random_rgbe(WIDTH, HEIGHT, runs=True)
    for name, pack in (("new", packed_line), ("old", old_line), ("flat", lambda line: line.tobytes())):
        files[f"{name}.hdr"] = hdr(WIDTH, HEIGHT, b"".join(pack(line) for line in rgbe))
    for compression in (None, "zlib", "lzw", "zstd", "packbits"):
        files[f"{compression}.tif"] = _tiff(_PIXELS, compression=compression)
    files["tiles.tif"] = _tiff(_PIXELS, compression="zlib", tile=(16, 16))
    files["sky.pfm"] = b"PF\n%d %d\n-1.0\n" % (WIDTH, HEIGHT) + _PIXELS.tobytes()
    for pixels in ("rgba16f", "bc6h"):
        files[f"{pixels}.ktx2"] = _ktx2(pixels, 0)
        files[f"{pixels}_zstd.ktx2"] = _ktx2(pixels, 3)
    files["sky.png"] = imagecodecs.png_encode((_PIXELS * 6).astype(np.uint8))
    files["deep.png"] = imagecodecs.png_encode((_PIXELS * 1600).astype(np.uint16))
    files["sky.jpg"] = _jpeg(WIDTH, HEIGHT)
    return files


def malformed_files() -> dict[str, bytes]:
    """Name -> bytes of a file that must be refused."""
    files = {}
    for name, data in sound_files().items():
        files |= {f"cut_{share}_{name}": data[: len(data) * share // 100] for share in (1, 8, 30, 60, 90)}
        files |= {f"start_alone_{name}": data[:8], f"zeros_behind_{name}": data[:12] + bytes(len(data) - 12)}
        files[f"ones_behind_{name}"] = data[:8] + b"\xff" * (len(data) - 8)
    return files | _absurd_exr() | _absurd_others() | _no_pictures()


def write_corpus(folder: Path) -> list[Path]:
    """The paths of everything that must be refused; files, and what is no file."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, data in malformed_files().items():
        (folder / name).write_bytes(data)
    (folder / "directory.exr").mkdir()
    (folder / "dangling.exr").symlink_to("nowhere.exr")
    (folder / "circle.exr").symlink_to("circle.exr")
    (folder / "device.exr").symlink_to("/dev/zero")
    os.mkfifo(folder / "pipe.exr")
    here = Path.cwd()
    os.chdir(folder)  # a socket's path must be short
    try:
        with socket.socket(socket.AF_UNIX) as listener:
            listener.bind("socket.exr")
    finally:
        os.chdir(here)
    with (folder / "sparse.hdr").open("wb") as file:
        file.write(sound_files()["flat.hdr"])
        file.truncate(1 << 40)
    return sorted(folder.iterdir())


def _exr(compression="NO_COMPRESSION", **header):
    file = io.BytesIO()
    header = {"compression": getattr(OpenEXR, compression), "type": OpenEXR.scanlineimage} | header
    OpenEXR.File(header, {"RGB": _PIXELS.astype(np.float16)}).write(file)
    return file.getvalue()


def _chroma(window, step=2, **attributes):
    luminance = np.ones((HEIGHT, WIDTH), np.float16)
    chroma = np.zeros((HEIGHT // 2, WIDTH // 2), np.float16)
    channels = {"Y": (luminance, 1, 1), "RY": (chroma, step, step), "BY": (chroma, step, step)}
    return scan_lines(window, channels, **attributes)


def _absurd_exr() -> dict[str, bytes]:
    data = _exr()
    window = struct.pack("<4i", 0, 0, WIDTH - 1, HEIGHT - 1)
    edge = (1 << 31) - 1
    boxes = {
        "giant": (0, 0, edge - 1, edge - 1), "whole_range": (-edge, -edge, edge, edge),
        "inside_out": (9, 9, 0, 0), "wide": (0, 0, edge - 1, 0), "high": (0, 0, 0, edge - 1),
        "limit": (0, 0, WIDE - 1, HIGH - 1),
        "far": (edge - WIDTH, edge - HEIGHT, edge - 1, edge - 1), "over": (0, 0, WIDE, HIGH),
    }  # fmt: skip
    files = {}
    for name, box in boxes.items():
        files[f"both_{name}.exr"] = data.replace(window, struct.pack("<4i", *box))
        if name not in ("inside_out", "far"):
            files[f"zip_{name}.exr"] = _exr("ZIP_COMPRESSION").replace(window, struct.pack("<4i", *box))
    first, _, rest = data.partition(window)
    files["no_overlap.exr"] = first + struct.pack("<4i", 9999, 0, 9999 + WIDTH - 1, HEIGHT - 1) + rest
    chroma = _chroma((0, 0, WIDTH - 1, HEIGHT - 1))
    for step in (0, 3, -2, edge):
        new = struct.pack("<ii", step, step)
        files[f"sampling_{step}.exr"] = chroma.replace(struct.pack("<ii", 2, 2), new)
    tiles = mip_tiles([_PIXELS])
    for side in (0, 1 << 16, edge):
        old = struct.pack("<IIB", WIDTH, HEIGHT, 1)
        files[f"tile_{side}.exr"] = tiles.replace(old, struct.pack("<IIB", side, side, 1))
    for size in (-1, 0, 7, edge):
        old = b"chromaticities\0chromaticities\0" + struct.pack("<i", 32)
        with_colours = _exr(chromaticities=(0.64, 0.33, 0.3, 0.6, 0.15, 0.06, 0.3127, 0.329))
        files[f"attribute_{size}.exr"] = with_colours.replace(old, old[:-4] + struct.pack("<i", size))
    files["nan_colours.exr"] = _exr(chromaticities=(float("nan"),) * 8)
    files["no_colours.exr"] = _exr(chromaticities=(0.0,) * 8)
    files["no_white.exr"] = _exr(whiteLuminance=-1.0)
    files["offsets_lost.exr"] = data.replace(struct.pack("<Q", len(data)), bytes(8))[:-1]
    return files


def _absurd_others() -> dict[str, bytes]:
    files = {}
    sizes = {"giant": (999999999, 999999999), "limit": (WIDE, HIGH), "none": (0, 9)}
    for name, (width, height) in sizes.items():
        files[f"{name}.hdr"] = hdr(width, height, bytes([2, 2, width >> 8 & 127, width & 255]) * 9)
        files[f"{name}.pfm"] = b"PF %d %d -1.0 " % (width, height) + bytes(999)
        files[f"{name}.png"] = _sized_png(width, height)
        for compression in (None, "zlib", "lzw", "zstd"):
            files[f"{name}_{compression}.tif"] = _sized_tiff(width, height, compression)
        files[f"{name}.ktx2"] = _sized_ktx2(width)
    files["giant.jpg"] = _sized_jpeg(65500, 65500)
    files["limit.jpg"] = _sized_jpeg(WIDE, HIGH)
    files["endless_runs.hdr"] = hdr(WIDE, HIGH, bytes([9, 9, 9, 9]) + bytes([1, 1, 1, 0]) * 99999)
    files["endless_header.hdr"] = b"#?RADIANCE\n" + b"EXPOSURE=1\n" * 99999
    files["one_long_line.hdr"] = b"#?RADIANCE\n" + b"x" * (1 << 22)
    files["no_exposure.hdr"] = hdr(WIDTH, HEIGHT, b"", (b"#?RADIANCE", b"EXPOSURE=0"))
    files |= {f"bomb_{packed}.tif": _bomb_tiff(packed) for packed in ("zlib", "zstd")}
    files["bomb.png"] = _bomb_png()
    files["many_scans.jpg"] = _jpeg(WIDTH, HEIGHT)[:-2] + b"\xff\xda\0\x0c" * 99 + b"\xff\xd9"
    files["pages_in_a_circle.tif"] = _circle_tiff()
    files["whole_numbers.tif"] = _tiff(_PIXELS.astype(np.uint32))
    return files


def _no_pictures() -> dict[str, bytes]:
    noise = np.random.default_rng(14).bytes(9999)
    return {
        "empty.exr": b"", "empty.hdr": b"", "one_byte.exr": b"v", "text.exr": b"a letter, not a sky\n" * 99,
        "text.hdr": b"Dear Sir,\n" * 99, "zip.exr": b"PK\3\4" + bytes(999), "zeros.exr": bytes(9999),
        "noise.exr": noise, "noise.tif": b"II*\0" + noise, "envi.hdr": b"ENVI\nsamples = 9\n",
        "noise.hdr": b"#?RADIANCE\n\n-Y 99 +X 99\n" + noise, "page.hdr": b"<html>404 Not Found</html>",
        "texture.exr": b"DDS " + bytes(200), "old.ktx2": b"\xabKTX 11\xbb\r\n\x1a\n" + bytes(99),
        "window.exr": b"BM" + bytes(99),
    }  # fmt: skip


def _tiff(pixels, **options):
    file = io.BytesIO()
    tifffile.imwrite(file, pixels, **{"photometric": "rgb", "rowsperstrip": 8} | options)
    return file.getvalue()


def _sized_tiff(width, height, compression):
    """One strip of a few bytes that says it is the whole picture."""
    file = io.BytesIO(_tiff(_PIXELS, compression=compression, rowsperstrip=HEIGHT))
    with tifffile.TiffFile(file, mode="r+b") as tiff:
        tags = tiff.pages[0].tags
        for tag, value in (("ImageWidth", width), ("ImageLength", height), ("RowsPerStrip", height)):
            tags[tag].overwrite(value, dtype="I")
    return file.getvalue()


def _bomb_tiff(compression):
    """A strip of 64 x 32 pixels whose stream unpacks to 400 MB and doesn't end."""
    stream = _much_of_nothing(compression)
    data = bytearray(_tiff(_PIXELS, compression=compression, rowsperstrip=HEIGHT))
    file = io.BytesIO(data + stream)
    with tifffile.TiffFile(file, mode="r+b") as tiff:
        tags = tiff.pages[0].tags
        tags["StripOffsets"].overwrite([len(data)])
        tags["StripByteCounts"].overwrite([len(stream)])
    return file.getvalue()


def _much_of_nothing(compression):
    """Zeros, 400 MB of them, packed."""
    packer = zlib.compressobj() if compression == "zlib" else zstandard.ZstdCompressor().compressobj()
    megabyte = bytes(1_000_000)
    if compression == "zlib":  # what follows a full flush doesn't depend on what came before it
        start = packer.compress(megabyte) + packer.flush(zlib.Z_FULL_FLUSH)
        return start + 399 * (packer.compress(megabyte) + packer.flush(zlib.Z_FULL_FLUSH))
    return b"".join(packer.compress(megabyte) for _ in range(400)) + packer.flush()


def _bomb_png():
    """A comment of 400 MB in 400 kB, and no pixels."""
    data = imagecodecs.png_encode((_PIXELS * 6).astype(np.uint8))
    body = b"zTXtComment\0\0" + _much_of_nothing("zlib")
    chunk = struct.pack(">I", len(body) - 4) + body + struct.pack(">I", imagecodecs.zlib_crc32(body))
    return data[:33] + chunk


def _circle_tiff():
    """A page that is followed by itself."""
    data = bytearray(_tiff(_PIXELS))
    start = struct.unpack_from("<I", data, 4)[0]
    end = start + 2 + 12 * struct.unpack_from("<H", data, start)[0]
    data[end : end + 4] = struct.pack("<I", start)
    struct.pack_into("<H", data, start, 0)
    return bytes(data)


def _sized_png(width, height):
    data = bytearray(imagecodecs.png_encode((_PIXELS * 6).astype(np.uint8)))
    data[16:24] = struct.pack(">II", width, height)
    data[29:33] = struct.pack(">I", imagecodecs.zlib_crc32(bytes(data[12:29])))
    return bytes(data)


def _jpeg(width, height):
    file = io.BytesIO()
    Pillow.fromarray((_PIXELS * 6).astype(np.uint8)).resize((width, height)).save(file, "JPEG")
    return file.getvalue()


def _sized_jpeg(width, height):
    """Cut in the middle of the first rows."""
    data = bytearray(_jpeg(WIDTH, HEIGHT))
    at = data.index(b"\xff\xc0") + 5
    data[at : at + 4] = struct.pack(">HH", height, width)
    return bytes(data)


def _ktx2(pixels, compress):
    rng = np.random.default_rng(13)
    levels = tuple(rng.random((6, n, n, 3), np.float32) for n in (16, 8, 4, 2, 1))
    return write_ktx2(Ktx2Texture(pixels, levels), compress)


def _sized_ktx2(width):
    data = bytearray(_ktx2("rgba16f", 3))
    data[20:28] = struct.pack("<II", min(width, 4096), min(width, 4096))
    return bytes(data)


if __name__ == "__main__":
    print(f"{len(write_corpus(Path(sys.argv[1])))} files")
