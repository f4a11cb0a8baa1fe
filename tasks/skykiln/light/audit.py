"""Whether baked cube maps are what the panorama says: a statistical audit.

Texels are drawn (`texel_draw`), estimated from the panorama by unbiased Monte Carlo (`strata`) and
compared (`verdict`). How finely the source is cut for a texel follows from the panorama and the
precision wanted, before any random number is drawn, so going on until the error is small enough
biases nothing. Nothing depends on time: the same seed and maps give the same verdict.

Level 0 holds footprint means; where source pixels are wider than its texels it is made from an
interpolated panorama (`faces`), and is held against the same.
"""

import math
from typing import NamedTuple

import numpy as np

from skykiln.light.faces import interpolated_panorama
from skykiln.light.source_tree import source_tree
from skykiln.light.strata import stratified_estimate
from skykiln.light.stratum_kernels import FOOTPRINT, LOBES
from skykiln.light.texel_draw import (
    Texels,
    draw_texels,
    texel_edges,
    texel_normals,
    texel_solid_angles,
)
from skykiln.light.verdict import allowance_used, mean_used, score_limit, squares_used

FALSE_ALARM = 1e-5  # of one probe: below 1 % for a night of 1,000
DARK = 1e-3  # errors count against at least this share of the brightest channel's mean
BLACK = 1e-30  # radiance that stands in for none
PRECISION = 1.25  # standard error wanted, as a share of the tolerance; it is 2 to 3 times the true one
FLAT_PRECISION = 0.2  # the same for footprint means, which cost less
PER_FACE = 2  # texels drawn evenly on each face of each map; as many go where the light is
MOST_STRATA = 8000  # of one texel
NOT_FINITE = float(np.finfo(np.float32).max)  # what NaN and infinities count as
ROUNDING = 1e-6  # relative, of sums in single precision


class Chart(NamedTuple):
    """One cube map to be audited."""

    name: str
    faces: np.ndarray  # (6, n, n, 3) float32 or six (n, n, 3), world axes, radiance; of irradiance E/pi
    alpha: float  # 0: footprint means, 1: also irradiance
    tolerance: float  # relative
    lobe: str = "ggx"  # one of `stratum_kernels.LOBES`
    rounding: np.ndarray | None = None  # what the pixel coding may have moved each value by, as faces
    unit: float = 1.0  # radiance of a value 1 in the faces and the rounding


class Findings(NamedTuple):
    """What was seen at each texel; arrays over texels, (T,) or (T, 3)."""

    texels: Texels
    baked: np.ndarray
    estimates: np.ndarray
    errors: np.ndarray  # standard errors of the estimates, bounds
    scale: np.ndarray  # what deviations are relative to
    allowed: np.ndarray  # deviation allowed without any noise
    strata: np.ndarray  # samples drawn


class Verdict(NamedTuple):
    """The outcome of an audit. Shares used are of what a test allows; above 1 is a fault."""

    passed: bool
    texels: int
    samples: int
    share_passed: float  # of texels, all channels within tolerance and noise
    limit: float  # the z-score that each test was held to
    worst: dict  # the texel that used most of its allowance
    charts: list  # a dict per chart and one for all: its mean deviation, and its worst texel


def audit_charts(panorama, charts, seed, *, yaw=0.0, per_face=PER_FACE, precision=1.0):
    """Audits cube maps against the panorama that they were made from.

    Parameters
    ----------
    panorama : (H, W, 3) float32, radiance, in the units of the charts.
    charts : list of Chart.
    seed : int of up to 128 bits; every random number follows from it.
    yaw : rad, from the panorama to the charts.
    per_face : texels drawn evenly on each face; as many go where the light is.
    precision : 1: errors as usual; more: larger, for less time.

    Returns
    -------
    verdict : Verdict.
    findings : Findings.
    """
    findings = look(panorama, charts, seed, yaw, per_face, precision)
    return judge(charts, findings), findings


def look(panorama, charts, seed, yaw=0.0, per_face=PER_FACE, precision=1.0):
    """Draws texels and estimates what they should hold. Returns Findings."""
    random = np.random.Generator(np.random.Philox(key=seed))
    tree = source_tree(panorama)
    sizes = [len(chart.faces[0]) for chart in charts]
    alphas = np.array([chart.alpha for chart in charts])
    texels = draw_texels(tree, sizes, alphas, per_face, yaw, random)
    mean = float(tree.flux[-1, :3].max()) / (4.0 * math.pi)
    floor = max(DARK * mean, BLACK)
    tolerance = np.array([chart.tolerance for chart in charts])[texels.chart]
    kinds = [LOBES[chart.lobe] if chart.alpha > 0 else FOOTPRINT for chart in charts]
    inputs = (
        np.array(kinds)[texels.chart],
        texel_normals(sizes, texels, yaw),
        alphas[texels.chart],
        texel_edges(sizes, texels, yaw),
        texel_solid_angles(sizes, texels),
        precision * tolerance * np.where(alphas[texels.chart] == 0, FLAT_PRECISION, PRECISION),
    )
    estimates, errors, strata = _estimate(panorama, tree, sizes, inputs, floor, random)
    units = np.array([chart.unit for chart in charts])[texels.chart, None]
    baked = units * _values_at([chart.faces for chart in charts], texels)
    rounding = units * _values_at([chart.rounding for chart in charts], texels)
    baked = np.nan_to_num(baked, nan=NOT_FINITE, posinf=NOT_FINITE, neginf=NOT_FINITE)
    scale = np.maximum(estimates, floor)
    return Findings(
        texels,
        baked,
        estimates,
        errors,
        scale,
        (tolerance[:, None] + ROUNDING) * scale + rounding,
        strata,
    )


