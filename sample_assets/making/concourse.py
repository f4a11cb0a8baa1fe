"""The terminal's concourse: one hall of 24 x 44 m with a mezzanine, desks, a cafe and gates.

Metres; the hall spans x -12..12, y 0..7.5, z -22..22. Windows fill the side at +x, which looks over the quay.
Radiance in cd/m2.
"""

import numpy as np

from .paints import paved, plain, ringed, varnished, windowed
from .shading import Lamp, World
from .shapes import box, casters, cylinder
from .signs import board, letters, panelled, picture

WOOD, DARK_WOOD, WHITE = (0.36, 0.21, 0.10), (0.14, 0.08, 0.045), (0.72, 0.71, 0.68)
STEEL, TEAL, RUST = (0.25, 0.26, 0.27), (0.03, 0.16, 0.18), (0.42, 0.12, 0.04)
DAY, WARM, COOL = np.array([0.92, 1.0, 1.12]), np.array([1.4, 0.95, 0.45]), np.array([1.0, 1.0, 0.96])

# Light that walls, floor and ceiling throw on each other, by the side it falls on (guessed), lx.
SOFT_LIGHT = np.array([[330, 170], [190, 260], [230, 230]])[..., None] * np.array([1.04, 1.0, 0.92])

VIEWPOINTS = {
    "hall_01": (1.5, 1.6, 1.0),
    "hall_02": (6.5, 1.6, 9.5),
    "hall_03": (-2.0, 1.6, 14.0),
    "hall_04": (8.0, 4.2, -2.0),
    "desk_01": (-7.2, 1.5, 4.5),
    "desk_02": (-7.2, 1.5, 10.5),
    "stair_01": (-5.2, 1.5, -4.6),
    "stair_02": (-9.4, 4.6, -4.9),
    "cafe_01": (1.9, 1.5, -15.7),
    "cafe_02": (-4.5, 1.4, -17.5),
    "lounge_01": (2.5, 5.1, -13.0),
    "lounge_02": (-6.5, 5.1, -18.0),
    "gate_01": (3.4, 1.5, 19.0),
    "gate_02": (-5.5, 1.5, 18.6),
}


def world(viewpoint):
    """The concourse seen from one of the viewpoints."""
    everything = shapes()
    return World(
        eye=np.array(VIEWPOINTS[viewpoint]),
        shapes=everything,
        casters=casters(everything, 0.6),
        background=outside,
        soft_light=SOFT_LIGHT,
        lamps=tuple(lamps()),
        fills=tuple(fill_lights()),
        least=2.0,
        haze=1e9,
    )


def outside(d):
    """What the panes show: a bright sky down to a hazy sea, and the pale quay."""
    up = np.clip(d[:, 1:2], 0, 1)
    sky = 2600 * (np.array([0.85, 1.0, 1.2]) * (1 - up) + np.array([0.5, 0.8, 1.5]) * up)
    sea = np.where(d[:, 1:2] > -0.09, [380.0, 520.0, 640.0], [820.0, 800.0, 760.0])
    return np.where(d[:, 1:2] > 0, sky, sea)


def shapes():
    return [*shell(), *windows(), *mezzanine(), *stair(), *desks(), *hall(), *cafe(), *lounge(), *gates()]


def shell():
    """Floor, ceiling and the three closed walls, as slabs around the room."""
    lines = [(-0.35, 0.35, -20, 20, TEAL), (-12, 12, 15.0, 15.3, (0.6, 0.4, 0.04))]
    yield box((0, -0.25, 0), (24, 0.5, 44), varnished(paved((0.44, 0.42, 0.39), 1.5, lines), gloss=0.5))
    yield box((0, 7.75, 0), (24, 0.5, 44), plain((0.62, 0.61, 0.58)))
    yield box((-12.25, 3.75, 0), (0.5, 8, 44), panelled((0.50, 0.46, 0.40), 2.75))
    yield box((0, 3.75, 22.25), (24.5, 8, 0.5), panelled((0.30, 0.38, 0.40), 4.0))
    yield box((0, 3.75, -22.25), (24.5, 8, 0.5), panelled((0.46, 0.24, 0.14), 4.0))
    for z in np.arange(-20, 21, 4.0):
        yield box((0, 7.2, z), (24, 0.6, 0.3), plain(DARK_WOOD))
    for x in (-8.0, 0.0, 8.0):
        yield box((x, 6.86, 4), (0.35, 0.08, 34), plain((0.8, 0.8, 0.8), emission=1900 * COOL))


