"""What the engine costs: nights of small probes whose numerics are made once and only handed out after.

    python tests/benchmarks/bench_night.py [--probes 200 2000 10000] [--plain 50 100 200 400] [--folder DIR]

Every probe is a 256 x 128 source baked to 64^2 faces and 7 levels. Decoding, numerics and encoding return
what one real probe gave, so that what is left is the engine: pins, graph, lots, Luigi, digests, files,
stamps, seals, night.json. All times are CPU time of one process, so that other work on the machine counts
little; waits for the disk (fsync, syncfs) are told apart, in seconds of the clock. Prints for each size a
first night, an unchanged night, `plan`, a night that reads all bytes again (--verify), and the largest
memory of the process, which both schedules and bakes; then the same stages as one plain Luigi task each,
with LocalTarget, for some sizes, and what follows from them by least squares for the size of the night.

A folder of 1.5 MB a probe is filled. File systems are slow to give out again what was deleted a moment ago,
so everything is deleted at the end.
"""

import argparse
import json
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
from skykiln.engine import atomic, lots
from skykiln.engine.chains import chain_of, glance_at
from skykiln.engine.content import chunks_of
from skykiln.stages.audit_probe import AuditProbe
from skykiln.stages.decode_source import DecodeSource
from skykiln.stages.draw_probe import DrawProbe
from skykiln.stages.extract_faces import ExtractFaces
from skykiln.stages.filter_level import FilterLevel
from skykiln.stages.gather_irradiance import GatherIrradiance
from skykiln.stages.nights import bake
from skykiln.stages.pack_probe import PackProbe
from skykiln.stages.separate_sun import SeparateSun
from skykiln.stages.snapshot import Snapshot
from tiny_pipeline import nothing_shown, sky_pixels, write_sky

NUMERIC = (
    AuditProbe, DecodeSource, DrawProbe, ExtractFaces, FilterLevel, GatherIrradiance, PackProbe, SeparateSun
)  # fmt: skip
PIPELINE = """\
skykiln: 1
recipes:
  interior: {face_size: 64, specular: {levels: 7, tolerance: 0.01}, irradiance: {face_size: 16}}
sources: {rooms: {files: "rooms/*.exr", recipe: interior}}
"""


def fill(folder, probes):
    """A pipeline of sources that differ in a few bytes."""
    (folder / "rooms").mkdir(parents=True)
    (folder / "pipeline.yaml").write_text(PIPELINE)
    write_sky(folder / "rooms" / "0.exr", pixels=sky_pixels(0, height=128).astype(np.float16))
    data = (folder / "rooms" / "0.exr").read_bytes()
    long_ago = time.time() - 60
    for number in range(probes):
        path = folder / "rooms" / f"{number}.exr"
        path.write_bytes(data[:64] + str(number).encode())
        os.utime(path, (long_ago, long_ago))
    return data


def real_contents(scratch):
    """(stage class, what tells its tasks apart) -> contents, of one real probe."""
    folder = scratch / "real"
    data = fill(folder, 1)
    (folder / "rooms" / "0.exr").write_bytes(data)
    contents = {}

    def kept(make):
        def call(stage, inputs):
            contents[_key(stage)] = made = make(stage, inputs)
            return made

        return call

    originals = {kind: kind.make for kind in NUMERIC}
    for kind in NUMERIC:
        kind.make = kept(kind.make)
    bake(Snapshot(load_pipeline(folder / "pipeline.yaml")), 1, False, False, nothing_shown)
    for kind in NUMERIC:
        kind.make = originals[kind]
    return contents


def _key(stage):
    return type(stage).__name__, getattr(stage, "level", None), getattr(stage, "pack", None)


class DiskWaits:
    """Waits for the disk since it was made: seconds of the clock, and of the CPU in them."""

    def __init__(self):
        self.seconds = self.cpu_seconds = 0.0
        os.fsync = self._timed(os.fsync)
        lots.sync_file_systems = self._timed(atomic.sync_file_systems)

    def _timed(self, call):
        def timed(*arguments):
            began, cpu_began = time.perf_counter(), time.process_time()
            try:
                return call(*arguments)
            finally:
                self.seconds += time.perf_counter() - began
                self.cpu_seconds += time.process_time() - cpu_began

        return timed


def one_night(folder, waits, verified=False):
    """CPU seconds of a night without waits."""
    began = time.process_time() - waits.cpu_seconds
    snapshot = Snapshot(load_pipeline(folder / "pipeline.yaml"), verified=verified)
    night, record = bake(snapshot, 1, False, False, nothing_shown)
    assert record["exit_status"] == 0, night.failures[:3]
    return time.process_time() - waits.cpu_seconds - began


def one_plan(folder):
    """CPU seconds of `plan`."""
    began = time.process_time()
    chains = [glance_at(target) for target in Snapshot(load_pipeline(folder / "pipeline.yaml")).targets]
    assert not [chain for chain in chains if chain.stale]
    return time.process_time() - began


