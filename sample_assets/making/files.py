"""Writing the samples: OpenEXR through its package, Radiance .hdr by hand."""

import numpy as np
import OpenEXR


def write_exr(path, picture, pixel_type):
    """Write (H, W, 3) as a ZIP-compressed scan-line file of 'half' or 'float'.

    Float keeps 12 bits of mantissa (an error below 1.3e-4), so that it compresses.
    """
    if pixel_type == "half":
        assert picture.max() < 65504, f"{path}: {picture.max()} is beyond half floats"
        pixels = picture.astype(np.float16)
    else:
        pixels = rounded_mantissa(picture.astype(np.float32), bits=12)
    header = {
        "compression": OpenEXR.ZIP_COMPRESSION,
        "type": OpenEXR.scanlineimage,
        "envmap": OpenEXR.ENVMAP_LATLONG,
    }
    with OpenEXR.File(header, {"RGB": pixels}) as file:
        file.write(str(path))


def rounded_mantissa(values, bits):
    """float32 values rounded to `bits` bits behind the leading one."""
    drop = 23 - bits
    words = np.ascontiguousarray(values).view(np.uint32)
    return ((words + (1 << (drop - 1))) & ~np.uint32((1 << drop) - 1)).view(np.float32)


def write_radiance_hdr(path, picture):
    """Write (H, W, 3) as a Radiance picture, run-length encoded by scan line and component.

    Source: Radiance doc/filefmts, 'Picture File Format'.
    """
    height, width = picture.shape[:2]
    header = "#?RADIANCE\n# skykiln sample: ferry harbour\nFORMAT=32-bit_rle_rgbe\n\n"
    header += f"-Y {height} +X {width}\n"
    with path.open("wb") as file:
        file.write(header.encode())
        for row in rgbe(picture):
            file.write(bytes([2, 2, width >> 8, width & 255]))
            file.write(b"".join(_runs(row[:, component]) for component in range(4)))


def rgbe(picture):
    """Shared-exponent bytes. (H, W, 3) -> (H, W, 4) uint8; decoded as (m + 0.5) 2^(e - 136)."""
    largest = picture.max(axis=-1)
    exponent = np.frexp(largest)[1]
    mantissas = np.floor(picture * np.ldexp(1.0, 8 - exponent)[..., None])
    bytes_ = np.concatenate([np.clip(mantissas, 0, 255), exponent[..., None] + 128], axis=-1)
    return np.where(largest[..., None] > 0, bytes_, 0).astype(np.uint8)


def _runs(values):
    """One component of a scan line: runs of at least 4 equal bytes, literals of at most 128 between."""
    edges = np.flatnonzero(np.diff(values)) + 1
    starts, ends = np.r_[0, edges], np.r_[edges, len(values)]
    coded, literal = bytearray(), bytearray()
    for start, end in zip(starts, ends, strict=True):
        if end - start < 4:
            literal += values[start:end].tobytes()
            continue
        _put_literals(coded, literal)
        for at in range(start, end, 127):
            coded += bytes([128 + min(127, end - at), values[start]])
    _put_literals(coded, literal)
    return bytes(coded)


def _put_literals(coded, literal):
    for at in range(0, len(literal), 128):
        piece = literal[at : at + 128]
        coded += bytes([len(piece)]) + piece
    literal.clear()
