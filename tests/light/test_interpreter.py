"""Compiled kernels give what the same Python gives when it is interpreted.

What a compiler may hide: integer widths, a variable used before it is set, an index out of range.
"""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from skykiln.light.brdf import brdf_table
from skykiln.light.harmonics import irradiance_coefficients
from skykiln.light.noise import TECHNIQUES, noisy_level
from skykiln.light.photometry import level_irradiance
from skykiln.light.repair import repair_pixels
from skykiln.light.sheen import sheen_albedo
from skykiln.light.source_tree import source_samples, source_tree
from skykiln.light.strata import stratified_estimate
from skykiln.light.stratum_kernels import FOOTPRINT, GGX, SHEEN
from skykiln.light.texel_draw import Texels, texel_edges, texel_solid_angles


def small_panorama():
    panorama = np.random.default_rng(1).random((5, 9, 3)).astype(np.float32) ** 3
    panorama[1, 2] = [40, 10, 0]
    return panorama


def damaged():
    panorama = small_panorama()
    panorama[0, :3], panorama[3, 4, 1] = np.nan, -1
    return panorama


def estimates(kind, alpha):
    normals = np.array([[0, 0, 1.0], [0.6, -0.8, 0], [0, 0.6, -0.8]])
    texels = Texels(*np.array([[0, 0, 0], [0, 2, 5], [0, 1, 1], [1, 0, 1]]))
    edges, angles = texel_edges([2], texels, 0.2), texel_solid_angles([2], texels)
    alphas, precision = np.full(3, alpha), np.full(3, 0.05)
    tree = source_tree(small_panorama())
    return stratified_estimate(
        tree, np.full(3, kind), normals, alphas, edges, angles, 1e-3, precision, 500, 7
    )[:2]


RESULTS = {
    "brdf": lambda: brdf_table(2),
    "sheen": lambda: sheen_albedo(2),
    "harmonics": lambda: irradiance_coefficients(small_panorama(), yaw=0.3),
    "photometry": lambda: level_irradiance(small_panorama()),
    "repair": lambda: repair_pixels(damaged())[0],
    "source samples": lambda: source_samples(source_tree(small_panorama()), 20, 3)[0],
    "GGX strata": lambda: estimates(GGX, 0.3),
    "sheen strata": lambda: estimates(SHEEN, 0.3),
    "footprint strata": lambda: estimates(FOOTPRINT, 0.0),
    **{name: lambda name=name: noisy_level(source_tree(small_panorama()), 1, 0.3, 8, name, 5).radiance
       for name in TECHNIQUES},
}  # fmt: skip


@pytest.fixture(scope="module")
def interpreted(tmp_path_factory):
    """The same results from a process without the compiler."""
    path = tmp_path_factory.mktemp("interpreted") / "results.npz"
    paths = [str(Path(__file__).parent), *sys.path]
    environment = {**os.environ, "NUMBA_DISABLE_JIT": "1", "PYTHONPATH": os.pathsep.join(paths)}
    code = (
        "import sys, numpy, test_interpreter as t\n"
        "with numpy.errstate(over='ignore'):\n"
        "    numpy.savez(sys.argv[1], **{k: numpy.array(f()) for k, f in t.RESULTS.items()})"
    )
    subprocess.run([sys.executable, "-c", code, str(path)], env=environment, check=True, timeout=120)
    return np.load(path)


@pytest.mark.parametrize("name", RESULTS)
def test_compiled_and_interpreted_results_agree(name, interpreted):
    np.testing.assert_allclose(np.array(RESULTS[name]()), interpreted[name], rtol=2e-5, atol=1e-9)
