"""The ferry harbour: a quay with its terminal, a ferry at the far berth, a mole with a lighthouse, hills.

Metres; +z looks out to sea, +x (left in the picture) is the ferry's side. The quay's top is y = 0.
"""

from functools import partial

import numpy as np

from .paints import banded, cell_hash, paved, plain, ribbed, ringed, windowed
from .shading import Lamp
from .shapes import box, cylinder

EYE = np.array([0.85, 1.75, 0.6])
SEA_LEVEL = -2.8
CONTAINER_COLOURS = [
    (0.32, 0.06, 0.04), (0.05, 0.13, 0.30), (0.45, 0.22, 0.05), (0.10, 0.26, 0.16),
    (0.42, 0.42, 0.40), (0.50, 0.36, 0.06), (0.06, 0.22, 0.28),
]  # fmt: skip
CAR_COLOURS = [(0.5, 0.5, 0.52), (0.30, 0.02, 0.02), (0.02, 0.04, 0.10), (0.6, 0.6, 0.6), (0.03, 0.03, 0.03)]
WHITE, NAVY, YELLOW, STEEL = (0.72, 0.72, 0.70), (0.02, 0.045, 0.13), (0.62, 0.42, 0.03), (0.22, 0.23, 0.25)


def shapes(lit=0.0):
    """All shapes; `lit` is the share of windows that shine."""
    return [
        *quay(),
        *ferry(lit),
        *terminal(lit),
        *gangway(lit),
        *containers(),
        *crane(),
        *cars(),
        *mole(),
        *tug(),
        *lamp_posts(),
    ]


def quay():
    stone, wall, middle = (0.26, 0.25, 0.235), (0.16, 0.15, 0.14), -95
    marks = [(x0, x1, z0 - middle, z1 - middle, colour) for x0, x1, z0, z1, colour in quay_marks()]
    yield box((0, -2.0, middle), (640, 4.0, 208), paved(stone, 2.5, marks))
    yield box((0, -1.4, 9.15), (640, 2.2, 0.3), plain(wall))
    for x in range(-63, 64, 14):
        yield cylinder((x, 0, 8.0), 0.28, 0.45, plain((0.05, 0.05, 0.05), gloss=0.5))
        yield cylinder((x, 0.45, 8.0), 0.36, 0.16, plain(YELLOW, gloss=0.5))


def quay_marks():
    """Paint on the quay: its edge, the lanes of the cars, a crossing, a bay that must stay free."""
    yield (-320, 320, 6.55, 6.8, YELLOW)
    for lane in range(4):
        x = 6.9 + 4.1 * lane
        for dash in range(9):
            yield (x - 0.08, x + 0.08, -30 + 4 * dash, -28 + 4 * dash, WHITE)
    for stripe in range(9):
        yield (-5.0 + 1.1 * stripe, -4.45 + 1.1 * stripe, -4.6, -1.6, WHITE)
    for stripe in range(5):
        yield (-14.0, -7.0, -0.6 + 1.2 * stripe, 0.0 + 1.2 * stripe, YELLOW)


def ferry(lit, centre=(40.0, 0.0, 54.0), turn=-9.0):
    """A car ferry of 104 m: navy hull, white decks, an ochre funnel."""
    place = partial(_placed, np.array(centre), turn)
    hull = banded((0.26, 0.03, 0.02), NAVY, at=-3.6, gloss=0.6)
    deck = partial(windowed, WHITE, lit=lit, glass=(0.02, 0.03, 0.05))
    yield place(box, (0, 1.6, 0), (92, 9.0, 17), hull)
    yield place(cylinder, (-46, -2.9, 0), 8.5, 9.0, hull)
    yield place(box, (0, 5.6, 0), (92.4, 0.5, 17.3), plain(WHITE))
    yield place(box, (2, 8.0, 0), (86, 4.4, 16.4), deck(cell=(2.4, 4.4), opening=(1.5, 1.3), seed=2))
    yield place(box, (3, 11.8, 0), (78, 3.2, 16.4), deck(cell=(1.9, 3.2), opening=(1.2, 1.2), seed=5))
    yield place(box, (-14, 14.9, 0), (40, 3.0, 15.4), deck(cell=(3.1, 3.0), opening=(2.2, 1.2), seed=6))
    yield place(box, (-27, 17.8, 0), (11, 2.8, 18.6), deck(cell=(1.4, 2.8), opening=(1.2, 1.2), seed=8))
    funnel = banded((0.6, 0.30, 0.03), (0.05, 0.05, 0.06), at=1.7, gloss=0.4)
    yield place(box, (15, 16.6, 0), (8, 6.5, 6), funnel)
    yield place(cylinder, (-24, 19.2, 0), 0.35, 8.0, plain(WHITE))
    yield place(box, (-24, 23.0, 0), (0.5, 0.4, 5.0), plain(WHITE))
    for x in (-6, 1, 26, 33):
        yield place(box, (x, 14.6, -8.2), (5.2, 1.7, 2.2), plain((0.75, 0.22, 0.02), gloss=0.4))
    yield place(box, (47.2, 4.0, 0), (2.4, 8.0, 11.0), plain(STEEL))


