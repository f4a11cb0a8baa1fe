"""A pipeline of tiny skies in a folder of its own, for tests that bake it and look at what ran."""

import json
import os
import time

import numpy as np
import OpenEXR
import yaml

from skykiln.config import load_pipeline
from skykiln.engine.chains import chain_of
from skykiln.stages.nights import bake
from skykiln.stages.snapshot import Snapshot


class TinyPipeline:
    """`settings` is what pipeline.yaml holds, under `remark`; change it, then bake."""

    remark = ""

    def __init__(self, folder, probes=("ferry_noon", "quay_night")):
        self.folder = folder
        self.file = folder / "pipeline.yaml"
        self.build = folder / "build"
        recipe = {
            "face_size": 8,
            "specular": {"levels": 3, "roughness": [0, 0.5, 1], "tolerance": 0.05},
            "irradiance": {"face_size": 2},
        }
        self.settings = {
            "skykiln": 1,
            "brdf": {"size": 4},
            "recipes": {"tiny": recipe},
            "sources": {name: {"file": f"{name}.exr", "recipe": "tiny"} for name in probes},
        }
        for number, name in enumerate(probes):
            write_sky(folder / f"{name}.exr", seed=number)

    @property
    def recipe(self):
        return self.settings["recipes"]["tiny"]

    def snapshot(self, *names):
        self.file.write_text(self.remark + yaml.safe_dump(self.settings, sort_keys=False))
        return Snapshot(load_pipeline(self.file), names)

    def bake(self, *names, workers=1, again=False):
        """Bake. Returns: the labels of the stages that ran."""
        self.night, _ = bake(self.snapshot(*names), workers, again, False, shown=nothing_shown)
        return [ran.label for outcome in self.night.outcomes for ran in outcome.ran]

    def plan(self):
        """Label -> (state, reasons) of the stages that would run."""
        chains = [chain_of(target) for target in self.snapshot().targets]
        return {v.stage.label: (v.state, *v.reasons) for chain in chains for v in chain.stale}

    def night_record(self):
        return json.loads((self.build / "night.json").read_bytes())

    def probe_record(self, name):
        return json.loads((self.build / "probes" / name / "probe.json").read_bytes())


class nothing_shown:
    """No progress."""

    def __init__(self, chains):
        self.chains = chains

    def __enter__(self):
        return self

    def __exit__(self, *error):
        return None


def sky_pixels(seed, height=8):
    """A smooth coloured sky with some noise, (height, 2 height, 3) float32."""
    noise = np.random.default_rng(seed).random((height, 2 * height, 3))
    return (noise + np.linspace(2, 0.5, height)[:, None, None]).astype(np.float32)


def write_sky(path, seed=0, pixels=None, **header):
    """Write an EXR. What the header says beyond the pixels is in `header`."""
    pixels = sky_pixels(seed) if pixels is None else pixels
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage, **header}
    OpenEXR.File(header, {"RGB": pixels}).write(str(path))


def published(build):
    """Relative path -> bytes of all that renderers read."""
    folders = [build / "probes", build / "brdf"]
    return {str(p.relative_to(build)): p.read_bytes() for f in folders for p in f.rglob("*") if p.is_file()}


def everything(build):
    """Relative path -> (time, bytes) of every file but night.json."""
    files = (p for p in build.rglob("*") if p.is_file() and p.name != "night.json")
    return {str(p.relative_to(build)): (p.stat().st_mtime_ns, p.read_bytes()) for p in files}


def without_pages(files):
    """What `everything` found, without what tells of a night: pages and records of nights."""
    told = (".html", ".css", ".js", "work/report.json")
    return {n: found for n, found in files.items() if not n.endswith(told) and "report/nights" not in n}


def touch(path):
    """Give a file another time, not another content."""
    os.utime(path, ns=(time.time_ns(), time.time_ns() + 5_000_000))
