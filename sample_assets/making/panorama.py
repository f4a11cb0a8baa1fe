"""Panorama grid: the axes of OpenEXR's latitude-longitude convention (ImfEnvmap.h), centres at (i + 0.5)/W.

Row 0 touches +y, the centre column looks along +z, +x lies left of the centre. Angles in radians.
"""

import numpy as np

LUMINANCE = np.array([0.2126, 0.7152, 0.0722])  # ITU-R BT.709


def direction(azimuth_deg, elevation_deg):
    """Unit vector; azimuth from +z towards +x (to the left in the picture), elevation from the horizon."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    across = np.cos(elevation)
    return np.array([across * np.sin(azimuth), np.sin(elevation), across * np.cos(azimuth)])


def directions(u, v):
    """World directions of picture coordinates 0..1 (broadcast). Returns (..., 3)."""
    longitude, latitude = np.broadcast_arrays(np.pi - 2 * np.pi * u, np.pi / 2 - np.pi * v)
    across = np.cos(latitude)
    return np.stack([across * np.sin(longitude), np.sin(latitude), across * np.cos(longitude)], axis=-1)


def pixel_solid_angles(width, height):
    """Exact solid angle of a pixel of each row. Returns (height,), sr."""
    edges = np.cos(np.pi * np.arange(height + 1) / height)
    return 2 * np.pi / width * -np.diff(edges)


def rendered(radiance, width, height, samples, at_once=65536):
    """Panorama of a function of directions: pixel centres, and the mean of samples^2 points at edges.

    Parameters: radiance : (n, 3) unit vectors -> (n, 3)
    Returns:    (height, width, 3) float64
    """
    rows, columns = np.indices((height, width)).reshape(2, -1)
    size = np.array([width, height])
    picture = _sampled(radiance, columns, rows, size, 1, at_once).reshape(height, width, 3)
    at_edges = np.flatnonzero(_near_an_edge(picture))
    fine = _sampled(radiance, columns[at_edges], rows[at_edges], size, samples, at_once)
    picture.reshape(-1, 3)[at_edges] = fine
    return picture


def _sampled(radiance, columns, rows, size, samples, at_once):
    """Means of samples^2 evenly placed points of each pixel. (n, 3)."""
    inner = (np.arange(samples) + 0.5) / samples
    means = np.empty((len(rows), 3))
    step = at_once // samples**2
    for at in range(0, len(rows), step):
        u = (columns[at : at + step, None, None] + inner) / size[0]
        v = (rows[at : at + step, None, None] + inner[:, None]) / size[1]
        d = directions(u, v)
        means[at : at + step] = radiance(d.reshape(-1, 3)).reshape(len(d), -1, 3).mean(axis=1)
    return means


def _near_an_edge(picture, contrast=0.04):
    """Pixels that differ from a neighbour by more than `contrast` of the larger, and their neighbours."""
    low, high = picture, picture
    for axis in (0, 1):
        low = np.minimum(low, np.minimum(np.roll(low, 1, axis), np.roll(low, -1, axis)))
        high = np.maximum(high, np.maximum(np.roll(high, 1, axis), np.roll(high, -1, axis)))
    return (high - low > contrast * high).any(axis=-1)


def add_disc(picture, towards, angular_radius, radiance, fineness=256):
    """Add a uniform disc to a panorama: every pixel gets radiance x the share of it that the disc covers.

    The shares are counted on fineness^2 points per pixel and scaled so that the disc's solid angle,
    2 pi (1 - cos r), is exact.
    """
    height, width = picture.shape[:2]
    rows, columns = _pixels_about(towards, angular_radius, width, height)
    inner = (np.arange(fineness) + 0.5) / fineness
    u = (columns[:, None] + inner) / width
    shares = np.empty((len(rows), len(columns)))
    for j, row in enumerate(rows):
        v = (row + inner) / height
        d = directions(u[:, :, None], v[None, None, :])
        # The chord, not the angle's cosine, which has no digits left at small angles.
        inside = np.linalg.norm(d - towards, axis=-1) < 2 * np.sin(angular_radius / 2)
        weights = np.cos(np.pi / 2 - np.pi * v)
        shares[j] = (inside * weights).sum(axis=(1, 2)) / (fineness * weights.sum())
    covered = (shares * pixel_solid_angles(width, height)[rows][:, None]).sum()
    shares *= 2 * np.pi * (1 - np.cos(angular_radius)) / covered
    picture[np.ix_(rows, columns % width)] += shares[..., None] * radiance


def _pixels_about(towards, angular_radius, width, height):
    """Rows and columns (these may run over the edge) of the pixels that a disc can touch."""
    latitude = np.arcsin(towards[1])
    v, dv = (0.5 - latitude / np.pi) * height, angular_radius / np.pi * height
    u = (0.5 - np.arctan2(towards[0], towards[2]) / (2 * np.pi)) * width
    du = angular_radius / (2 * np.pi) / np.cos(abs(latitude) + angular_radius) * width
    rows = np.arange(max(int(np.floor(v - dv)), 0), min(int(np.floor(v + dv)) + 1, height))
    return rows, np.arange(int(np.floor(u - du)), int(np.floor(u + du)) + 1)