def terminal(lit):
    """The passenger hall behind the viewer: glass under a floating roof, a clock tower at its end."""
    glass = windowed((0.30, 0.31, 0.32), (3.2, 3.6), (2.9, 3.2), lit=lit, glow=(34, 28, 19), seed=11)
    yield box((-6, 5.4, -44), (84, 10.8, 22), glass)
    yield box((-6, 11.3, -41.5), (94, 0.7, 31), plain((0.55, 0.55, 0.54)))
    for x in range(-48, 41, 11):
        yield cylinder((x, 0, -28), 0.3, 11.0, plain((0.6, 0.6, 0.6), gloss=0.3))
    brick = windowed((0.28, 0.11, 0.07), (3.0, 4.2), (0.9, 1.8), lit=lit, seed=12)
    yield box((44, 11.0, -42), (8, 22, 8), brick)
    yield box((44, 22.6, -42), (8.8, 1.2, 8.8), plain((0.5, 0.48, 0.42)))
    yield cylinder((44, 23.2, -42), 2.6, 2.4, plain((0.12, 0.30, 0.24)))
    yield box((-78, 4.5, -60), (44, 9, 30), ribbed((0.20, 0.26, 0.32), pitch=1.1))


def gangway(lit):
    """The covered bridge on which passengers walk from the terminal to the ferry."""
    glass = windowed((0.50, 0.50, 0.50), (2.6, 3.0), (2.3, 1.7), lit=lit, glow=(30, 28, 24), seed=21)
    yield box((31, 8.2, 4.5), (3.2, 3.0, 76), glass)
    for z in (-26, -9, 7):
        yield box((31, 3.3, z), (2.4, 6.6, 0.7), plain((0.4, 0.4, 0.4)))


def containers():
    """Stacks on the right, one to four high."""
    count = 0
    for row, z in enumerate((-24.0, -15.0, -6.0)):
        for column, x in enumerate((-30.0, -43.0, -56.0, -69.0)):
            high = 1 + int(4 * cell_hash(row, column, 31))
            for level in range(high):
                colour = CONTAINER_COLOURS[(count * 5 + level * 3) % len(CONTAINER_COLOURS)]
                count += 1
                yield box((x, 1.3 + 2.6 * level, z), (12.2, 2.56, 2.44), ribbed(colour))


def crane():
    """A gantry crane at the quay's edge, its boom out over the water."""
    paint = plain((0.10, 0.22, 0.42), gloss=0.3)
    for x in (-58, -74):
        for z in (-10, 6):
            yield box((x, 14, z), (1.1, 28, 1.1), paint)
        yield box((x, 16, -2), (0.9, 1.2, 17), paint)
    for x in (-61, -71):
        yield box((x, 28.4, 12), (1.0, 1.8, 78), paint)
    yield box((-66, 31, -12), (9, 5, 9), plain((0.6, 0.6, 0.58)))
    yield box((-66, 38, 5), (0.9, 18, 0.9), paint)
    yield box((-66, 24.5, 24), (3.0, 2.6, 3.2), plain(YELLOW))


def cars():
    """Lanes of waiting cars on the left."""
    for lane in range(3):
        for place in range(7):
            x, z = 9.0 + 4.1 * lane, -21.0 + 6.2 * place - 1.4 * lane
            if z > 4 or cell_hash(lane, place, 41) > 0.82:
                continue
            colour = CAR_COLOURS[(3 * lane + 2 * place) % len(CAR_COLOURS)]
            yield box((x, 0.72, z), (1.8, 0.8, 4.3), plain(colour, gloss=1.0))
            yield box((x, 1.35, z - 0.3), (1.6, 0.6, 2.3), plain((0.03, 0.04, 0.05), gloss=1.0))
            for wheel in (-1.35, 1.35):
                yield box((x, 0.32, z + wheel), (1.84, 0.64, 0.66), plain((0.02, 0.02, 0.02)))


def mole():
    """The breakwater with its lighthouse, right of the middle."""
    yield box((-131, -1.6, 150), (150, 4.6, 9), plain((0.17, 0.165, 0.155)))
    yield cylinder((-72, 0.4, 150), 3.4, 2.4, plain((0.4, 0.4, 0.38)))
    yield cylinder((-72, 2.8, 150), 2.5, 17.5, ringed((0.55, 0.04, 0.03), WHITE, 3.5))
    yield cylinder((-72, 20.3, 150), 3.1, 0.6, plain(STEEL))
    yield cylinder((-72, 20.9, 150), 1.6, 2.8, plain((0.05, 0.06, 0.07), gloss=1.0))
    yield cylinder((-72, 23.7, 150), 2.0, 1.2, plain((0.45, 0.04, 0.03)))


