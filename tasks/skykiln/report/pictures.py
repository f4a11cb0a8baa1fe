"""Pictures of linear radiance: tone mapped for a screen, cubes unfolded, chains side by side."""

import numpy as np

# Where the faces stand in an unfolded cube, in the order +x -x +y -y +z -z: (row, column). As stored in
# a file with the default cube_axes this is what one sees from the middle, +z ahead, +x to the right.
_CROSS = ((1, 2), (1, 0), (0, 1), (2, 1), (1, 1), (1, 3))


def exposure_for(radiance):
    """A factor that brings a picture's middle tones to a screen's: its log-mean luminance to 0.18
    (Reinhard et al. 2002, the key value of an average scene)."""
    luminance = radiance @ np.array([0.2126, 0.7152, 0.0722])  # ITU-R BT.709
    lit = luminance[luminance > 0]
    return 0.18 / float(np.exp(np.log(lit).mean())) if lit.size else 1.0


def tone_mapped(radiance, exposure):
    """(..., 3) linear radiance -> (..., 3) uint8 sRGB (IEC 61966-2-1), by x/(1 + x) on the luminance
    (Reinhard et al. 2002)."""
    x = np.maximum(radiance, 0.0) * exposure
    luminance = (x @ np.array([0.2126, 0.7152, 0.0722], x.dtype))[..., None]  # float32 stays so: quicker
    return srgb_bytes(np.minimum(x / (1.0 + luminance) * 1.25, 1.0))


def srgb_bytes(x):
    """Linear light 0..1, of any shape, as uint8 sRGB (IEC 61966-2-1)."""
    encoded = np.where(x <= 0.0031308, 12.92 * x, 1.055 * np.maximum(x, 1e-9) ** (1 / 2.4) - 0.055)
    return np.rint(encoded * 255).astype(np.uint8)


def unfolded(faces, background=255):
    """(6, n, n, 3) -> (3 n, 4 n, 3), a horizontal cross."""
    size = faces.shape[1]
    picture = np.full((3 * size, 4 * size, 3), background, faces.dtype)
    for (row, column), face in zip(_CROSS, faces, strict=True):
        picture[row * size : (row + 1) * size, column * size : (column + 1) * size] = face
    return picture


def enlarged(picture, height):
    """Each pixel repeated until the picture is `height` high; its width keeps the proportion."""
    width = height * picture.shape[1] // picture.shape[0]
    rows, columns = (np.arange(n) * m // n for n, m in zip((height, width), picture.shape, strict=False))
    return picture[rows][:, columns]


def chain_sheet(levels, columns, height):
    """All levels (each (6, n, n, 3) radiance) as unfolded crosses of one height, row by row, uint8."""
    exposure = exposure_for(levels[0])
    crosses = [enlarged(unfolded(tone_mapped(level, exposure)), height) for level in levels]
    crosses += [np.full_like(crosses[0], 255)] * (-len(crosses) % columns)
    rows = [np.concatenate(crosses[k : k + columns], axis=1) for k in range(0, len(crosses), columns)]
    return np.concatenate(rows)


LARGEST_FACE = 256  # texels of a face in the picture of a file


def file_picture(levels):
    """All levels of a packed file, uint8: crosses of a cube map, or the table as it is.

    Parameters: levels : (faces, h, w, c) per mip level
    """
    if levels[0].shape[0] == 1:
        table = np.clip(levels[0][0], 0, 1)
        blank = np.zeros((*table.shape[:2], 3 - table.shape[2]))
        return np.rint(np.concatenate([table, blank], axis=2) * 255).astype(np.uint8)
    shown = [reduced(level.astype(np.float64), LARGEST_FACE) for level in levels]
    return chain_sheet(shown, min(len(shown), 4), 3 * shown[0].shape[1])


def reduced(faces, largest):
    """Faces (6, n, n, 3) by whole steps, each texel the mean of those it stands for, to `largest` at most."""
    size = faces.shape[1]
    step = -(-size // largest)
    whole = size // step
    cut = faces[:, : whole * step, : whole * step]
    return cut.reshape(6, whole, step, whole, step, -1).mean((2, 4))