def together(several):
    """The findings of several looks at the same charts, as one."""
    texels = Texels(*map(np.concatenate, zip(*(f.texels for f in several), strict=True)))
    return Findings(texels, *map(np.concatenate, zip(*(f[1:] for f in several), strict=True)))


def _values_at(cubes, texels):
    """(T, 3) float64; 0 where there is no cube."""
    places = zip(*texels, strict=True)
    none = np.zeros(3)
    return np.array(
        [none if cubes[k] is None else cubes[k][face][row, column] for k, face, row, column in places],
        dtype=np.float64,
    )


def _estimate(panorama, tree, sizes, inputs, floor, random):
    """Means, errors (T, 3) and strata (T,): unfiltered texels from what level 0 is made from."""
    kinds = inputs[0]
    means, errors = np.empty((2, kinds.size, 3))
    strata = np.empty(kinds.size, dtype=np.int64)
    parts = math.ceil(4 * max(sizes) / panorama.shape[1])
    for flat in (False, True):
        chosen = (kinds == FOOTPRINT) == flat
        seed = random.integers(0, 2**64, dtype=np.uint64)
        if chosen.any():
            finer = flat and parts > 1
            source = source_tree(_interpolated(panorama, parts)) if finer else tree
            *shapes, precision = (values[chosen] for values in inputs)
            means[chosen], errors[chosen], strata[chosen] = stratified_estimate(
                source, *shapes, floor, precision, MOST_STRATA, seed
            )
    return means, errors, strata


def _interpolated(panorama, parts):
    """What level 0 is made from; contiguous, for kernels that are compiled for such arrays alone."""
    return np.ascontiguousarray(interpolated_panorama(panorama, parts))


def judge(charts, findings):
    """Holds findings against what is allowed. Returns Verdict."""
    f = findings
    channels = f.baked.shape[1]
    tests = f.baked.size + 2 * channels * (len(charts) + 1)
    limit = score_limit(FALSE_ALARM, tests)
    used = allowance_used(f.baked - f.estimates, f.allowed, _errors(f), limit)
    everywhere = np.ones(len(used), dtype=bool)
    rows = [(chart.name, f.texels.chart == k) for k, chart in enumerate(charts)]
    rows.append(("all", everywhere))
    judged = [
        {**_judge_chart(name, f, chosen, limit, tests), "worst": _describe(charts, f, used, chosen)}
        for name, chosen in rows
    ]
    return Verdict(
        passed=bool((used <= 1).all() and all(row["used"] <= 1 for row in judged)),
        texels=len(used),
        samples=int(f.strata.sum()),
        share_passed=float((used <= 1).all(axis=1).mean()),
        limit=limit,
        worst=judged[-1]["worst"],
        charts=judged,
    )


def scores(findings):
    """z-scores (T, 3) of the deviations, blind to what is allowed."""
    return (findings.baked - findings.estimates) / _errors(findings)


def _errors(findings):
    """Errors that are never 0: where nothing is random, rounding remains."""
    return findings.errors + ROUNDING * findings.scale


def _judge_chart(name, f, chosen, limit, tests):
    """Mean and mean square over some texels, of deviations relative to their scale."""
    scale = f.scale[chosen]
    deviations, allowed = (f.baked - f.estimates)[chosen] / scale, f.allowed[chosen] / scale
    errors = _errors(f)[chosen] / scale
    mean, error, used = mean_used(deviations, allowed, errors, limit)
    squares = squares_used(deviations, allowed, errors, FALSE_ALARM, tests)
    c = int(np.argmax(used))
    return {
        "chart": name,
        "texels": len(scale),
        "deviation": float(mean[c]),
        "z": float(mean[c] / error[c]),
        "used": float(max(used.max(), squares.max())),
    }


def _describe(charts, f, used, chosen):
    """The texel among the chosen that used most of its allowance."""
    t, c = np.unravel_index(int(np.where(chosen[:, None], used, -1.0).argmax()), used.shape)
    return {
        "chart": charts[f.texels.chart[t]].name,
        "face": int(f.texels.face[t]),
        "row": int(f.texels.row[t]),
        "column": int(f.texels.column[t]),
        "channel": int(c),
        "baked": float(f.baked[t, c]),
        "estimate": float(f.estimates[t, c]),
        "deviation": float((f.baked - f.estimates)[t, c] / f.scale[t, c]),
        "z": float(scores(f)[t, c]),
        "used": float(used[t, c]),
    }
