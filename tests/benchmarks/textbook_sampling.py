"""The baseline of the filter benchmarks: textbook GGX importance sampling with mip-filtered lookups.

Per texel 1,024 Hammersley points (Hammersley 1960), half vectors by the inverse transform of the GGX
distribution (Walter et al. 2007, equations 35 and 36), each lookup trilinear between the two box-filtered
mip levels around the one whose texel matches the sample's share of the sphere (Colbert and Krivanek
2007). The sample vectors in the lobe's own frame, their weights and mip levels are the same for every
texel and are made once, as a careful implementation does.
"""

import math

import numba
import numpy as np

from skykiln.light.directions import cube_directions

SAMPLES = 1024


def mip_chain(faces):
    """Box-filtered mips in one array: (6, total, 3) float32 and the offset and size of each level."""
    levels, size = [faces], faces.shape[1]
    while size > 1:
        size //= 2
        levels.append(levels[-1].reshape(6, size, 2, size, 2, 3).mean((2, 4)))
    offsets = np.cumsum([0] + [level.shape[1] ** 2 for level in levels])[:-1]
    flat = np.concatenate([level.reshape(6, -1, 3) for level in levels], axis=1)
    return np.ascontiguousarray(flat, np.float32), offsets, np.array([lv.shape[1] for lv in levels])


def lobe_samples(alpha, face_size, count=SAMPLES):
    """Directions in the lobe's frame (count, 3), cosine weights and mip levels, float32."""
    k = np.arange(count, dtype=np.uint32)
    bits = k.copy()
    for shift, mask in ((16, 0x0000FFFF), (8, 0x00FF00FF), (4, 0x0F0F0F0F), (2, 0x33333333), (1, 0x55555555)):
        bits = ((bits >> shift) & mask) | ((bits & mask) << np.uint32(shift))
    u, v = (k + 0.5) / count, bits / 2.0**32
    cos_h = np.sqrt((1 - u) / (1 + (alpha**2 - 1) * u))
    sin_h, phi = np.sqrt(1 - cos_h**2), 2 * np.pi * v
    h = np.stack([sin_h * np.cos(phi), sin_h * np.sin(phi), cos_h], axis=-1)
    l = 2 * cos_h[:, None] * h - np.array([0.0, 0.0, 1.0])
    density = alpha**2 / (np.pi * (1 + (alpha**2 - 1) * cos_h**2) ** 2) / 4  # under n = v
    texel = 4 * np.pi / (6 * face_size**2)
    level = np.maximum(0, 0.5 * np.log2(1 / (count * density * texel)) + 1)
    keep = l[:, 2] > 0
    return l[keep].astype(np.float32), l[keep, 2].astype(np.float32), level[keep].astype(np.float32)


def sampled_level(faces, mips, face_size, alpha):
    """One filtered level by sampling: (6, face_size, face_size, 3) float32."""
    flat, offsets, sizes = mips
    l, weight, level = lobe_samples(alpha, faces.shape[1])
    directions = cube_directions(face_size).astype(np.float32).reshape(-1, 3)
    level = np.minimum(level, len(sizes) - 1.001)
    result = _sample(flat, offsets, sizes, directions, l, weight, level)
    return result.reshape(6, face_size, face_size, 3)


@numba.njit(parallel=True, fastmath=True, nogil=True, error_model="numpy")
def _sample(flat, offsets, sizes, directions, l, weight, level):
    result = np.empty((directions.shape[0], 3), np.float32)
    one, half = np.float32(1.0), np.float32(0.5)
    for t in numba.prange(directions.shape[0]):
        nx, ny, nz = directions[t, 0], directions[t, 1], directions[t, 2]
        # A frame around n without branches (Duff et al. 2017).
        sign = np.float32(math.copysign(1.0, nz))
        a = -one / (sign + nz)
        b = nx * ny * a
        red, green, blue, total = np.float32(0), np.float32(0), np.float32(0), np.float32(0)
        for k in range(l.shape[0]):
            lx, ly, lz = l[k, 0], l[k, 1], l[k, 2]
            x = (one + sign * nx * nx * a) * lx + b * ly + nx * lz
            y = sign * b * lx + (sign + ny * ny * a) * ly + ny * lz
            z = -sign * nx * lx - ny * ly + nz * lz
            ax, ay, az = abs(x), abs(y), abs(z)
            if ax >= ay and ax >= az:
                face, m, s, r = (0, ax, -z, -y) if x > 0 else (1, ax, z, -y)
            elif ay >= az:
                face, m, s, r = (2, ay, x, z) if y > 0 else (3, ay, x, -z)
            else:
                face, m, s, r = (4, az, x, -y) if z > 0 else (5, az, -x, -y)
            inverse = one / m
            s, r = s * inverse, r * inverse
            upper = int(level[k])
            blend = level[k] - np.float32(upper)
            for part in range(2):
                w = weight[k] * (blend if part else one - blend)
                row, size, base = flat[face], sizes[upper + part], offsets[upper + part]
                scale = half * np.float32(size)
                u = min(max((s + one) * scale - half, np.float32(0)), np.float32(size - 1))
                v = min(max((r + one) * scale - half, np.float32(0)), np.float32(size - 1))
                i, j = int(u), int(v)
                fu, fv = u - np.float32(i), v - np.float32(j)
                i1, j1 = min(i + 1, size - 1), min(j + 1, size - 1)
                p00, p01 = base + j * size + i, base + j * size + i1
                p10, p11 = base + j1 * size + i, base + j1 * size + i1
                w00, w01 = w * (one - fu) * (one - fv), w * fu * (one - fv)
                w10, w11 = w * (one - fu) * fv, w * fu * fv
                red += w00 * row[p00, 0] + w01 * row[p01, 0] + w10 * row[p10, 0] + w11 * row[p11, 0]
                green += w00 * row[p00, 1] + w01 * row[p01, 1] + w10 * row[p10, 1] + w11 * row[p11, 1]
                blue += w00 * row[p00, 2] + w01 * row[p01, 2] + w10 * row[p10, 2] + w11 * row[p11, 2]
            total += weight[k]
        result[t, 0], result[t, 1], result[t, 2] = red / total, green / total, blue / total
    return result
