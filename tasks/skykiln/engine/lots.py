"""Lots: many small targets carried through all their stages by one task, in one process.

The stages are the very same that Luigi runs one by one for a big source, with the same stamps: a
changed probe reruns alone, a bad one does not stop the others, and a kill loses one stage at most.
"""

from .running import run_stage
from .staleness import staleness


def bake_lot(targets) -> list:
    """Bring targets up to date, one after the other.

    Returns: the names of those that failed; the causes lie beside their stamps
    """
    failed = []
    for target in targets:
        try:
            bake_depth_first(target, {})
        except Exception:  # even a bug is one probe's; its traceback lies beside the stamp
            failed.append(target.owner)
    return failed


def bake_depth_first(stage, memo: dict):
    """Bring a stage up to date, what it reads first.

    Parameters: memo : verdicts of the stages that are done, by stamp path
    """
    if stage.stamp_path in memo:
        return
    for dependency in stage.requires().values():
        bake_depth_first(dependency, memo)
    verdict = staleness(stage, memo)
    if not verdict.settled:
        run_stage(stage, verdict)
        del memo[stage.stamp_path]
        staleness(stage, memo)


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
