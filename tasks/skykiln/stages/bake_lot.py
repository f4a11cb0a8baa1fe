"""BakeLot: small probes, carried through all their stages by one Luigi task."""

import dataclasses
import json
from pathlib import Path

import luigi

from ..engine.budget import resources_of
from ..engine.chains import chain_of, glance_at
from ..engine.lots import bake_lot
from ..engine.night import failure_of
from ..engine.release import code_digest
from ..errors import SkykilnError
from .kernels import available_cores
from .probe_stage import PinnedProbe
from .publish_probe import PublishProbe


class BakeLot(luigi.Task):
    """One lot.

    manifest : JSON file, a list of pinned probes; on a farm relative to the build folder
    night : as of stages; code : on a farm, digest of the code that scheduled it
    megabytes : of memory that its largest probe is expected to take
    threads : of each kernel; None to leave them as they are. Of the process, not of the task
    folders : of a process on a farm, where the pipeline lies there: {"root": ..., "build_dir": ...}
    """

    task_namespace = "skykiln"
    manifest = luigi.Parameter()
    night = luigi.Parameter()
    code = luigi.Parameter(default="")
    megabytes = luigi.IntParameter(default=0, significant=False)
    threads = None
    folders = None

    @property
    def resources(self):
        if self.code:  # on a farm, whose scheduler knows of no machine's limits
            return {}
        return resources_of(cores=(self.threads or 1) / available_cores(), memory=self.megabytes << 20)

    def complete(self):
        return not any(glance_at(target).stale for target in self._targets)

    def run(self):
        from ..jit import use_threads

        if self.code not in ("", code_digest()):
            raise SkykilnError("this machine has another skykiln than the one that began the night")
        if self.threads:
            use_threads(self.threads)
        targets = self._targets
        names = ", ".join(target.owner for target in targets)
        self._tell(f"begins {names}")
        failed = bake_lot(targets)
        self._tell(f"ended {names}")
        # On a farm another machine would try in vain: who began the night looks at what is complete.
        if failed and not self.folders:
            raise SkykilnError("; ".join(_cause(target) for target in targets if target.owner in failed))

    def _tell(self, sentence):
        if self.folders:
            print(sentence, flush=True)

    @property
    def _targets(self):  # made anew each time: Luigi keeps its tasks until the end
        folders = self.folders or {}
        lot = json.loads(Path(folders.get("build_dir", ""), self.manifest).read_bytes())
        probes = [dataclasses.replace(PinnedProbe.from_json(text), **folders) for text in lot]
        return [PublishProbe.sketch(night=self.night, pinned=pinned) for pinned in probes]


def _cause(target):
    """What stopped a target, with its name: all that Luigi's own log tells of a lot."""
    cause = failure_of(chain_of(target)).cause
    return f"{target.owner}: {cause.replace(f'{target.pinned.root}/', '')}"