def tug(centre=(-47.0, 0.0, 58.0), turn=24.0):
    place = partial(_placed, np.array(centre), turn)
    yield place(box, (0, -2.0, 0), (19, 3.2, 6.4), banded((0.02, 0.02, 0.02), (0.40, 0.05, 0.03), at=-0.2))
    yield place(cylinder, (9.5, -3.6, 0), 3.2, 3.6, plain((0.40, 0.05, 0.03)))
    yield place(box, (2.0, 1.0, 0), (8, 2.8, 4.6), windowed(WHITE, (1.6, 2.8), (0.8, 0.8), seed=61))
    yield place(box, (3.6, 3.4, 0), (3.8, 2.2, 3.8), windowed(WHITE, (1.0, 2.2), (0.85, 1.1), seed=62))
    yield place(cylinder, (-1.2, 2.4, 0), 0.7, 3.0, plain((0.6, 0.30, 0.03)))
    yield place(cylinder, (4.0, 4.5, 0), 0.12, 4.5, plain(WHITE))


POSTS = [(x, z) for x in (-46, -22, -9, 18, 46) for z in (5.4, -24.0) if (x, z) != (18, -24.0)]


def lamp_posts():
    for x, z in POSTS:
        yield cylinder((x, 0, z), 0.11, 9.0, plain(STEEL))
        yield box((x, 9.05, z), (0.5, 0.16, 1.5), plain(STEEL))


def hills(background):
    """The background with low hills along the horizon on the left and behind, blue with distance."""

    def with_hills(d):
        light = background(d)
        azimuth = np.arctan2(d[:, 0], d[:, 2])
        along = np.clip(np.cos(azimuth - 1.9) + 0.45, 0, 1)
        ridge = 0.6 + 0.25 * np.sin(5 * azimuth + 1) + 0.15 * np.sin(13 * azimuth)
        ridge += 0.05 * np.sin(37 * azimuth)
        behind = np.abs(d[:, 1]) < 0.11 * along * ridge
        flat = d[behind] * [1, 0, 1]
        flat[:, 1] = 0.02
        flat /= np.linalg.norm(flat, axis=1, keepdims=True)
        light[behind] = background(flat) * [0.42, 0.50, 0.62]
        return light

    return with_hills


def night_lamps():
    """The lamps of the night: posts in warm and cold white, the ferry's, signals in their colours."""
    sodium, cold, warm = np.array([1.75, 0.88, 0.12]), np.array([0.85, 1.0, 1.4]), np.array([1.35, 0.96, 0.5])
    for k, (x, z) in enumerate(POSTS):
        yield Lamp(np.array([x, 8.78, z]), (sodium if k % 3 else cold) * 650, 0.17)
    for k in range(9):
        yield _ferry_lamp((-38 + 9.5 * k, 10.4, -8.9), (cold if k % 4 == 1 else warm) * 45, 0.10)
    for k in range(5):
        yield _ferry_lamp((-32 + 12.0 * k, 17.0, -8.4), warm * 30, 0.10)
    yield _ferry_lamp((-24, 27.6, 0), cold * 120, 0.12)
    yield _ferry_lamp((-27, 18.2, -9.6), np.array([2.6, 0.08, 0.05]) * 45, 0.12)
    yield _ferry_lamp((47, 8.6, -5.0), warm * 200, 0.15)
    for x in range(-40, 41, 16):
        yield Lamp(np.array([x, 10.6, -27.0]), warm * 220, 0.14)
    for x, z in ((-58, 6.8), (-74, 6.8), (-66, 44.0), (-66, -12.0)):
        yield Lamp(np.array([x, 27.0, z]), cold * 900, 0.20)
    yield Lamp(np.array([-66, 47.6, 5.0]), np.array([3.2, 0.06, 0.04]) * 30, 0.10)
    yield Lamp(np.array([-72, 22.4, 147.9]), np.array([1.2, 1.0, 0.6]) * 4200, 0.32)
    yield Lamp(np.array([-57.5, 2.0, 150]), np.array([0.08, 1.35, 0.35]) * 160, 0.16)
    yield Lamp(np.array([-110, 2.0, 150]), np.array([3.2, 0.08, 0.05]) * 160, 0.16)
    for k in range(26):  # the town on the far shore
        spread = cell_hash(k, 0, 51), cell_hash(k, 1, 51)
        azimuth = np.radians(58 + 92 * spread[0])
        colour = (sodium, warm, cold, np.array([0.3, 1.3, 0.9]))[int(4 * spread[1] ** 1.5)]
        away = 500 + 500 * spread[1]
        height = 6 + 46 * cell_hash(k, 2, 51)
        yield Lamp(np.array([away * np.sin(azimuth), height, away * np.cos(azimuth)]), colour * 1500, 0.5)


def _ferry_lamp(place, intensity, radius):
    shape = _placed(np.array((40.0, 0.0, 54.0)), -9.0, box, place, (0.1, 0.1, 0.1), None)
    return Lamp(shape.centre, intensity, radius)


def _placed(centre, turn_deg, make, place, *rest):
    """A box or cylinder placed in the axes of something that stands at `centre`, turned about y."""
    angle = np.radians(turn_deg)
    x, y, z = place
    turned = (x * np.cos(angle) + z * np.sin(angle), y, z * np.cos(angle) - x * np.sin(angle))
    shape = make(centre + turned, *rest)
    return shape._replace(turn=angle)
