"""Procedural skies for the sun's separation: what a camera may bring home from a harbour.

Relative radiance; elevations and azimuths in degrees, azimuth from +z towards +x.
"""

import numpy as np

from skykiln.light.bright_regions import SUN_RADIUS
from skykiln.light.directions import panorama_directions

HEIGHT = 512


def toward(azimuth, elevation):
    a, e = np.radians([azimuth, elevation])
    return np.array([np.cos(e) * np.sin(a), np.sin(e), np.cos(e) * np.cos(a)])


def away_from(place, height=HEIGHT):
    """Angle in degrees between each pixel and a direction. (H, W)."""
    d = panorama_directions(2 * height, height)
    return np.degrees(2 * np.arcsin(np.minimum(1, np.linalg.norm(d - place, axis=-1) / 2)))


def with_disc(sky, place, colour, radius=SUN_RADIUS, parts=32):
    """A uniform disc added: every pixel by the share of it that the disc covers."""
    height, width, _ = sky.shape
    step = (np.arange(parts) + 0.5) / parts
    rows, columns = np.nonzero(away_from(place, height) < np.degrees(radius) + 360 / width)
    latitude = np.pi * (0.5 - (rows[:, None, None] + step[:, None]) / height)
    longitude = np.pi - 2 * np.pi * (columns[:, None, None] + step) / width
    d = np.stack(np.broadcast_arrays(
        np.cos(latitude) * np.sin(longitude), np.sin(latitude), np.cos(latitude) * np.cos(longitude)
    ), -1)  # fmt: skip
    inside = np.linalg.norm(d - place, axis=-1) < 2 * np.sin(radius / 2)
    share = (inside * np.cos(latitude)).sum((1, 2)) / np.broadcast_to(
        np.cos(latitude), inside.shape
    ).sum((1, 2))
    sky = sky.copy()
    sky[rows, columns] += (share[:, None] * colour).astype(np.float32)
    return sky


def graded(zenith, horizon, ground, height=HEIGHT):
    """A sky between two colours over a plain ground. (H, W, 3) float32."""
    y = np.sin(np.pi * (0.5 - (np.arange(height) + 0.5) / height))[:, None, None]
    sky = np.array(zenith) + (np.array(horizon) - zenith) * (1 - np.maximum(y, 0)) ** 4
    return np.repeat(np.where(y > 0, sky, ground), 2 * height, axis=1).astype(np.float32)


def glow(place, radiance, scale, height=HEIGHT):
    """An aureole that falls by e within `scale` degrees."""
    return (radiance * np.exp(-away_from(place, height) / scale))[..., None]


NOON = toward(25.3, 58.2)
LOW = toward(-43.7, 4.1)


def clear_noon(height=HEIGHT, place=NOON):
    sky = graded((0.3, 0.5, 1.0), (0.9, 1.0, 1.1), 0.3, height) + glow(place, 20, 4, height)
    return with_disc(sky.astype(np.float32), place, np.array([1.0, 0.95, 0.85]) * 2e5)


def hazy_evening(height=HEIGHT):
    haze = glow(LOW, 1, 6, height) * np.array([60, 40, 18])
    sky = graded((0.3, 0.4, 0.7), (1.5, 1.2, 0.9), 0.2, height) + haze
    return with_disc(sky.astype(np.float32), LOW, np.array([1.0, 0.55, 0.2]) * 4e3)


def clipped_noon(height=HEIGHT, place=NOON, glare=0.35, end=60):
    """Veiling glare around the sun, falling by e within `glare` degrees, and where the sensor ends."""
    sky = clear_noon(height, place) + glow(place, 3e3, glare, height)
    return np.minimum(sky, end).astype(np.float32)


def behind_thin_cloud():
    random = np.random.default_rng(4)
    texture = random.random((HEIGHT // 8, HEIGHT // 4))
    texture = 0.7 + 0.6 * np.kron(texture, np.ones((8, 8)))[..., None]
    sky = (graded((0.8, 0.85, 0.9), (0.9, 0.9, 0.9), 0.3) + glow(NOON, 25, 5)) * texture
    return with_disc(sky.astype(np.float32), NOON, np.array([1.0, 0.97, 0.9]) * 6e3)


def overcast():
    """No sun, but a broad bright place where it stands."""
    return (graded((1, 1, 1), (0.4, 0.4, 0.4), 0.1) + glow(NOON, 3, 20)).astype(np.float32)


def overcast_with_a_lamp():
    return with_disc(overcast(), toward(10, 12), np.array([500.0, 400, 300]), np.radians(0.2))


def evening_over_water():
    """The hazy evening with glints under the sun, a fourth as bright as it and together a third of it."""
    sky, d = hazy_evening(), panorama_directions(2 * HEIGHT, HEIGHT)
    below = (np.abs(np.arctan2(d[..., 0], d[..., 2]) - np.radians(-43.7)) < 0.03) & (d[..., 1] < -0.02)
    glints = below & (np.random.default_rng(5).random(below.shape) < 0.008) & (d[..., 1] > -0.2)
    sky[glints] = np.array([1.0, 0.55, 0.2]) * 1e3
    return sky


def night_with_lamps():
    sky, random = graded((2e-4, 2e-4, 4e-4), (1e-3, 8e-4, 5e-4), 2e-4), np.random.default_rng(6)
    for _ in range(40):
        place = toward(random.uniform(-180, 180), random.uniform(-10, 25))
        colour = random.random(3) * np.array([40, 30, 15]) + 5
        sky = with_disc(sky, place, colour, np.radians(random.uniform(0.1, 0.5)), parts=8)
    return sky


def moonlit():
    """A moon over a dark harbour with a few far lights."""
    sky = graded((2e-4, 2e-4, 4e-4), (1e-3, 8e-4, 5e-4), 2e-4)
    for azimuth in range(0, 60, 7):
        sky = with_disc(sky, toward(azimuth, -0.8), np.array([60.0, 40, 15]), np.radians(0.02), parts=64)
    return with_disc(sky, NOON, np.array([250.0, 240, 220]))
