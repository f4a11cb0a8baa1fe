"""A capture as it comes from a roof: tilted, in no unit, its sun clipped. And what meters showed beside it.

Made from the sample sky of a clear noon, so that the truth is known:
`python docs/make_tilted_capture.py FOLDER`
"""

import sys
from pathlib import Path

import numpy as np
import OpenEXR

from skykiln.formats.source_files import read_source
from skykiln.light.directions import panorama_directions
from skykiln.light.facing import irradiance_facing
from skykiln.light.orientation import source_to_world, turned
from skykiln.light.photometry import horizontal_illuminance, luminance
from skykiln.light.separate_sun import separate_sun

SAMPLE = Path(__file__).parents[1] / "sample_assets" / "ferry_noon.exr"
LEVEL_LUX = 98_000
PITCH, ROLL = np.radians(4.0), np.radians(-6.0)  # what levels the capture again
CD_M2_PER_VALUE = 8_000
FULL_WELL = 22.0  # the sensor's largest value

PIPELINE = """skykiln: 1
recipes:
  roof:
    face_size: 128
    sun: {action: separate}
    specular: {levels: 6}
sources:
  roof_noon:
    file: roof_noon.exr
    recipe: roof
"""


def true_sky():
    """The sample sky in cd/m2, and its sun."""
    sky = read_source(SAMPLE).pixels
    sky = sky * np.float32(LEVEL_LUX / horizontal_illuminance(sky))
    return sky, separate_sun(sky)[1]


def captured(sky, sun):
    """What a camera makes of it: glare around the sun, then the sensor's end."""
    height, width, _ = sky.shape
    away = np.arccos(np.clip(panorama_directions(width, height) @ sun.direction, -1, 1))
    glare = 9e6 * np.exp(-away / np.radians(0.35))[..., None].astype(np.float32)
    tilted = turned(sky + glare, source_to_world(pitch=PITCH, roll=ROLL).T)
    return np.minimum(tilted / np.float32(CD_M2_PER_VALUE), FULL_WELL).astype(np.float16)


def main(folder):
    sky, sun = true_sky()
    folder.mkdir(parents=True, exist_ok=True)
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
    OpenEXR.File(header, {"RGB": captured(sky, sun)}).write(str(folder / "roof_noon.exr"))
    (folder / "pipeline.yaml").write_text(PIPELINE)
    facing = luminance(irradiance_facing(sky, sun.direction))
    print(f"level surface: {horizontal_illuminance(sky):.0f} lx, facing the sun: {facing:.0f} lx")
    print("the sun stands at", np.round(sun.direction, 4).tolist())
    print(f"and gives {luminance(sun.irradiance):.0f} lx, the sky's factor is {CD_M2_PER_VALUE}")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
