"""Radiance pictures made byte by byte, for the tests: written from "Picture File Format"."""

import numpy as np


def hdr(width, height, body, header=(b"#?RADIANCE", b"FORMAT=32-bit_rle_rgbe")):
    return b"\n".join(header) + b"\n\n" + b"-Y %d +X %d\n" % (height, width) + bytes(body)


def random_rgbe(width, height, seed=0, runs=False):
    """(H, W, 4) uint8 with normalised mantissas, and long runs if asked for."""
    rng = np.random.default_rng(seed)
    rgbe = rng.integers(0, 256, (height, width, 4), np.uint8)
    rgbe[..., 0] |= 128
    rgbe[..., 3] = rng.integers(120, 140, (height, width))
    if runs:
        steps = np.arange(width) // 300
        rgbe = rgbe[:, steps * 300]
    return rgbe


def radiance(rgbe, exposure=1.0):
    """What Radiance's own reader makes of the pixels: (m + 0.5) 2^(e - 136), 0 where e is 0."""
    exponent = rgbe[..., 3:].astype(int)
    value = (rgbe[..., :3] + 0.5) * np.exp2(exponent - 136.0) / exposure
    return np.where(exponent > 0, value, 0.0)


def packed_line(line):
    """One scan line of new run lengths, runs of four and more packed."""
    out = [2, 2, len(line) >> 8, len(line) & 255]
    for plane in np.asarray(line).T.tolist():
        i = 0
        while i < len(plane):
            run = 1
            while i + run < len(plane) and run < 127 and plane[i + run] == plane[i]:
                run += 1
            if run >= 4:
                out += [128 + run, plane[i]]
            else:
                run = min(128, len(plane) - i)
                repeats = (k for k in range(1, run - 3) if len(set(plane[i + k : i + k + 4])) == 1)
                run = next(repeats, run)
                out += [run, *plane[i : i + run]]
            i += run
    return bytes(out)


def old_line(line):
    """One scan line of old run lengths: (1, 1, 1, n) bytes, low byte first."""
    out, i = [], 0
    pixels = [tuple(p) for p in np.asarray(line).tolist()]
    while i < len(pixels):
        run = 1
        while i + run < len(pixels) and pixels[i + run] == pixels[i]:
            run += 1
        out += pixels[i]
        left = run - 1
        while left:
            out += [1, 1, 1, left & 255]
            left >>= 8
        i += run
    return bytes(out)