def windows():
    """The glazed side: a low sill, posts and transoms; the panes are open to the outside."""
    yield box((12.2, 0.3, 0), (0.4, 0.6, 44), plain(WHITE))
    yield box((12.2, 7.3, 0), (0.4, 0.6, 44), plain(STEEL))
    for z in np.arange(-22, 23, 2.75):
        yield box((12.1, 4.0, z), (0.3, 8.0, 0.14), plain(STEEL))
    yield box((12.1, 3.6, 0), (0.2, 0.16, 44), plain(STEEL))


def mezzanine():
    yield box((0, 3.4, -14.5), (24, 0.35, 15), plain(WHITE))
    yield box((0, 3.6, -14.5), (23.9, 0.06, 14.9), plain(WOOD, gloss=0.2))
    for x in np.arange(-11.5, 12, 1.15):
        yield box((x, 4.1, -7.1), (0.05, 1.0, 0.05), plain(STEEL))
    yield box((0, 4.6, -7.1), (24, 0.08, 0.1), plain(DARK_WOOD))
    for x in (-8.0, 0.0, 8.0):
        yield cylinder((x, 0, -7.6), 0.28, 3.3, plain(WHITE))


def stair(steps=14):
    """A straight stair along the closed wall, up to the mezzanine."""
    for k in range(steps):
        z = 0.4 - 0.52 * k
        top = 3.6 * (k + 1) / steps
        yield box((-9.6, top - 0.1, z), (2.6, 0.2, 0.56), plain(WOOD, gloss=0.15))
    for x in (-11.0, -8.2):
        for k in range(0, steps, 2):
            top = 3.6 * (k + 1) / steps
            yield box((x, top + 0.45, 0.4 - 0.52 * k), (0.05, 0.95, 0.05), plain(STEEL))


def desks():
    """Four check-in desks, each with a sign and a screen, before a wall in the house's colour."""
    yield box((-11.7, 1.8, 8.5), (0.4, 3.6, 13), plain(TEAL))
    for z in (3.6, 6.9, 10.2, 13.5):
        yield box((-10.0, 0.55, z), (0.9, 1.1, 2.3), plain(WOOD, gloss=0.2))
        yield box((-10.0, 1.13, z), (1.1, 0.06, 2.5), plain(WHITE, gloss=0.4))
        yield box((-11.4, 2.9, z), (0.1, 0.55, 2.2), letters(np.array([0.5, 0.9, 1.3]) * 220))
        yield box((-10.2, 1.42, z + 0.6), (0.06, 0.42, 0.6), plain((0.02, 0.02, 0.02), emission=90 * DAY))
    for z in (5.2, 8.5, 11.8):
        for x in (-8.3, -6.9):
            yield cylinder((x, 0, z), 0.05, 1.0, plain(STEEL))
        yield box((-7.6, 0.95, z), (1.4, 0.07, 0.03), plain(RUST))


def hall():
    """Columns, benches, the departure board, a model of a buoy on its plinth, plants."""
    for z in (-2.0, 6.0, 14.0):
        yield cylinder((4.6, 0, z), 0.42, 7.0, ringed((0.62, 0.61, 0.58), (0.56, 0.55, 0.53), 1.2))
    yield box((-1.0, 4.9, 9.0), (7.0, 1.9, 0.22), board())
    for x in (-4.0, 2.0):
        yield box((x, 6.4, 9.0), (0.06, 1.2, 0.06), plain(STEEL))
    for z in (2.0, 4.6, 11.0, 13.6):
        yield box((8.4, 0.44, z), (3.6, 0.1, 0.62), plain(WOOD, gloss=0.2))
        yield box((8.4, 0.72, z + 0.3), (3.6, 0.5, 0.06), plain(WOOD, gloss=0.2))
        for x in (6.9, 9.9):
            yield box((x, 0.2, z), (0.08, 0.4, 0.6), plain(STEEL))
    yield box((-0.5, 0.3, -2.2), (1.6, 0.6, 1.6), plain((0.1, 0.1, 0.1), gloss=0.5))
    yield cylinder((-0.5, 0.6, -2.2), 0.62, 1.1, ringed((0.55, 0.04, 0.03), WHITE, 0.55))
    yield cylinder((-0.5, 1.7, -2.2), 0.22, 0.9, plain((0.55, 0.04, 0.03)))
    for x, z in ((10.6, 7.8), (10.6, -3.5), (5.8, 17.5)):
        yield box((x, 0.35, z), (0.8, 0.7, 0.8), plain(RUST))
        yield cylinder((x, 0.7, z), 0.55, 0.9, plain((0.05, 0.16, 0.04)))
        yield cylinder((x, 1.3, z), 0.36, 0.8, plain((0.07, 0.22, 0.05)))


