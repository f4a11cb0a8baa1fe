"""A probe packed in every way, the listings of docs/for_renderers.md, and what these must give on it."""

import itertools
import re
from pathlib import Path

import numpy as np

from skykiln.formats.ktx2 import read_ktx2
from skykiln.light.cube_axes import CUBE_AXES, SAMPLING_SIGNS
from skykiln.light.harmonics import irradiance_from_coefficients
from skykiln.light.sample_cube import sample_cube
from tiny_pipeline import TinyPipeline, write_sky

CODINGS = ["rgba16f", "rgb9e5", "r11g11b10f", "bc6h"]
# What a coding may take from a texel of the smooth sky below.
CODING_ERRORS = {"rgba16f": 1e-3, "rgb9e5": 0.01, "r11g11b10f": 0.03, "bc6h": 0.15}
KINDS = {"plain": ("ktx2", None), "packed": ("ktx2", 3), "dds": ("dds", None)}
ROUGHNESS = [0, 0.2, 0.5, 0.6, 1]
PAGE = Path(__file__).parents[2] / "docs/for_renderers.md"


def every_pack():
    """Entries of a recipe's pack list, by name: all codings, containers and cube_axes."""
    packs = {}
    for pixels, (kind, (container, compress)), axes in itertools.product(CODINGS, KINDS.items(), CUBE_AXES):
        entry = {"container": container, "pixels": pixels, "cube_axes": axes, "compress": compress}
        packs[f"{pixels}_{kind}_{axes}"] = {**entry, "name": f"{pixels}_{kind}_{axes}"}
    return packs


def baked_probe(folder):
    """A small sky baked by the product, packed in every way."""
    pipeline = TinyPipeline(folder, probes=["ferry_noon"])
    y, x = np.mgrid[0:32, 0:64] / 32.0
    sky = np.exp(np.sin(np.pi * x)[..., None] * [0.5, 0.3, -0.4] + np.cos(3 * y)[..., None] * [0.2, 0.6, 0.9])
    write_sky(folder / "ferry_noon.exr", pixels=np.float32(1e5 * sky))  # needs a storage_ev
    pipeline.recipe["face_size"] = 16
    pipeline.recipe["specular"] = {"levels": 5, "roughness": ROUGHNESS, "tolerance": 0.01}
    pipeline.recipe["pack"] = list(every_pack().values())
    pipeline.bake()
    return pipeline


def world_of(probe):
    """What was baked, in true units: world faces of every level."""
    work = probe.build / "work/ferry_noon"
    return [np.load(work / name) for name in ("faces.npy", *(f"level_{k}.npy" for k in range(1, 5)))]


def plain_files(probe, pixels, axes):
    """The specular, irradiance and BRDF files that a renderer loads; KTX2 without Zstandard."""
    folder = probe.build / "probes/ferry_noon"
    irradiance = next(
        entry["file"]
        for entry in probe.probe_record("ferry_noon")["irradiance"]["files"]
        if (entry["container"], entry["pixels"], entry["cube_axes"]) == ("ktx2", "rgba16f", axes)
    )
    specular = folder / f"specular.{pixels}_plain_{axes}.ktx2"
    return specular, folder / irradiance, probe.build / "brdf/brdf.rg16f.ktx2"


def listing(language):
    """The one block of a language on the page."""
    (block,) = re.findall(rf"^```{language}\n(.*?)^```", PAGE.read_text(), re.MULTILINE | re.DOTALL)
    return block


def uniforms_of(record, axes):
    """Values of the listing's uniforms, from probe.json."""
    roughness = [level["roughness"] for level in record["specular"]["levels"]]
    return {
        "signs": SAMPLING_SIGNS[axes],
        "true_scale": 2.0 ** record["storage_ev"],
        "level_count": len(roughness),
        "roughness_of": roughness,
        "sh": record["irradiance"]["sh"],
    }


# Of the surfaces below, with a = n and b = v, roughness: GLSL expressions, each a vec3.
ALBEDO, F0 = np.array([0.2, 0.5, 0.8]), np.array([0.04, 0.3, 0.9])
SHADING = "lit_by_probe(a.xyz, b.xyz, vec3(0.2, 0.5, 0.8), vec3(0.04, 0.3, 0.9), b.w)"
HARMONICS = "irradiance_from_sh(a.xyz)"


def surfaces(count=1000):
    """Normals (count, 3), and directions of sight with a roughness (count, 4)."""
    rng = np.random.default_rng(11)
    n, v = (d / np.linalg.norm(d, axis=1)[:, None] for d in rng.normal(size=(2, count, 3)))
    v *= np.sign((n * v).sum(1))[:, None]
    return n, np.c_[v, rng.random(count)]


def expected_values(probe, n, sight):
    """SHADING and HARMONICS as computed here from what was baked, (k, 3) each."""
    v, rough = sight[:, :3], sight[:, 3]
    mu = (n * v).sum(1)
    mirror = sample_cube(world_of(probe), 2 * mu[:, None] * n - v, np.interp(rough, ROUGHNESS, range(5)))
    table = read_ktx2((probe.build / "brdf/brdf.rg16f.ktx2").read_bytes(), "table").levels[0][0]
    scale, bias = _table_at(table, mu, rough).T
    e = sample_cube([np.load(probe.build / "work/ferry_noon/irradiance.npy")], n, 0)
    shading = ALBEDO / np.pi * e + mirror * (F0 * scale[:, None] + bias[:, None])
    sh = np.array(probe.probe_record("ferry_noon")["irradiance"]["sh"])
    return shading, irradiance_from_coefficients(sh, n)


def _table_at(table, mu, roughness):
    """Bilinear values of a 2-D table (n, n, 2), clamped to its edge."""
    x, y = (np.clip(c * len(table) - 0.5, 0, len(table) - 1) for c in (mu, roughness))
    i, j = np.minimum(x.astype(int), len(table) - 2), np.minimum(y.astype(int), len(table) - 2)
    u, v = (x - i)[:, None], (y - j)[:, None]
    above = (1 - u) * table[j, i] + u * table[j, i + 1]
    below = (1 - u) * table[j + 1, i] + u * table[j + 1, i + 1]
    return (1 - v) * above + v * below
