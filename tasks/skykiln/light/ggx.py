"""The GGX lobe under n = v = r as a kernel of c = n.l alone.

    K(c) = D(h.n) max(c, 0),  (h.n)^2 = (1 + c)/2,
    D = 4 a^2 / (pi (A - B c)^2),  A = 1 + a^2,  B = 1 - a^2,  a = alpha

(Walter et al. 2007, equation 33, rewritten in c). The constant 4 a^2/pi cancels between the filter and
its normaliser and is left out: here K(c) = max(c, 0) / (A - B c)^2. With q = 1 - c the denominator is
B q + 2 a^2, the form that keeps its digits for a narrow lobe.
"""

import math


def ggx_kernel(c, alpha):
    """K(c) without the constant 4 alpha^2 / pi. Scalars or arrays; 1/sr once divided by `ggx_norm`."""
    positive = (c + abs(c)) / 2
    return positive / ((1 - alpha * alpha) * (1 - c) + 2 * alpha * alpha) ** 2


def ggx_norm(alpha):
    """The integral of `ggx_kernel` over the sphere, for 0 < alpha <= 1.

    Closed form of 2 pi times the integral of c/(A - B c)^2 over 0..1; near alpha = 1, where that is
    0/0, its power series in B/A.
    """
    a, b = 1 + alpha * alpha, 1 - alpha * alpha
    if b < 0.3 * a:
        terms = sum((k + 1) / (k + 2) * (b / a) ** k for k in range(40))
        return 2 * math.pi * terms / (a * a)
    peak = a / (2 * alpha * alpha)
    return 2 * math.pi / (b * b) * (peak - 1 - math.log(peak))
