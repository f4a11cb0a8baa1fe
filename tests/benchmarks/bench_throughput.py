"""A night of interior probes against the bare work in it.

    python tests/benchmarks/bench_throughput.py [--probes 1000]

Sources are 256 x 128 half EXR, baked to 64^2 faces, 7 levels, BC6H. The bare work is decode, numerics and
encode alone, called in one loop in one process per core with single-threaded kernels, nothing written.
Prints the ratio of the night to it, by the clock and by CPU time (on a busy machine look at that alone), how
busy the cores were during the night, and what an unchanged night takes; kernels are compiled before.
"""

import argparse
import multiprocessing
import os
import resource
import subprocess
import sys
import tempfile
import time
from contextlib import contextmanager
from pathlib import Path
from typing import NamedTuple

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

    digest = "0" * 64  # of which an audit makes its seed

    def __init__(self, content):
        self._content = content

    def array(self):
        return self._content

    json = bytes = array


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


class Spent(NamedTuple):
    """Seconds of the clock, and of all cores' time in child processes."""

    clock: float
    cpu: float


@contextmanager
def spending(told):
    """Put what the block takes into the list `told`."""
    before, began = _cpu_seconds(), time.perf_counter()
    yield
    told.append(Spent(time.perf_counter() - began, _cpu_seconds() - before))


def bare(folder, cores):
    """The bare work on all cores."""
    context = multiprocessing.get_context("fork")
    shares = [context.Process(target=bare_share, args=(folder, n, cores)) for n in range(cores)]
    for share in shares:
        share.start()
    for share in shares:
        share.join()
        assert share.exitcode == 0


def night(folder):
    """A whole `skykiln bake`."""
    command = [sys.executable, "-m", "skykiln", "bake"]
    subprocess.run(command, cwd=folder, check=True, stdout=subprocess.DEVNULL, env=os.environ)


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
        spent = []
        with spending(spent):
            bare(folder, cores)
        for _ in range(2):  # the first night, and an unchanged one
            with spending(spent):
                night(folder)
    alone, first, unchanged = spent
    each = 1e3 * alone.cpu / probes
    print(f"{probes} probes on {cores} cores; bare work {each:.1f} ms of CPU time a probe")
    print(
        f"by the clock: bare work {alone.clock:.1f} s, night {first.clock:.1f} s, "
        f"ratio {first.clock / alone.clock:.2f}, cores busy {first.cpu / (first.clock * cores):.0%}"
    )
    print(
        f"by CPU time: bare work {alone.cpu:.1f} s, night {first.cpu:.1f} s, "
        f"ratio {first.cpu / alone.cpu:.2f}; unchanged night {unchanged.cpu:.1f} s, "
        f"{unchanged.cpu / first.cpu:.1%} of the first"
    )


if __name__ == "__main__":
    main()
