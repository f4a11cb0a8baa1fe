"""A night of interior probes against the bare work in it.

    python tests/benchmarks/bench_throughput.py [--probes 1000]

Sources are 256 x 128 half EXR, baked to 64^2 faces, 7 levels, BC6H. The bare work is decode, numerics and
encode alone, called in one loop in one process per core with single-threaded kernels, nothing written.
Prints the ratio of the night's time to it, and how busy the cores were during the night, kernels compiled
before.
"""

import argparse
import multiprocessing
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from skykiln.config import load_pipeline
from skykiln.jit import use_threads
from skykiln.stages.judge_probe import JudgeProbe
from skykiln.stages.kernels import available_cores, warm_kernels
from skykiln.stages.snapshot import Snapshot
from tiny_pipeline import write_sky

PIPELINE = """\
skykiln: 1
recipes:
  interior:
    face_size: 64
    specular: {levels: 7, tolerance: 0.01}
    irradiance: {face_size: 16}
    pack: [{container: ktx2, pixels: bc6h}]
sources: {rooms: {files: "rooms/*.exr", recipe: interior}}
"""


def fill(folder, probes):
    """A pipeline of rooms: dim walls, a few bright windows and lamps, noise."""
    (folder / "rooms").mkdir(parents=True)
    (folder / "pipeline.yaml").write_text(PIPELINE)
    for number in range(probes):
        rng = np.random.default_rng(number)
        room = 0.3 + 0.2 * rng.random((128, 256, 3))
        for _ in range(4):
            row, column = rng.integers(10, 90), rng.integers(0, 220)
            room[row : row + 25, column : column + 30] *= rng.uniform(10, 60)
        write_sky(folder / "rooms" / f"{number:04}.exr", pixels=room.astype(np.float16))


class InMemory:
    """What a stage reads, as another stage returned it."""

    def __init__(self, content):
        self._content = content

    def array(self):
        return self._content

    json = array


def bare_chain(stage, done):
    """Contents of a stage by calling `make` alone, what it reads first; `done` by path of stamp."""
    if stage.stamp_path not in done:
        inputs = {}
        for role, below in stage.requires().items():
            inputs[role] = bare_chain(below, done)[below.output_role(role)]
        made = stage.make(inputs)
        done[stage.stamp_path] = {role: InMemory(content) for role, content in made.items()}
    return done[stage.stamp_path]


def bare_share(folder, number, count):
    use_threads(1)
    for target in Snapshot(load_pipeline(folder / "pipeline.yaml")).probes[number::count]:
        done = {}
        for judged in target.requires().values():
            if isinstance(judged, JudgeProbe):
                for stage in judged.requires().values():
                    bare_chain(stage, done)


def bare(folder, cores):
    """Seconds of the bare work on all cores."""
    context = multiprocessing.get_context("fork")
    shares = [context.Process(target=bare_share, args=(folder, n, cores)) for n in range(cores)]
    began = time.perf_counter()
    for share in shares:
        share.start()
    for share in shares:
        share.join()
        assert share.exitcode == 0
    return time.perf_counter() - began


def night(folder, cores):
    """(seconds of a whole `skykiln bake`, share of the cores' time that it used)"""
    before, began = _cpu_seconds(), time.perf_counter()
    command = [sys.executable, "-m", "skykiln", "bake"]
    subprocess.run(command, cwd=folder, check=True, stdout=subprocess.DEVNULL, env=os.environ)
    seconds = time.perf_counter() - began
    return seconds, (_cpu_seconds() - before) / (seconds * cores)


def _cpu_seconds():
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("--probes", type=int, default=1000)
    probes, cores = parser.parse_args().probes, available_cores()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        fill(folder, probes)
        warm_kernels(again=True)
        alone = bare(folder, cores)
        seconds, busy = night(folder, cores)
        each = 1e3 * alone / probes
        print(
            f"{probes} probes on {cores} cores: bare work {alone:.1f} s ({each:.1f} ms a probe), "
            f"night {seconds:.1f} s, ratio {seconds / alone:.2f}, cores busy {busy:.0%}"
        )


if __name__ == "__main__":
    main()
