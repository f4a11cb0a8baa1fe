"""The roots for Luigi's own command line and for users' pipelines: BakeProbe and BakeAll.

Roots alone read the pipeline file. They pin the sources when Luigi asks whether they are complete,
and hold to these pins while it runs what they require.
"""

import functools
import json
from pathlib import Path

import luigi

from ..config import load_pipeline
from ..engine.chains import chain_of
from ..engine.night import Night, now
from ..engine.staleness import staleness
from ..errors import SkykilnError
from .kernels import available_cores
from .nights import night_file, prepare, write_record
from .shares import luigi_tasks, manifests_removed
from .snapshot import Snapshot


class BakeProbe(luigi.Task):
    """One probe and the BRDF table. `output()` is its probe.json; a probe that a gate holds fails."""

    task_namespace = "skykiln"
    pipeline = luigi.Parameter()
    name = luigi.Parameter()
    _snapshot = None

    def complete(self):
        self._snapshot = Snapshot(_loaded(self.pipeline), [self.name])
        return all(staleness(target, {}).up_to_date for target in self._snapshot.targets)

    def requires(self):
        if self._snapshot is None:
            self.complete()
        return [target.full() for target in self._snapshot.targets]

    def run(self):
        held_by = [why for target in self._snapshot.targets for why in chain_of(target).held_by]
        if held_by:
            raise SkykilnError(f"{self.name}: held: {'; '.join(held_by)}")

    def output(self):
        return luigi.LocalTarget(_loaded(self.pipeline).build_dir / "probes" / self.name / "probe.json")


class BakeAll(luigi.Task):
    """One night: every probe of the pipeline, and night.json, which is its output.

    Luigi doesn't run what requires a failed task: after a failure night.json stays that of the last
    good night here, where `skykiln bake` writes one that names the failures.

    night : ISO 8601 time that tells one night from another; by default when the process began
    """

    task_namespace = "skykiln"
    pipeline = luigi.Parameter()
    night = luigi.Parameter(default=now())
    _snapshot = None
    _night = None
    _tasks = None
    _lots = ()

    def complete(self):
        self._tasks = None
        self._snapshot = Snapshot(load_pipeline(self.pipeline), night=self.night)
        self._night = Night(self._snapshot.targets, self.night)
        return not self._night.stale and _is_written(night_file(self._snapshot.pipeline), self.night)

    def requires(self):
        if self._tasks is None:
            self._tasks = self._stale_tasks()
        return self._tasks

    def _stale_tasks(self):
        if self._night is None:
            self.complete()
        if not self._night.stale:
            return []
        workers = available_cores()  # Luigi keeps to itself how many there are
        prepare(self._night, self._snapshot, forks=workers > 1)
        self._lots, big = luigi_tasks(self._night.stale, self._snapshot, workers)
        return [*self._lots, *(task for task, _ in big)]

    def run(self):
        self._night.seal()
        with manifests_removed(self._lots):
            write_record(self._night, self._snapshot)

    def output(self):
        return luigi.LocalTarget(night_file(_loaded(self.pipeline)))


def _loaded(path):
    """The pipeline of a file, read once for the many probes that a user's pipeline may require."""
    found = Path(path)
    status = found.stat() if found.exists() else None
    return _load(path, status and (status.st_mtime_ns, status.st_size, status.st_ino))


@functools.lru_cache(maxsize=8)
def _load(path, seen):
    return load_pipeline(path)


def _is_written(path: Path, started):
    try:
        return json.loads(path.read_bytes())["started"] == started
    except (OSError, ValueError, KeyError):
        return False
