"""From the channels of an OpenEXR part to one RGB picture of its display window."""

from typing import NamedTuple

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.chromaticities import REC709, luminance_weights
from skykiln.formats.openexr_parts import LUMINANCE, RGB, Picture, Window


class _Overlap(NamedTuple):
    """Where the data window and the display window meet: slices of rows and columns of each."""

    display: tuple[slice, slice]
    data: tuple[slice, slice]


def rgb_pixels(name: str, picture: Picture, channels: dict) -> tuple[np.ndarray, np.ndarray | None]:
    """(H, W, 3) float32 of the display window, and the mask of what the data window leaves open.

    Parameters: channels : name -> the package's channel, of the picture's part
    Alpha is left: OpenEXR's colours are premultiplied, so they are radiance as they are.
    Raises: FileError where the windows don't meet.
    """
    part = picture.part
    width, height = part.display[2] - part.display[0] + 1, part.display[3] - part.display[1] + 1
    overlap = _overlap(name, part.window, part.display)
    covered = part.window == part.display or _is_whole(overlap.display, height, width)
    pixels = (np.empty if covered else np.zeros)((height, width, 3), np.float32)
    target = pixels[overlap.display]
    planes = (_plane(picture, channels, channel)[overlap.data] for channel in picture.channels)
    if picture.kind == RGB:
        for i, plane in enumerate(planes):
            target[..., i] = plane
    elif picture.kind == LUMINANCE:
        target[:] = next(planes)[..., None]
    else:
        _from_luminance_chroma(target, *planes, part.chromaticities or REC709)
    if covered:
        return pixels, None
    uncovered = np.ones((height, width), bool)
    uncovered[overlap.display] = False
    return pixels, uncovered


def _overlap(name: str, data: Window, display: Window) -> _Overlap:
    low = [max(data[axis], display[axis]) for axis in (0, 1)]
    high = [min(data[axis + 2], display[axis + 2]) + 1 for axis in (0, 1)]
    if low[0] >= high[0] or low[1] >= high[1]:
        raise FileError(
            f"{name}: its data window lies outside its display window, so nothing is seen; export it again"
        )
    of_display, of_data = (
        tuple(slice(low[axis] - window[axis], high[axis] - window[axis]) for axis in (1, 0))
        for window in (display, data)
    )
    return _Overlap(of_display, of_data)


def _is_whole(place: tuple[slice, slice], height: int, width: int) -> bool:
    return place == (slice(0, height), slice(0, width))


def _plane(picture: Picture, channels: dict, channel: str) -> np.ndarray:
    """A channel in the data window's size; what is subsampled is drawn linearly between its pixels."""
    plane = channels[channel].pixels
    for axis, step in enumerate(picture.part.sampling[channel][::-1]):
        if step > 1:
            plane = _between(plane.astype(np.float32), axis, step)
    return plane


def _between(plane: np.ndarray, axis: int, step: int) -> np.ndarray:
    """Each pixel stays where it is, the others follow linearly; the last is held to the edge.

    Not the wide filter of other readers, which swings over round a sun: chroma stays within its
    neighbours, so no channel becomes negative that was not.
    """
    place = np.arange(plane.shape[axis] * step)
    low = place // step
    high = np.minimum(low + 1, plane.shape[axis] - 1)
    weight = (place % step / np.float32(step)).astype(np.float32)
    weight = weight[:, None] if axis == 0 else weight
    below, above = plane.take(low, axis), plane.take(high, axis)
    return below + weight * (above - below)


def _from_luminance_chroma(target, luminance, red, blue, space):
    """RY = (R - Y) / Y, BY = (B - Y) / Y, and Y = r R + g G + b B with the weights of the primaries
    ("Technical Introduction to OpenEXR", luminance/chroma images)."""
    r, g, b = (np.float32(weight) for weight in luminance_weights(space))
    luminance = luminance.astype(np.float32)
    with np.errstate(invalid="ignore", over="ignore"):
        target[..., 0] = (red + np.float32(1)) * luminance
        target[..., 2] = (blue + np.float32(1)) * luminance
        target[..., 1] = (luminance - r * target[..., 0] - b * target[..., 2]) / g
