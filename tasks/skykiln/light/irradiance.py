"""Diffuse irradiance as a cube map: E(n), the integral of L max(n.l, 0), not divided by pi.

At alpha = 1 the GGX lobe under n = v = r is the clamped cosine over pi, so the same hierarchical
quadrature serves (`specular`).
"""

import math

from skykiln.light.specular import filter_level


def irradiance_cube(pyramid, face_size, tolerance):
    """E at texel centres: (6, face_size, face_size, 3) float32, radiance sr (lux if in cd/m2).

    `tolerance` is the largest relative error, as in `filter_level`.
    """
    return filter_level(pyramid, face_size, 1.0, tolerance) * math.pi
