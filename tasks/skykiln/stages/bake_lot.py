"""BakeLot: small probes, carried through all their stages by one Luigi task."""

import json
from pathlib import Path

import luigi

from ..engine.lots import bake_lot
from ..engine.staleness import staleness
from ..errors import SkykilnError
from .probe_stage import PinnedProbe
from .publish_probe import PublishProbe


class BakeLot(luigi.Task):
    """One lot of a manifest: a JSON list of lots, each a list of pinned probes."""

    task_namespace = "skykiln"
    manifest = luigi.Parameter()
    number = luigi.IntParameter()

    def complete(self):
        return all(staleness(target, {}).settled for target in self._targets())

    def run(self):
        failed = bake_lot(self._targets())
        if failed:
            raise SkykilnError(f"{len(failed)} of a lot failed: {', '.join(failed)}")

    def _targets(self):
        lot = json.loads(Path(self.manifest).read_bytes())[self.number]
        return [PublishProbe.sketch(pinned=PinnedProbe.from_json(text)) for text in lot]
