"""A whole bake as a process: stage times and peak memory of one 4096 x 2048 source, cold and warm samples.

    python tests/benchmarks/bench_bake.py

Prints, for a 4096 x 2048 half EXR at 512 faces and 8 levels, each stage's time as a share of the bake and
the process's peak memory; then `skykiln bake` of the samples with an empty kernel cache (cold),
with a filled one (warm), and with nothing to do.
"""

import json
import os
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import OpenEXR

ROOT = Path(__file__).parents[2]
PIPELINE = """\
skykiln: 1
build_dir: build
recipes:
  large:
    face_size: 512
    specular: {levels: 8, tolerance: 0.005}
    pack: [{container: ktx2, pixels: rgba16f}]
sources: {large: {file: large.exr, recipe: large}}
"""


def write_source(path, width=4096):
    """A sky with fine structure and a sun, half, ZIP."""
    rng = np.random.default_rng(0)
    v, u = np.mgrid[0 : width // 2, 0:width] / width
    sky = 1 + np.cos(6 * np.pi * u) * np.sin(2 * np.pi * v) + 0.25 * rng.random((width // 2, width))
    sky[500:506, 900:907] = 5e4
    pixels = (sky[..., None] * [0.8, 0.9, 1.3]).astype(np.float16)
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
    OpenEXR.File(header, {"RGB": pixels}).write(str(path))


def bake(folder, cache):
    """Runs `skykiln bake`; returns seconds and the process's peak memory in MB."""
    environment = {**os.environ, "XDG_CACHE_HOME": str(cache)}
    start = time.perf_counter()
    command = [sys.executable, "-m", "skykiln", "bake"]
    process = subprocess.Popen(command, cwd=folder, env=environment, stdout=subprocess.DEVNULL)
    _, status, usage = os.wait4(process.pid, 0)
    assert status == 0
    return time.perf_counter() - start, usage.ru_maxrss * 1024 / 1e6


def one_large_source(scratch):
    folder = scratch / "large"
    folder.mkdir()
    write_source(folder / "large.exr")
    (folder / "pipeline.yaml").write_text(PIPELINE)
    bake(folder, scratch / "cache")  # fills the kernel cache
    shutil.rmtree(folder / "build")
    seconds, peak = bake(folder, scratch / "cache")
    stages = json.loads((folder / "build" / "night.json").read_bytes())["probes"][0]["stages"]
    print(f"4096 x 2048 half EXR, 512 faces, 8 levels: {seconds:.2f} s, peak memory {peak:.0f} MB")
    for stage in stages:
        print(f"  {stage['stage']:<32} {stage['seconds']:7.3f} s  {stage['seconds'] / seconds:6.1%}")


def samples(scratch):
    folder = scratch / "samples"
    folder.mkdir()
    shutil.copy(ROOT / "pipeline.yaml", folder)
    shutil.copytree(ROOT / "sample_assets", folder / "sample_assets")
    cold, _ = bake(folder, scratch / "empty")
    nothing, _ = bake(folder, scratch / "empty")
    shutil.rmtree(folder / "build")
    warm, _ = bake(folder, scratch / "empty")
    print(f"samples: cold {cold:.1f} s, warm {warm:.1f} s, nothing to do {nothing:.2f} s "
          f"(cold/warm {cold / warm:.1f}, nothing/warm {nothing / warm:.3f})")  # fmt: skip


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as name:
        one_large_source(Path(name))
        samples(Path(name))