def nights(probes, scratch):
    """Runs in a process of its own, so that memory is that of these nights; prints figures as JSON."""
    contents, waits = real_contents(scratch), DiskWaits()
    for kind in NUMERIC:
        kind.make = lambda stage, inputs: contents[_key(stage)]
    folder = scratch / "nights"
    fill(folder, probes)
    waited, first = waits.seconds, one_night(folder, waits)
    figures = {
        "first": first,
        "waited": waits.seconds - waited,
        "unchanged": one_night(folder, waits),
        "plan": one_plan(folder),
        "verified": one_night(folder, waits, verified=True),
        "memory": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024,
    }
    print(json.dumps(figures))


def plain_luigi(probes, scratch):
    """CPU seconds of the same stages, files and contents as plain Luigi tasks; prints them."""
    import logging

    import luigi

    contents = real_contents(scratch)
    folder = scratch / "real"
    target = Snapshot(load_pipeline(folder / "pipeline.yaml")).probes[0]
    stages = [verdict.stage for verdict in chain_of(target).verdicts]
    graph = {
        stage.stamp_path: (
            [below.stamp_path for below in {b.stamp_path: b for b in stage.requires().values()}.values()],
            _bytes_of(stage, contents),
        )
        for stage in stages
    }

    class Plain(luigi.Task):
        probe = luigi.IntParameter()
        stage = luigi.Parameter()

        def requires(self):
            return [Plain(probe=self.probe, stage=below) for below in graph[self.stage][0]]

        def output(self):
            names = graph[self.stage][1]
            return {name: luigi.LocalTarget(f"{scratch}/plain/{self.probe}/{name}") for name in names}

        def run(self):
            for name, data in graph[self.stage][1].items():
                path = Path(self.output()[name].path)
                path.parent.mkdir(parents=True, exist_ok=True)
                path.write_bytes(data)

    logging.getLogger("luigi-interface").setLevel(logging.CRITICAL)
    roots = [Plain(probe=number, stage=target.stamp_path) for number in range(probes)]
    began = time.process_time()
    luigi.build(roots, local_scheduler=True, no_lock=True, log_level="CRITICAL")
    print(json.dumps({"seconds": time.process_time() - began, "stages": len(stages)}))


def _bytes_of(stage, contents):
    """name -> bytes of a stage's outputs; of stages that are no numerics, as they stand."""
    made = contents.get(_key(stage))
    return {
        f"{type(stage).__name__}_{Path(path).name}": b"".join(chunks_of(made[role]))
        if made
        else Path(path).read_bytes()
        for role, path in stage.files().items()
    }


def apart(what, probes, folder):
    """The figures of a measurement in a process and a folder of its own."""
    scratch = tempfile.mkdtemp(dir=folder)
    command = [sys.executable, __file__, "--apart", what, str(probes), scratch]
    run = subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True)
    return json.loads(run.stdout.splitlines()[-1])


def compare(probes, plain, folder):
    """Print all figures."""
    per_probe = {}
    for count in probes:
        f = apart("nights", count, folder)
        per_probe[count] = f["first"] / count
        print(
            f"{count:6} probes: engine {1e3 * per_probe[count]:.2f} ms a probe "
            f"({per_probe[count] / per_probe[probes[0]]:.2f} of the first line), "
            f"disk waits {1e3 * f['waited'] / count:.2f} ms a probe; unchanged night {f['unchanged']:.2f} s "
            f"({1e3 * f['unchanged'] / count:.2f} ms a probe), plan {f['plan']:.2f} s, "
            f"verified {f['verified']:.2f} s; {f['memory']:.0f} MB",
            flush=True,
        )
    measured = {}
    for count in plain:
        measured[count] = f = apart("plain", count, folder)
        each = 1e3 * f["seconds"] / count
        print(f"{count:6} probes as {f['stages']} plain Luigi tasks each: {each:.1f} ms a probe", flush=True)
    if len(plain) > 2:
        fitted = np.polyfit(plain, [f["seconds"] for f in measured.values()], 2)
        for count in probes:
            seconds = np.polyval(fitted, count)
            ratio = seconds / count / per_probe[count]
            told = f"{seconds:.0f} s, {ratio:.0f} times the engine"
            print(f"{count:6} probes as plain Luigi tasks, extrapolated: {told}")


def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("--probes", type=int, nargs="+", default=[200, 2000, 10000])
    parser.add_argument("--plain", type=int, nargs="*", default=[50, 100, 200, 400])
    parser.add_argument("--folder", help="on which file system; by default that of temporary files")
    parser.add_argument("--apart", nargs=3, help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.apart:
        what, probes, scratch = options.apart
        {"nights": nights, "plain": plain_luigi}[what](int(probes), Path(scratch))
    else:
        with tempfile.TemporaryDirectory(dir=options.folder) as folder:
            compare(options.probes, options.plain, folder)


if __name__ == "__main__":
    main()
