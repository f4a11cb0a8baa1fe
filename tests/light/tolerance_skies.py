"""The skies on which the filter's tolerance is proved: smooth, abrupt, sparse, coloured, and the samples.

Each is a function of the panorama's width that returns (W/2, W, 3) float32, radiance, not negative.
"""

from pathlib import Path

import numpy as np
from scipy import special
from sun_skies import with_disc

from skykiln.formats.source_files import read_source
from skykiln.light.bright_regions import SUN_RADIUS
from skykiln.light.directions import panorama_directions

SAMPLES = Path(__file__).parents[2] / "sample_assets"
BRIGHT = 1e4  # times a sky's mean radiance: pixels that the reference cuts finely on a horizon
AXIS = np.array([2.0, 3.0, 6.0]) / 7  # of no symmetry


def constant(width):
    return np.full((width // 2, width, 3), (0.3, 1.0, 2.5), np.float32)


def constant_but_for_a_black_pixel(width):
    """Nothing is common to all pixels."""
    sky = constant(width)
    sky[width // 6, width // 5] = 0
    return sky


def linear(width):
    """Another slope in each channel, each black at one point."""
    return (1 + panorama_directions(width, width // 2)).clip(0).astype(np.float32)


def zonal_harmonic(degree):
    def sky(width):
        return _from_black(special.eval_legendre(degree, panorama_directions(width, width // 2) @ AXIS))

    return sky


def random_harmonic(degree):
    """Zonal harmonics about random axes with random coefficients add up to a random one of the degree."""

    def sky(width):
        rng = np.random.default_rng(degree)
        axes = rng.normal(size=(2 * degree + 1, 3))
        cosines = panorama_directions(width, width // 2) @ (axes / np.linalg.norm(axes, axis=1)[:, None]).T
        return _from_black(special.eval_legendre(degree, cosines) @ rng.normal(size=(2 * degree + 1, 3)))

    return sky


def _from_black(values):
    """Shifted so that the smallest value is 0. A plane of values becomes three channels."""
    if values.ndim == 2:
        values = np.repeat(values[..., None], 3, axis=-1)
    return (values - values.min((0, 1))).clip(0).astype(np.float32)


def sun(*axes):
    """Radiance 1e6 over a sky of 1, towards the sum of some faces' axes; averaged over pixels."""

    def sky(width):
        place = np.sum(axes, axis=0) / np.linalg.norm(np.sum(axes, axis=0))
        ones = np.ones((width // 2, width, 3), np.float32)
        return with_disc(ones, place, np.full(3, 1e6 - 1), SUN_RADIUS, 64)

    return sky


def half_space(*axis):
    def sky(width):
        lit = panorama_directions(width, width // 2) @ np.array(axis, float) > 0
        return np.repeat(lit[..., None], 3, -1).astype(np.float32)

    return sky


def coloured_half_spaces(width):
    """One of its own in each channel."""
    axes = np.linalg.qr(np.diag(AXIS) + 1)[0]
    return (panorama_directions(width, width // 2) @ axes > 0).astype(np.float32)


def checkerboard(*edges):
    """Squares of so many pixels, one number per channel."""

    def sky(width):
        j, i = np.indices((width // 2, width))
        return np.stack([(j // n + i // n) % 2 for n in edges], axis=-1).astype(np.float32)

    return sky


def lamps(width, pure=False):
    """10,000 of one pixel each, in random places (even over the sphere) and colours, over black."""
    rng = np.random.default_rng(11)
    sky = np.zeros((width // 2, width, 3), np.float32)
    rows = (np.arccos(rng.uniform(-1, 1, 10_000)) / np.pi * (width // 2)).astype(int)
    colours = rng.random((10_000, 3))
    if pure:
        colours = np.eye(3)[colours.argmax(axis=1)]
    np.add.at(sky, (rows, rng.integers(0, width, 10_000)), colours.astype(np.float32))
    return sky


def pure_lamps(width):
    """As `lamps`, each of a single primary colour."""
    return lamps(width, True)


def one_lit_pixel(row, column):
    """At shares of height and width."""

    def sky(width):
        black = np.zeros((width // 2, width, 3), np.float32)
        black[int(row * (width // 2)), int(column * width)] = (1.0, 0.7, 0.2)
        return black

    return sky


def sample(name):
    def sky(width):
        path = next(SAMPLES.rglob(f"{name}.*"))
        pixels = read_source(path).pixels[..., :3].astype(np.float64)
        step = pixels.shape[1] / width
        if step < 1:
            pixels = pixels.repeat(int(1 / step), 0).repeat(int(1 / step), 1)
        else:
            step = int(step)
            pixels = pixels.reshape(width // 2, step, width, step, 3).mean((1, 3))
        return pixels.astype(np.float32)

    return sky


X, Y, Z = np.eye(3)

SKIES = {
    "constant": constant,
    "constant but for a black pixel": constant_but_for_a_black_pixel,
    "linear": linear,
    **{f"zonal harmonic {n}": zonal_harmonic(n) for n in range(1, 9)},
    **{f"random harmonic {n}": random_harmonic(n) for n in range(1, 9)},
    "sun in the middle of a face": sun(X),
    "sun at the zenith": sun(Y),
    "sun on an edge": sun(X, Z),
    "sun on an edge of +y": sun(Y, -Z),
    "sun on a corner": sun(X, Y, Z),
    "half space +y": half_space(0, 1, 0),
    "half space -x": half_space(-1, 0, 0),
    "half space x + z": half_space(1, 0, 1),
    "half space aslant": half_space(*AXIS),
    "coloured half spaces": coloured_half_spaces,
    "checkerboard 1": checkerboard(1, 1, 1),
    "checkerboards 1, 2, 4": checkerboard(1, 2, 4),
    "lamps": lamps,
    "lamps of pure colours": pure_lamps,
    "one lit pixel": one_lit_pixel(0.33, 0.21),
    "one lit pixel by the zenith": one_lit_pixel(0.0, 0.5),
    "one lit pixel on an edge": one_lit_pixel(0.5, 0.375),
    "one lit pixel below": one_lit_pixel(0.93, 0.7),
    **{name: sample(name) for name in ("ferry_noon", "overcast_quay", "low_sun_evening", "night_quay")},
}


def bright_pixels(panorama):
    """(H, W) bool: the few that outshine all else and that a horizon may cut."""
    peak = panorama.max(-1)
    bright = peak > BRIGHT * panorama.mean()
    return bright if bright.sum() <= 12 else np.zeros_like(bright)
