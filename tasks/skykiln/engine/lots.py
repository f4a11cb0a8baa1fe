"""Lots: many small targets carried through all their stages by one task, in one process.

The stages are the very same that Luigi runs one by one for a big source, with the same stamps: a
changed probe reruns alone, a bad one does not stop the others, and a kill loses one stage at most.

The disk is not waited for at every file, which takes longer than a small probe's numerics. A batch of
targets is made up to what is published; then, for all of them at once: everything is brought to the
disk; the published files appear; their names are brought to the disk; stamps and seals appear.
"""

import os
import time

from .atomic import sync_file_systems
from .failures import recorded
from .running import certify, put_in_place, run_stage, write_outputs
from .seals import read_seal, trust_by, write_seal
from .staleness import BY_STAMPS, Trust, staleness

BATCH_SECONDS = 3.0  # between two waits for the disk, which take some hundredths
LARGEST_BATCH = 64


def bake_lot(targets) -> list:
    """Bring targets up to date, one after the other.

    Returns: the names of those that failed; the causes lie beside their stamps
    """
    failed, batch, began = [], [], time.monotonic()
    for target in targets:
        try:
            batch.append(_prepared(target.anew()))
        except Exception:  # even a bug is one probe's; its traceback lies beside the stamp
            failed.append(target.owner)
        if len(batch) == LARGEST_BATCH or time.monotonic() - began > BATCH_SECONDS:
            failed += _publish(batch)
            batch, began = [], time.monotonic()
    return failed + _publish(batch)


def bake_depth_first(stage, memo: dict, trust: Trust = BY_STAMPS):
    """Bring a stage up to date, what it reads first.

    Parameters: memo : verdicts of the stages that are done, by stamp path
    """
    path = stage.stamp_path
    if path in memo:
        return
    for dependency in stage.below.values():
        bake_depth_first(dependency, memo, trust)
    verdict = staleness(stage, memo, trust)
    if not verdict.settled:
        memo[path] = run_stage(stage, verdict, on_disk=False)


def form_lots(items, seconds, longest) -> list:
    """Share out items, in their order, into lots of at most about so many seconds.

    Parameters: seconds : what each item is expected to take; longest : seconds of one lot
    """
    lots, filled = [], longest
    for item, cost in zip(items, seconds, strict=True):
        if filled >= longest:
            lots.append([])
            filled = 0.0
        lots[-1].append(item)
        filled += cost
    return lots


def _prepared(target):
    """(target, verdicts below and of it, its outputs as written beside or None if it is settled)"""
    memo, trust = {}, trust_by(read_seal(target), target)
    for dependency in target.below.values():
        bake_depth_first(dependency, memo, trust)
    verdict = staleness(target, memo, trust)
    if verdict.settled:
        return target, memo, None
    with recorded(target):
        return target, memo, write_outputs(target, verdict, on_disk=False)


def _publish(batch) -> list:
    """Let the outputs of prepared targets appear, safe from a power cut. Returns: names that failed."""
    failed = []
    if batch:
        _sync(batch)
        batch = [each for each in batch if _done(each, failed, _appear)]
        _sync(batch)
        for each in batch:
            _done(each, failed, _close)
    return failed


def _sync(batch):
    targets = [target for target, _, _ in batch]
    files = [path for target in targets[:1] for path in (target.seal_path, *target.paths.values())]
    sync_file_systems({os.path.dirname(path) for path in files})


def _done(each, failed, step):
    target = each[0]
    try:
        with recorded(target):
            step(*each)
    except Exception:
        failed.append(target.owner)
        return False
    return True


def _appear(target, memo, written):
    if written:
        put_in_place(written)


def _close(target, memo, written):
    if written:
        memo[target.stamp_path] = certify(written, on_disk=True)
    write_seal(target, memo.values())
