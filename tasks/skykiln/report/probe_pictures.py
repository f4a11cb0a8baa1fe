"""The pictures of a probe's page, as PNG files."""

import io

import numpy as np

from skykiln.light.thumbnails import block_means
from skykiln.report.belt import belt, off_belt, panorama_of
from skykiln.report.pictures import exposure_for, tone_mapped
from skykiln.report.ramp import coloured

SMALL_COLUMNS, PANORAMA_COLUMNS = 96, 512
LEVEL_EDGE, CHANGE_EDGE = 48, 32  # pixels of a face, in the lists of levels
DIFFERENCE_RANGE = 0.25  # relative difference at the light end of the ramp
MOST_STOPS = 16  # of the luminance scale
GREY = 128  # of what shows nothing: stands on light and on dark pages


def png(picture) -> bytes:
    """A picture (h, w, 3) uint8 as a file: quickly, not smallest."""
    from PIL import Image

    file = io.BytesIO()
    Image.fromarray(picture).save(file, "PNG", compress_level=1)
    return file.getvalue()


def small_picture(faces) -> bytes:
    """Any level as a panorama: 96 x 48."""
    seen = panorama_of(faces, SMALL_COLUMNS)
    return png(tone_mapped(seen, exposure_for(seen)))


def levels_picture(levels, irradiance) -> bytes:
    """All levels unrolled, one below the other, each 192 x 96; the irradiance, over pi, last."""
    exposure = exposure_for(levels[0])
    rows = [belt(level, LEVEL_EDGE) for level in (*levels, irradiance / np.float32(np.pi))]
    picture = tone_mapped(np.concatenate(rows), exposure)
    picture[np.tile(off_belt(LEVEL_EDGE), (len(rows), 1))] = GREY
    return png(picture)


def reduced_panorama(panorama):
    """A panorama (H, W, 3) by block means to 512 columns at most, or little more."""
    step = max(1, panorama.shape[1] // PANORAMA_COLUMNS)
    return block_means(panorama[None], step)[0]


def panorama_picture(panorama) -> bytes:
    return png(tone_mapped(panorama, exposure_for(panorama)))


def luminance_range(panorama, weights):
    """The luminances at both ends of the scale, whole powers of two: (low, high). A sun is beyond it."""
    luminance = panorama @ np.asarray(weights, panorama.dtype)
    lit = luminance[luminance > 0]
    if not lit.size:
        return 0.5, 1.0
    low, high = np.log2(np.percentile(lit, (1, 99.8)))
    high = np.ceil(high)
    low = max(np.floor(low), high - MOST_STOPS)
    return float(2.0**low), float(2.0 ** max(high, low + 1))


def luminance_picture(panorama, weights, limits) -> bytes:
    """Luminance on a logarithmic scale between two limits."""
    low, high = np.log2(limits)
    luminance = np.maximum(panorama @ np.asarray(weights, panorama.dtype), np.float32(1e-30))
    return png(coloured((np.log2(luminance) - low) / (high - low)))


def scene_picture(hit, packed, source, size):
    """The scene lit by the packed files, by the source, and their relative difference, one below the other.

    Parameters: hit : (h w,) bool, pixels that show the scene; packed, source : (k, 3) radiance of those
                size : (height, width) of one picture
    Returns:    PNG bytes; the relative difference of each pixel (k,)
    """
    height, width = size
    exposure = exposure_for(source)
    difference = relative_difference(packed, source)
    pictures = []
    for colours in (tone_mapped(packed, exposure), tone_mapped(source, exposure), shown(difference)):
        picture = np.full((height * width, 3), GREY, np.uint8)
        picture[hit] = colours
        pictures.append(picture.reshape(height, width, 3))
    return png(np.concatenate(pictures)), difference


def change_picture(before, after) -> bytes:
    """Levels before, after, and their relative difference, side by side; one level below the other.

    Parameters: before, after : lists of (6, n, n, 3)
    """
    exposure, blank = exposure_for(before[0]), off_belt(CHANGE_EDGE)
    rows = []
    for old, new in zip(before, after, strict=False):
        old, new = belt(old, CHANGE_EDGE), belt(new, CHANGE_EDGE)
        changed = shown(relative_difference(new, old))
        three = tone_mapped(old, exposure), tone_mapped(new, exposure), changed
        for picture in three:
            picture[blank] = GREY
        rows.append(np.concatenate(three, axis=1))
    return png(np.concatenate(rows))


def relative_difference(value, reference):
    """Of colours (..., 3): how far apart, relative to the reference held at 0.01 of its mean."""
    floor = 1e-2 * max(float(reference.mean()), 1e-30)
    return np.abs(value - reference).sum(-1) / np.maximum(reference.sum(-1), 3 * floor)


def shown(difference):
    """A relative difference as colours."""
    return coloured(difference / DIFFERENCE_RANGE)
