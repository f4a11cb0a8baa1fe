"""BakeLot: small probes, carried through all their stages by one Luigi task."""

import functools
import json
from pathlib import Path

import luigi

from ..engine.chains import chain_of, glance_at
from ..engine.lots import bake_lot
from ..engine.night import failure_of
from ..errors import SkykilnError
from .probe_stage import PinnedProbe
from .publish_probe import PublishProbe


class BakeLot(luigi.Task):
    """One lot.

    manifest : JSON file, a list of pinned probes; night : as of stages
    threads : of each kernel; None to leave them as they are. Of the process, not of the task
    """

    threads = None

    task_namespace = "skykiln"
    manifest = luigi.Parameter()
    night = luigi.Parameter()

    def complete(self):
        return not any(glance_at(target).stale for target in self._targets)

    def run(self):
        from ..jit import use_threads

        if self.threads:
            use_threads(self.threads)
        failed = bake_lot(self._targets)
        if failed:
            targets = [target for target in self._targets if target.owner in failed]
            raise SkykilnError("; ".join(_cause(target) for target in targets))

    @functools.cached_property
    def _targets(self):
        lot = json.loads(Path(self.manifest).read_bytes())
        return [PublishProbe.sketch(night=self.night, pinned=PinnedProbe.from_json(text)) for text in lot]


def _cause(target):
    """What stopped a target, with its name: all that Luigi's own log tells of a lot."""
    cause = failure_of(chain_of(target)).cause
    return f"{target.owner}: {cause.replace(f'{target.pinned.root}/', '')}"
