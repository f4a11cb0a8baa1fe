"""Makes the sample skies and probes of the ferry harbour: python sample_assets/make_samples.py [NAME...]

Procedural and deterministic: nothing here is random, and no file is read. Needs NumPy and OpenEXR.
"""

import sys
from functools import partial
from pathlib import Path

import numpy as np
from making import concourse, harbour, skies
from making.files import write_exr, write_radiance_hdr
from making.panorama import LUMINANCE, add_disc, direction, rendered
from making.shading import Sea, World, add_lamps, light_of_sky, picture_of
from making.shapes import casters

HERE = Path(__file__).parent
WIDTH, HEIGHT = 1024, 512
NOON = {
    "sun": direction(150, 58),
    "sun_colour": (1.05, 1.0, 0.92),
    "sun_luminance": 1.42e9,
    "zenith_luminance": 2600.0,
    "palette": ((0.20, 0.52, 1.35), (0.86, 1.0, 1.22), (1.05, 1.0, 0.95), (0.86, 1.0, 1.22)),
}
EVENING = {
    "sun": direction(-44, 5.5),
    "sun_colour": (1.75, 0.86, 0.22),
    "sun_luminance": 2.1e8,
    "zenith_luminance": 420.0,
    "palette": ((0.28, 0.52, 1.20), (1.60, 0.88, 0.42), (2.0, 0.80, 0.16), (1.10, 0.88, 1.10)),
}


def ferry_noon():
    return clear_day(NOON, slope_variance=0.012) / 4000


def low_sun_evening():
    return clear_day(EVENING, slope_variance=0.006) / 8000


def clear_day(day, slope_variance):
    """The harbour under a clear sky; cd/m2."""
    sun_colour = np.array(day["sun_colour"]) / (np.array(day["sun_colour"]) @ LUMINANCE)
    sun_radiance = day["sun_luminance"] * sun_colour
    sky = harbour.hills(lambda d: skies.clear_sky(d, day["sun"], day["zenith_luminance"], day["palette"]))
    facing = np.pi * np.sin(skies.SUN_RADIUS) ** 2 * sun_radiance
    world = World(
        eye=harbour.EYE,
        shapes=harbour.shapes(),
        casters=casters(harbour.shapes(), 0.3),
        background=sky,
        soft_light=light_of_sky(sky, ground=0.25 / np.pi * facing * day["sun"][1]),
        sun=day["sun"],
        sun_illuminance=facing,
        sea=Sea(harbour.SEA_LEVEL, np.array([0.010, 0.030, 0.035]), slope_variance),
    )
    picture = rendered(picture_of(world), WIDTH, HEIGHT, samples=4)
    add_disc(picture, day["sun"], skies.SUN_RADIUS, sun_radiance)
    return picture


def overcast_quay():
    """Relative: the zenith has luminance 1."""
    sky = harbour.hills(lambda d: skies.overcast_sky(d, 5000.0))
    world = World(
        eye=harbour.EYE,
        shapes=harbour.shapes(),
        casters=casters(harbour.shapes(), 0.3),
        background=sky,
        soft_light=light_of_sky(sky, ground=5000.0 * 7 / 9 * 0.2),
        sea=Sea(harbour.SEA_LEVEL, np.array([0.012, 0.024, 0.024]), 0.015),
        haze=1500.0,
    )
    return rendered(picture_of(world), WIDTH, HEIGHT, samples=4) / 5000


def night_quay():
    """cd/m2."""
    sky = harbour.hills(lambda d: skies.night_sky(d, direction(105, 2), 0.05))
    world = World(
        eye=harbour.EYE,
        shapes=harbour.shapes(lit=0.5),
        casters=casters(harbour.shapes(), 0.3),
        background=sky,
        soft_light=light_of_sky(sky, ground=0.4),
        lamps=tuple(harbour.night_lamps()),
        sea=Sea(harbour.SEA_LEVEL, np.array([0.008, 0.02, 0.02]), 0.003),
    )
    picture = rendered(picture_of(world), WIDTH, HEIGHT, samples=4)
    add_lamps(picture, world)
    return picture


def interior(viewpoint):
    """cd/m2 over 256: a half then has its finest steps where the eye has them."""
    world = concourse.world(viewpoint)
    picture = rendered(picture_of(world), 256, 128, samples=3)
    add_lamps(picture, world)
    return picture / 256


SAMPLES = {
    "ferry_noon.exr": (ferry_noon, "float"),
    "overcast_quay.hdr": (overcast_quay, "rgbe"),
    "low_sun_evening.exr": (low_sun_evening, "half"),
    "night_quay.exr": (night_quay, "half"),
    **{f"concourse/{name}.exr": (partial(interior, name), "half") for name in concourse.VIEWPOINTS},
}


def write(path, picture, pixel_type):
    path.parent.mkdir(parents=True, exist_ok=True)
    if pixel_type == "rgbe":
        write_radiance_hdr(path, picture)
    else:
        write_exr(path, picture, pixel_type)


def main(names):
    for name in names or SAMPLES:
        make, pixel_type = SAMPLES[name]
        write(HERE / name, make(), pixel_type)
        print(name)


if __name__ == "__main__":
    main(sys.argv[1:])
