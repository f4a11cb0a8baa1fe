"""From decoded pictures to a probe's panorama, step by step, with the facts that each step leaves.

The order: what no sky holds is repaired; colour is brought to the working space; the layout becomes a
panorama, its ground filled in and turned upright in the same step; light is scaled to what was measured.
A ValueError of the numerics becomes a FileError that names the file.
"""

import contextlib
import math
from typing import NamedTuple

import numpy as np

from ..errors import FileError
from ..formats.image import Image
from ..light import colour, ground, layout_choice, layouts, orientation
from ..light.calibrated_sky import Measured, MeasuredPatch, calibrated_sky, scaled
from ..light.calibration import card_luminance
from ..light.luminance_limit import limited
from ..light.repair import repair_pixels
from ..light.separate_sun import with_restored_sun
from ..quantities import percent

METER_ERROR = 0.01  # less than any meter's (DIN 5032-7, class L: 3 %; from memory)
DOUBTFUL = 0.05  # shift of the scale by that error which users are told of


class Intake(NamedTuple):
    """What becomes of a source.

    panorama : (H, W, 3) float32; places : as of `repair_pixels`, in the picture
    units : of radiance, 'relative' or 'cd/m2'; facts : what is told of it, in JSON's types
    """

    panorama: np.ndarray
    places: np.ndarray
    units: str
    facts: dict


@contextlib.contextmanager
def told_of(name, hint=""):
    """Mistakes that the numerics find are the file's."""
    try:
        yield
    except ValueError as error:
        raise FileError(f"{name}: {error}{hint}") from error


def taken_in(name, image: Image, probe) -> Intake:
    """All steps.

    Parameters: name : of the file, for messages; image : of six files, `joined`
    """
    weights = colour.weights_of(colour.SPACES[probe.working])
    pixels, places, repair_facts = _repaired(name, image.pixels)
    pixels, colour_facts = _in_working_space(name, pixels, image.chromaticities, probe)
    panorama, layout_facts = _as_panorama(name, image._replace(pixels=pixels), probe)
    panorama, units, light_facts = _calibrated(name, panorama, image.white_luminance, probe, weights)
    light_facts["limited"] = None
    if probe.max_luminance is not None and probe.sun_action == "keep":
        panorama, light_facts["limited"] = under_limit(panorama, probe.max_luminance, weights)
    warnings = [*image.warnings, *layout_facts.pop("warnings"), *light_facts.pop("warnings")]
    facts = {"header": image.facts, **repair_facts, **colour_facts, **layout_facts, **light_facts}
    return Intake(panorama, places, units, {**facts, "warnings": warnings})


def under_limit(panorama, largest, weights):
    """A panorama held to a luminance, and what that took."""
    pixels, share, illuminance = limited(panorama, largest, weights)
    return pixels, {"max_luminance": largest, "lost_share": share, "lost_illuminance": illuminance}


def joined(paths, images) -> Image:
    """Six images of faces as one, (6, n, n, 3)."""
    first = images[0]
    for path, image in zip(paths, images, strict=True):
        height, width = image.pixels.shape[:2]
        if image.pixels.shape != first.pixels.shape or height != width:
            raise FileError(f"{path}: {width} x {height}; six faces must be squares of one size")
        if image.chromaticities != first.chromaticities or image.white_luminance != first.white_luminance:
            raise FileError(f"{path}: its colour space is not that of {paths[0]}; export all six alike")
        if image.uncovered is not None:
            raise FileError(f"{path}: does not cover its whole face; export it uncropped")
    warnings = tuple(dict.fromkeys(warning for image in images for warning in image.warnings))
    return first._replace(pixels=np.stack([image.pixels for image in images]), warnings=warnings)


def _repaired(name, pixels):
    flat = pixels.reshape(-1, *pixels.shape[-2:])
    with told_of(name, ", so nothing can be repaired; export it again"):
        mended, repairs, places = repair_pixels(flat)
    return mended.reshape(pixels.shape), places, {"repaired": repairs._asdict()}


def _in_working_space(name, pixels, chromaticities, probe):
    known = chromaticities is not None
    space = colour.Chromaticities(*chromaticities) if known else colour.SPACES[probe.assumed]
    clipped = {"pixels": 0, "deepest": 0.0}
    if not np.allclose(space, colour.SPACES[probe.working], atol=2e-3):
        with told_of(name, "; say what its colours are with another export"):
            matrix = colour.rgb_to_rgb(space, colour.SPACES[probe.working])
        flat = colour.converted(pixels.reshape(-1, *pixels.shape[-2:]), matrix)
        pixels = flat.pixels.reshape(pixels.shape)
        clipped = {"pixels": flat.out_of_gamut, "deepest": flat.deepest}
    facts = {"chromaticities": np.asarray(space).tolist(), "assumed": not known, "working": probe.working}
    return pixels, {"colour": facts, "out_of_gamut": clipped}