def cafe():
    """Below the mezzanine: a counter, shelves, round tables, pendant lamps."""
    yield box((-1.0, 0.58, -20.0), (9, 1.16, 0.8), plain(TEAL))
    yield box((-1.0, 1.19, -20.0), (9.2, 0.06, 1.0), plain(DARK_WOOD, gloss=0.5))
    for y in (1.6, 2.2):
        yield box((-1.0, y, -21.7), (8.6, 0.06, 0.5), plain(WOOD))
    for k in range(16):
        colour = ((0.4, 0.08, 0.04), (0.08, 0.22, 0.08), (0.5, 0.35, 0.05), (0.1, 0.12, 0.3))[k % 4]
        yield cylinder((-4.9 + 0.52 * k, 1.63 + 0.6 * (k % 2), -21.7), 0.09, 0.32, plain(colour, gloss=0.6))
    yield box((-1.0, 2.85, -21.95), (5.5, 0.5, 0.08), letters(np.array([1.5, 0.75, 0.2]) * 260))
    for x, z in TABLES:
        yield cylinder((x, 0.72, z), 0.5, 0.04, plain(WHITE, gloss=0.3))
        yield cylinder((x, 0, z), 0.05, 0.72, plain(STEEL))
        for dx in (-0.85, 0.85):
            yield box((x + dx, 0.45, z), (0.42, 0.05, 0.42), plain(RUST))
            yield box((x + 1.22 * dx, 0.7, z), (0.05, 0.5, 0.42), plain(RUST))


TABLES = [(-8.0, -13.0), (-2.0, -12.0), (0.5, -17.0), (6.0, -13.5), (8.5, -17.5), (-8.0, -18.0)]


def lounge():
    """On the mezzanine: sofas about low tables, a long shelf of books, a lit picture."""
    for x, z, colour in ((-4.0, -12.0, RUST), (5.5, -12.0, TEAL), (-4.0, -17.5, TEAL), (6.5, -17.5, RUST)):
        yield box((x, 3.85, z), (2.4, 0.45, 0.9), plain(colour))
        yield box((x, 4.15, z - 0.45), (2.4, 0.75, 0.2), plain(colour))
        yield box((x, 3.8, z + 1.3), (1.2, 0.35, 0.6), plain(DARK_WOOD, gloss=0.4))
    books = windowed(WOOD, (0.5, 0.66), (0.42, 0.5), glass=(0.2, 0.1, 0.06))
    yield box((-3.0, 4.6, -21.8), (12, 2.0, 0.35), books)
    yield box((7.5, 5.2, -21.95), (4.2, 2.0, 0.08), picture())


def gates():
    """At the far end: two doors with lit numbers, a ticket barrier between."""
    panes = windowed(STEEL, (1.7, 2.6), (1.4, 2.3), lit=1, glow=(420, 460, 500))
    for x, colour in ((-6.0, (0.25, 1.3, 0.5)), (3.0, (1.3, 0.8, 0.15))):
        yield box((x, 1.35, 21.9), (3.4, 2.7, 0.3), panes)
        yield box((x, 3.4, 21.8), (2.6, 0.8, 0.2), letters(np.array(colour) * 320))
    green = plain((0.02, 0.02, 0.02), emission=(28, 182, 70))
    for x in (-8.0, -4.0, 1.0, 5.0):
        yield box((x, 0.55, 20.3), (0.3, 1.1, 1.5), plain(STEEL, gloss=0.4))
        yield box((x, 1.12, 20.3), (0.32, 0.04, 1.52), green)


def lamps():
    """Lamps that are seen, and balls of light that stand for the panes and the ceiling's strips."""
    for x, z in TABLES:
        yield Lamp(np.array([x, 2.35, z]), WARM * 380, 0.13)
    for x in (-4.0, -1.0, 2.0):
        yield Lamp(np.array([x, 2.3, -20.0]), WARM * 260, 0.11)
    for x, z in ((-4.0, -15.0), (6.0, -15.0)):
        yield Lamp(np.array([x, 6.2, z]), WARM * 1500, 0.26)


def fill_lights():
    """Lights that are not seen themselves: they stand for the panes and for the ceiling's strips."""
    for z in (-18.0, -9.0, 0.0, 9.0, 18.0):
        yield Lamp(np.array([11.9, 3.8, z]), DAY * 42000, 3.0)
    for x in (-8.0, 0.0, 8.0):
        for z in (-8.0, 4.0, 16.0):
            yield Lamp(np.array([x, 6.75, z]), COOL * 4000, 1.0)
