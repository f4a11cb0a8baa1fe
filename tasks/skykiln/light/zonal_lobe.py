"""A lobe as `zonal_filter` takes it: tables made from its kernel of c = n.l and its normaliser.

The tables are over w = q^(1/4), q = 1 - c: fine where a kernel has its peak, and smooth where it goes with a
power of q, as sheen does near its axis. At the middle of each bin stand K and its derivatives in c, times
powers of q, so that they stay in bounds: what is between follows from Taylor's series.

The kernel is sampled at the Chebyshev points of even pieces of 0 <= w <= 1, and differentiated by way of the
polynomials through them (DLMF 3.5(iv), 3.11(ii)). With T = q d/dq = w/4 d/dw, q^2 d^2/dq^2 = T (T - 1) and
so on, a falling factorial.
"""

import math
from typing import NamedTuple

import numpy as np
from numpy.polynomial import chebyshev

VALUES = 6  # columns of `ZonalLobe.values`
_BINS = 1 << np.arange(8, 15)  # how many a table may have
_PIECE = 16  # bins in one piece
_DEGREE = 12
_MERGED = 2  # bins in one of the bounds
_EXACT = 1e-4  # error of Taylor's series at the edges of bins, as a part of K ..
_FAINT = 1e-3  # .. and of this share of the largest K
_AT_AXIS = 5  # bins beside the axis that are too wide for powers of q: sqrt(q) < 4e-4 for the shortest table


class ZonalLobe(NamedTuple):
    """A kernel K(c), 0 at and below the horizon, over its integral.

    values : (bins, VALUES) float32 at w = (i + 1/2)/bins: K, q K', q^2 K''/2, q^3 K'''/6, q^4 K''''/24, 1/q.
    bounds : (levels, n, 4) float32: at [k, i] the largest in 2^k of n even bins of w from bin i on, of K,
        s^2 |K''|/2, s^3 |K'''|/6, and s^2 |K'''|/4 + s^4 |K''''|/24, s^2 = 1 - c^2. They go with the second,
        third and fourth moments of a node's directions.
    steepest : |K'| at the horizon.
    width : rad, from where K is largest to where it is half of that.
    """

    values: np.ndarray
    bounds: np.ndarray
    steepest: float
    width: float


def zonal_lobe(kernel, norm=None):
    """The tables of a lobe.

    Parameters
    ----------
    kernel : function of an array of c, 0 < c < 1, in closed form or looked up. Not negative, smooth but
        at c = 1, and 0 at c = 0 like any lobe with its cosine.
    norm : the kernel's integral over the sphere; None: it is integrated here.

    Raises
    ------
    ValueError : the kernel is too steep for a table.
    """
    for bins in _BINS:
        values, edges = _sampled(kernel, bins)
        x = 1 - (np.arange(_AT_AXIS, bins) / (np.arange(_AT_AXIS, bins) + 0.5)) ** 4
        series = sum(values[_AT_AXIS:, order] * x**order for order in range(5))
        edge = edges[_AT_AXIS:-1]
        if np.all(np.abs(series - edge) <= _EXACT * (edge + _FAINT * edge.max())):
            return _tabulated(values, edges, _integral(kernel, bins) if norm is None else norm)
    raise ValueError("the kernel is too steep for a table; a lobe as narrow as this is a mirror")


def _sampled(kernel, bins):
    """`values` in float64, as the kernel is, and K at the edges of the bins, (bins + 1,)."""
    count = bins // _PIECE
    x = chebyshev.chebpts1(_DEGREE + 1)
    vander = chebyshev.chebvander(x, _DEGREE)
    slopes = chebyshev.chebval(x, chebyshev.chebder(np.eye(_DEGREE + 1))).T
    w = (np.arange(count) + (1 + x[:, None]) / 2) / count
    euler = np.linalg.solve(vander.T, slopes.T).T * (2 * count)

    def times(function):  # T of what has these values at the points
        return w / 4 * (euler @ function)

    falling = [kernel(1 - w**4)]
    for order in range(4):
        falling.append(times(falling[-1]) - order * falling[-1])
    middles = (2 * np.arange(_PIECE) + 1) / _PIECE - 1
    at_middles = np.linalg.solve(vander.T, chebyshev.chebvander(middles, _DEGREE).T).T
    columns = [
        (-1) ** order / math.factorial(order) * (at_middles @ f).T.ravel() for order, f in enumerate(falling)
    ]
    q = ((np.arange(bins) + 0.5) / bins) ** 4
    edge = np.arange(bins + 1) / bins
    return np.stack([*columns, 1 / q], axis=1), kernel(1 - edge**4)


def _integral(kernel, bins):
    """2 pi times the integral of K dc, dc = -4 w^3 dw."""
    x, weight = np.polynomial.legendre.leggauss(_DEGREE)
    w = (np.arange(bins)[:, None] + (1 + x) / 2) / bins
    return math.pi / bins * float((kernel(1 - w**4) * 4 * w**3 * weight).sum())


def _tabulated(values, edges, norm):
    values[:, :5] /= norm
    value, second, third, fourth = (abs(values[:, order]) for order in (0, 2, 3, 4))
    value = np.maximum(value, np.maximum(edges[:-1], edges[1:]) / norm)
    q = 1 / values[:, 5]
    slope = np.sqrt((2 - q) / q)  # s/q
    bounds = np.stack(
        [value, slope**2 * second, slope**3 * third, slope**2 * third * 1.5 / q + slope**4 * fourth], axis=1
    )
    bounds[:_AT_AXIS, 1:] = bounds[_AT_AXIS, 1:]
    return ZonalLobe(
        values.astype(np.float32),
        _largest_of_runs(bounds).astype(np.float32),
        abs(_slope(values[-1], 1.0)),
        _width(edges),
    )


def _slope(bin_values, q):
    """K' by Taylor's series."""
    inverse = bin_values[5]
    x = 1 - q * inverse
    return float(inverse * sum(order * bin_values[order] * x ** (order - 1) for order in range(1, 5)))


def _largest_of_runs(values):
    """Largest values of runs of 1, 2, 4 .. bins: what any stretch holds follows from two of them."""
    runs = [values.reshape(-1, _MERGED, values.shape[1]).max(axis=1)]
    while 1 << len(runs) <= len(runs[0]):
        run, half = runs[-1], 1 << len(runs) - 1
        runs.append(np.maximum(run, np.concatenate([run[half:], np.repeat(run[-1:], half, axis=0)])))
    return np.stack(runs)


def _width(edges):
    w = np.linspace(0, 1, len(edges))
    angle = 2 * np.arcsin(w * w / math.sqrt(2))
    peak = edges.argmax()
    return float(np.abs(angle - angle[peak])[edges < edges[peak] / 2].min())