def _as_panorama(name, image, probe):
    turn = orientation.source_to_world(
        math.radians(probe.pitch_deg), math.radians(probe.roll_deg), probe.flip, probe.up
    )
    height, width = image.pixels.shape[-3:-1]
    convert = _of_faces if image.pixels.ndim == 4 else _of_picture
    with told_of(name):
        panorama, layout, convention, warnings = convert(name, image, probe, turn)
    facts = {
        "layout": layout,
        "face_axes": convention,
        "width": width,
        "height": height,
        "uncovered": 0 if image.uncovered is None else int(image.uncovered.sum()),
        "panorama": {"width": panorama.shape[1], "height": panorama.shape[0]},
        "warnings": warnings,
    }
    return panorama, facts


def _of_faces(name, image, probe, turn):
    if probe.layout != "auto":
        raise FileError(f"{name}: holds the six faces of a cube; remove layout: {probe.layout}")
    convention = probe.face_axes
    if convention == "auto":
        convention = image.facts.get("cube_axes") or layouts.likely_convention(image.pixels)
    world = layouts.world_faces(image.pixels, convention)
    return layouts.panorama_of_faces(world, turn), "faces", convention, []


def _of_picture(name, image, probe, turn):
    picture, (height, width) = image.pixels, image.pixels.shape[:2]
    layout = probe.layout
    if layout == "auto":
        layout = layout_choice.likely_layout(width, height, image.envmap)
    layout_choice.check_fit(width, height, layout)
    needed = layouts.LAYOUTS[layout].upper
    if image.uncovered is not None:
        if not layout.startswith("equirect") or probe.ground is None:
            what = "set ground:" if layout.startswith("equirect") else "export it uncropped"
            raise ValueError(f"{int(image.uncovered.sum())} of its pixels are not covered; {what}")
        needed, picture = True, ground.filled(picture, image.uncovered, *probe.ground)
    if needed and probe.ground is None:
        raise ValueError(f"layout {layout} shows the sky alone; set ground:")
    unused = [] if needed or probe.ground is None else ["ground: the picture covers the whole sphere"]
    convention = layout_choice.face_convention(picture, layout, probe.face_axes)
    return layouts.panorama_from(picture, layout, convention, probe.ground, turn), layout, convention, unused


def _calibrated(name, panorama, white_luminance, probe, weights):
    measured = _measured(probe)
    if not measured.names and white_luminance is not None:
        measured = Measured(white_luminance=white_luminance * 2.0**probe.exposure_ev)
    facts = {"calibrated_by": measured.names, "white_gains": [1.0] * 3, "restored_lux": 0.0, "warnings": []}
    if not measured.names:
        scale = 2.0**probe.exposure_ev
        with told_of(name, "; lower exposure_ev"):
            return scaled(panorama, scale), "relative", {**facts, "scale": scale}
    with told_of(name):
        sky = calibrated_sky(panorama, measured, weights)
    facts |= {"scale": sky.scale, "white_gains": sky.gains.tolist(), "restored_lux": sky.lost_lux}
    facts["warnings"] = _doubts(sky.leverage)
    if sky.lost_lux > 0 and probe.sun_action == "keep":  # else the light that it becomes is given more
        return with_restored_sun(sky.pixels, sky.sun, sky.lost_lux, weights), "cd/m2", facts
    return sky.pixels, "cd/m2", facts


def _doubts(leverage):
    """Where meters as good as they come leave the factor open."""
    if leverage is None or leverage * METER_ERROR <= DOUBTFUL:
        return []
    error, *moved = (percent(METER_ERROR * share) for share in (1, leverage, leverage - 1))
    told = "the sun is clipped: {} of horizontal_lux moves the scale by {}, of sun_lux by {}; measure a patch"
    return [told.format(error, *moved)]


def _measured(probe) -> Measured:
    return Measured(probe.horizontal_lux, probe.sun_lux, _patch(probe), probe.white_luminance)


def _patch(probe):
    """Its direction turned back by the yaw, which the panorama has not been given yet."""
    patch = probe.patch
    if patch is None:
        return None
    direction = orientation.turn_of(math.radians(probe.yaw_deg)).T @ np.array(patch.direction)
    luminance = patch.cd_m2 or card_luminance(patch.reflectance, patch.lux)
    return MeasuredPatch(
        direction / np.linalg.norm(direction), math.radians(patch.size_deg) / 2, luminance, patch.balance
    )
