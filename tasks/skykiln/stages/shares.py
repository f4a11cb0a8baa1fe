"""Which targets Luigi runs stage by stage, and which travel in lots."""

import hashlib
import math
from contextlib import contextmanager
from pathlib import Path

from ..config import canonical_json
from ..engine.atomic import remove, write_atomically
from ..engine.lots import form_lots
from ..engine.release import code_digest
from .bake_lot import BakeLot
from .extract_faces import auto_face_size
from .memory import PACKED_PIXEL, expected_bytes, source_bytes
from .publish_probe import PublishProbe
from .snapshot import Snapshot

BIG_SECONDS = 0.2  # a probe that takes longer has stages worth a task each
LONGEST_LOT = 60.0
SHORTEST_LOT = 1.0  # below, a process of its own costs more than it saves
FARM_LOTS = 64  # of a short night: enough for any farm
LONGEST_FARM_LOT = 20.0  # what a machine that dies takes along
LOTS_PER_WORKER = 4  # so that workers end at about the same time


def luigi_tasks(chains, snapshot: Snapshot, workers: int) -> tuple[list, list]:
    """The tasks that bring stale chains up to date.

    Returns: lots, and pairs of a big target and of the number of tasks that it brings along
    """
    small = [chain.target for chain in chains if _is_small(chain.target)]
    big = [chain for chain in chains if not _is_small(chain.target)]
    return _lots(small, snapshot, workers), [(chain.target.full(), chain.waiting) for chain in big]


def farm_lots(chains, snapshot: Snapshot) -> list:
    """The lots of a night on a farm: all stale probes, the big ones alone in theirs."""
    targets = [chain.target for chain in chains if isinstance(chain.target, PublishProbe)]
    seconds = [expected_seconds(target.pinned) for target in targets]
    longest = min(sum(seconds) / FARM_LOTS, LONGEST_FARM_LOT)
    return [_lot(lot, snapshot, farm=True) for lot in form_lots(targets, seconds, longest)]


@contextmanager
def manifests_removed(lots):
    """Remove the manifests of lots when the block ends."""
    try:
        yield
    finally:
        for lot in lots:
            remove(Path((lot.folders or {}).get("build_dir", ""), lot.manifest))


def _is_small(target):
    return isinstance(target, PublishProbe) and expected_seconds(target.pinned) < BIG_SECONDS


def expected_seconds(pinned) -> float:
    """A guess at what a probe takes on two cores: by texels of its chain and bytes of its source."""
    size = source_bytes(pinned)
    # An auto face size follows from the width.
    face = pinned.probe.face_size or auto_face_size(int(math.sqrt(2 * size / PACKED_PIXEL)))
    return 0.01 + 8 * face * face * 2e-7 + size * 2e-8


def _lots(targets, snapshot, workers):
    seconds = [expected_seconds(target.pinned) for target in targets]
    share = sum(seconds) / (LOTS_PER_WORKER * workers)
    longest = min(max(share, SHORTEST_LOT), LONGEST_LOT) if workers > 1 else LONGEST_LOT
    return [_lot(lot, snapshot) for lot in form_lots(targets, seconds, longest)]


def _lot(targets, snapshot, farm=False):
    """A lot's task, and its manifest: a parameter of its length would travel in every message of Luigi."""
    manifest = canonical_json([target.pinned.to_json() for target in targets]).encode()
    name = f"work/.lots/{hashlib.sha256(manifest).hexdigest()[:16]}.json"
    path = snapshot.pipeline.build_dir / name
    write_atomically(path, [manifest], synced=False)
    if farm:
        return BakeLot(manifest=name, night=snapshot.night, code=code_digest())
    largest = max(expected_bytes(target.pinned) for target in targets)
    return BakeLot(manifest=str(path), night=snapshot.night, megabytes=largest >> 20)
